package operate

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net"
	"net/http"
	"net/http/httptest"
	"os"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/VictoriaMetrics/metricsql"
	"github.com/goccy/go-yaml"
	"github.com/prometheus/common/expfmt"
	"github.com/prometheus/common/model"
	"go.uber.org/goleak"
)

func TestMain(m *testing.M) {
	goleak.VerifyTestMain(m)
}

// scraped is what a scrape has, by name.
func scraped(t *testing.T, m *Metrics) map[string]map[string]float64 {
	t.Helper()
	w := httptest.NewRecorder()
	m.Handler(func() error { return nil }).ServeHTTP(w, httptest.NewRequest(http.MethodGet, "/metrics", nil))
	p := expfmt.NewTextParser(model.UTF8Validation)
	families, err := p.TextToMetricFamilies(w.Body)
	if err != nil {
		t.Fatal(err)
	}
	out := map[string]map[string]float64{}
	for name, f := range families {
		if f.GetHelp() == "" {
			t.Errorf("%s has no help", name)
		}
		for _, s := range f.GetMetric() {
			var labels []string
			for _, l := range s.GetLabel() {
				labels = append(labels, l.GetValue())
			}
			if out[name] == nil {
				out[name] = map[string]float64{}
			}
			out[name][strings.Join(labels, " ")] = s.GetCounter().GetValue() + s.GetGauge().GetValue() + float64(s.GetHistogram().GetSampleCount())
		}
	}
	return out
}

// everyMetric is a set in which everything has been counted.
func everyMetric() *Metrics {
	m := NewMetrics("v7")
	m.Watch(func() Fleet {
		return Fleet{
			Connected: 3, Silent: 2, Ended: 1, Statuses: map[string]int{"located": 4}, Alarms: map[string]int{"bias": 5}, Cells: 600, LargestCells: 300,
			LargestPruned: 1e-9, Streams: 7, Followers: 8, SearchesRunning: 9, SearchesWaiting: 10, Load: 2.5, Maps: 11, Ready: true,
		}
	})
	m.Gauge("leadline_certificate_end_seconds", "When the server's certificate ends, s since 1970.", nil, func() float64 { return 2e9 })
	m.Called("Where", "OK", "", false, time.Millisecond)
	m.Called("Feed", "Unavailable", "STOPPING", true, time.Hour)
	m.Accepted()
	m.Refused("TOO_LATE")
	m.Released(12)
	m.Acknowledged(2 * time.Millisecond)
	m.Skipped(13)
	m.Thinned()
	m.HeldBack("rate", 1500*time.Millisecond)
	return m
}

// TestMetrics proves by a scrape, which a library parses, that everything that
// is counted is there, and once.
func TestMetrics(t *testing.T) {
	got := scraped(t, everyMetric())
	for name, want := range map[string]map[string]float64{
		"leadline_calls_total":                 {"OK Where": 1, "Unavailable Feed": 1},
		"leadline_call_seconds":                {"Where": 1},
		"leadline_call_refusals_total":         {"STOPPING": 1},
		"leadline_measurements_accepted_total": {"": 1},
		"leadline_measurements_refused_total":  {"TOO_LATE": 1},
		"leadline_posteriors_total":            {"": 12},
		"leadline_acknowledgement_seconds":     {"": 1},
		"leadline_followers_skipped_total":     {"": 13},
		"leadline_build_info":                  {"v7": 1},
		"leadline_drives":                      {"connected": 3, "silent": 2, "ended": 1},
		"leadline_vehicles":                    {"located": 4},
		"leadline_alarms":                      {"bias": 5},
		"leadline_cells":                       {"": 600},
		"leadline_cells_largest":               {"": 300},
		"leadline_mass_pruned_largest":         {"": 1e-9},
		"leadline_streams":                     {"Feed": 7, "Follow": 8},
		"leadline_searches":                    {"running": 9, "waiting": 10},
		"leadline_load":                        {"": 2.5},
		"leadline_posteriors_thinned_total":    {"": 1},
		"leadline_held_back_seconds_total":     {"rate": 1.5},
		"leadline_maps":                        {"": 11},
		"leadline_ready":                       {"": 1},
		"leadline_certificate_end_seconds":     {"": 2e9},
	} {
		if fmt.Sprint(got[name]) != fmt.Sprint(want) {
			t.Errorf("%s is %v, want %v", name, got[name], want)
		}
	}
	for _, name := range []string{"go_goroutines", "process_resident_memory_bytes", "process_cpu_seconds_total"} {
		if _, there := got[name][""]; !there { // a process that has just begun may have used none
			t.Errorf("%s is not there", name)
		}
	}
}

// known checks an expression of PromQL, and that what it asks for is in a
// scrape.
func known(t *testing.T, where, expr string, metrics map[string]map[string]float64) {
	t.Helper()
	e, err := metricsql.Parse(expr)
	if err != nil {
		t.Errorf("%s: %v", where, err)
		return
	}
	n := 0
	metricsql.VisitAll(e, func(e metricsql.Expr) {
		m, ok := e.(*metricsql.MetricExpr)
		if !ok {
			return
		}
		for _, filters := range m.LabelFilterss {
			for _, f := range filters {
				if f.Label == "__name__" {
					n++
					name := strings.TrimSuffix(f.Value, "_bucket")
					if metrics[name] == nil {
						t.Errorf("%s asks for %s, which no server has", where, f.Value)
					}
				}
			}
		}
	})
	if n == 0 {
		t.Errorf("%s asks for nothing: %s", where, expr)
	}
}

// TestAlertRules proves that the alert rules are such by their format, and ask
// for what a server has.
func TestAlertRules(t *testing.T) {
	text, err := os.ReadFile("../../../docs/operate/alerts.yaml")
	if err != nil {
		t.Fatal(err)
	}
	var file struct {
		Groups []struct {
			Name  string
			Rules []struct {
				Alert, Expr, For    string
				Labels, Annotations map[string]string
			}
		}
	}
	if err := yaml.UnmarshalWithOptions(text, &file, yaml.Strict()); err != nil {
		t.Fatal(err)
	}
	metrics, n := scraped(t, everyMetric()), 0
	for _, g := range file.Groups {
		for _, r := range g.Rules {
			n++
			if r.Alert == "" || g.Name == "" || r.Annotations["summary"] == "" || r.Annotations["action"] == "" || r.Labels["severity"] == "" {
				t.Errorf("rule %d lacks a name, a severity, a summary or what to do: %+v", n, r)
			}
			if r.For != "" {
				if _, err := model.ParseDuration(r.For); err != nil {
					t.Errorf("%s: %v", r.Alert, err)
				}
			}
			known(t, r.Alert, r.Expr, metrics)
		}
	}
	if n < 8 {
		t.Errorf("%d rules were checked", n)
	}
}

// TestDashboard proves that each panel asks for what a server has.
func TestDashboard(t *testing.T) {
	text, err := os.ReadFile("../../../docs/operate/dashboard.json")
	if err != nil {
		t.Fatal(err)
	}
	var file struct {
		Panels []struct {
			ID      int
			Title   string
			Targets []struct{ Expr string }
		}
	}
	if err := json.Unmarshal(text, &file); err != nil {
		t.Fatal(err)
	}
	metrics := scraped(t, everyMetric())
	var ids []int
	for _, p := range file.Panels {
		if p.Title == "" || len(p.Targets) == 0 || slices.Contains(ids, p.ID) {
			t.Errorf("panel %d, %q, has no title or asks for nothing, or has another one's number", p.ID, p.Title)
		}
		ids = append(ids, p.ID)
		for _, target := range p.Targets {
			known(t, p.Title, target.Expr, metrics)
		}
	}
	if len(ids) < 10 {
		t.Errorf("%d panels were checked", len(ids))
	}
}

// TestListener proves over a real connection that readiness says why not, and
// that profiles are for this machine alone.
func TestListener(t *testing.T) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	var broken error
	h := everyMetric().Handler(func() error { return broken })
	stop := Serve(l, h)
	get := func(path string) (int, string) {
		c := &http.Client{Transport: &http.Transport{DisableKeepAlives: true}}
		r, err := c.Get("http://" + l.Addr().String() + path)
		if err != nil {
			t.Fatal(err)
		}
		defer r.Body.Close()
		text, err := io.ReadAll(r.Body)
		if err != nil {
			t.Fatal(err)
		}
		return r.StatusCode, string(text)
	}
	for path, words := range map[string]string{
		"/metrics": "leadline_ready 1", "/live": "answers", "/ready": "can serve", "/debug/pprof/goroutine?debug=1": "goroutine profile", "/debug/pprof/": "heap",
	} {
		if code, text := get(path); code != 200 || !strings.Contains(text, words) {
			t.Errorf("%s: %d %.200s", path, code, text)
		}
	}
	broken = errors.New("the disk is full")
	if code, text := get("/ready"); code != 503 || !strings.Contains(text, "the disk is full") {
		t.Errorf("not ready: %d %s", code, text)
	}
	if code, _ := get("/live"); code != 200 {
		t.Errorf("not ready, but alive: %d", code)
	}
	if code, _ := get("/"); code != 404 {
		t.Errorf("nothing is there: %d", code)
	}
	stop()
	if _, err := http.Get("http://" + l.Addr().String()); err == nil {
		t.Error("it answers after it was stopped")
	}
	for from, host := range map[string]string{"10.1.2.3:4000": "10.1.2.3", "127.0.0.1:4000": "evil.example", "[2001:db8::1]:4000": "localhost", "": "localhost"} {
		r := httptest.NewRequest(http.MethodGet, "/debug/pprof/heap", nil)
		r.RemoteAddr, r.Host = from, host
		w := httptest.NewRecorder()
		if h.ServeHTTP(w, r); w.Code != 403 {
			t.Errorf("a profile from %q as %s: %d", from, host, w.Code)
		}
		r = httptest.NewRequest(http.MethodGet, "/metrics", nil)
		r.RemoteAddr, r.Host = from, host
		w = httptest.NewRecorder()
		if h.ServeHTTP(w, r); w.Code != 200 {
			t.Errorf("metrics from %q as %s: %d", from, host, w.Code)
		}
	}
}

// TestBadTraces proves that an endpoint without sense is an error in words.
func TestBadTraces(t *testing.T) {
	for _, c := range []struct {
		endpoint string
		share    float64
		words    string
	}{
		{"collector:4317", 1, "give http://HOST:PORT"}, {"ftp://collector:4317", 1, "give http://HOST:PORT"}, {"http://127.0.0.1:4317", 1.5, "from 0 to 1"}, {"http://127.0.0.1:4317", -1, "from 0 to 1"},
	} {
		if _, err := NewTraces(context.Background(), c.endpoint, "v", c.share); err == nil || !strings.Contains(err.Error(), c.words) {
			t.Errorf("%+v: %v", c, err)
		}
	}
}
