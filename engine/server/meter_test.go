package server

import (
	"context"
	"errors"
	"fmt"
	"net"
	"net/http"
	"net/http/httptest"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"github.com/prometheus/common/expfmt"
	naming "github.com/prometheus/common/model"
	collectorv1 "go.opentelemetry.io/proto/otlp/collector/trace/v1"
	"google.golang.org/grpc"
	healthv1 "google.golang.org/grpc/health/grpc_health_v1"

	"leadline/engine/client"
	"leadline/engine/server/operate"
	leadlinev1 "leadline/proto/leadline/v1"
)

// scrape reads metrics as Prometheus does, by a parser of its library.
func scrape(t *testing.T, m *operate.Metrics) func(name string, labels ...string) float64 {
	t.Helper()
	w := httptest.NewRecorder()
	m.Handler(nil).ServeHTTP(w, httptest.NewRequest(http.MethodGet, "/metrics", nil))
	text := w.Body.String()
	if strings.Contains(text, "van-seen") {
		t.Errorf("the metrics name a vehicle:\n%s", text)
	}
	p := expfmt.NewTextParser(naming.UTF8Validation)
	families, err := p.TextToMetricFamilies(strings.NewReader(text))
	if err != nil {
		t.Fatal(err)
	}
	return func(name string, labels ...string) (sum float64) {
		for _, s := range families[name].GetMetric() {
			fits := 0
			for _, l := range s.GetLabel() {
				for _, want := range labels {
					if l.GetValue() == want {
						fits++
					}
				}
			}
			if fits == len(labels) {
				sum += s.GetCounter().GetValue() + s.GetGauge().GetValue() + float64(s.GetHistogram().GetSampleCount())
			}
		}
		return sum
	}
}

// TestMeters proves that what vehicles and callers do is counted as it was.
func TestMeters(t *testing.T) {
	m := operate.NewMetrics("v")
	_, conn := serve(t, Config{Metrics: m})
	api := leadlinev1.NewPositionServiceClient(conn)
	evs := voyage(3, 5)
	st, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("van-seen"), Drive: "d"})
	late := evs[0]
	late.Time, late.Sensor = began-3600e9, "gnss"
	late.Measurement = evs[5].Measurement // a fix
	if err := st.Send(batch(1, append(evs[:len(evs):len(evs)], late)...)); err != nil {
		t.Fatal(err)
	}
	for {
		r, err := st.Recv()
		if err != nil {
			t.Fatal(err)
		}
		if r.GetReceipt() != nil {
			break
		}
	}
	follow, err := api.Follow(limited(t), &leadlinev1.FollowRequest{})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := follow.Recv(); err != nil {
		t.Fatal(err)
	}
	if _, err := api.Where(limited(t), &leadlinev1.WhereRequest{}); err == nil {
		t.Fatal("asked for nobody")
	}
	if _, err := api.Where(limited(t), &leadlinev1.WhereRequest{Vehicles: []string{"van-seen"}}); err != nil {
		t.Fatal(err)
	}
	got := scrape(t, m)
	for _, c := range []struct {
		name   string
		labels []string
		want   float64
	}{
		{"leadline_measurements_accepted_total", nil, 6},
		{"leadline_measurements_refused_total", []string{"TOO_LATE"}, 1},
		{"leadline_calls_total", []string{"Where", "OK"}, 1},
		{"leadline_calls_total", []string{"Where", "InvalidArgument"}, 1},
		{"leadline_call_refusals_total", []string{"BAD_FIELD"}, 1},
		{"leadline_call_seconds", []string{"Where"}, 2},
		{"leadline_call_seconds", []string{"Feed"}, 0},
		{"leadline_acknowledgement_seconds", nil, 1},
		{"leadline_drives", []string{"connected"}, 1},
		{"leadline_drives", []string{"ended"}, 0},
		{"leadline_streams", []string{"Feed"}, 1},
		{"leadline_streams", []string{"Follow"}, 1},
		{"leadline_vehicles", nil, 1},
		{"leadline_maps", nil, 1},
		{"leadline_ready", nil, 1},
	} {
		if v := got(c.name, c.labels...); v != c.want {
			t.Errorf("%s%v is %v, want %v", c.name, c.labels, v, c.want)
		}
	}
	if got("leadline_cells") == 0 || got("leadline_cells") != got("leadline_cells_largest") || got("leadline_posteriors_total") == 0 {
		t.Errorf("%v cells, %v the most, %v posteriors", got("leadline_cells"), got("leadline_cells_largest"), got("leadline_posteriors_total"))
	}
	if err := st.Send(ending); err != nil {
		t.Fatal(err)
	}
	_ = ends(st)
	got = scrape(t, m)
	if got("leadline_drives", "ended") != 1 || got("leadline_vehicles") != 0 || got("leadline_calls_total", "Feed", "OK") != 1 {
		t.Errorf("after the end: %v ended, %v looked after, %v streams", got("leadline_drives", "ended"), got("leadline_vehicles"), got("leadline_calls_total", "Feed", "OK"))
	}
}

// TestHealth proves that health means that the server can serve: not before it
// listens, not while a check fails, not once it stops.
func TestHealth(t *testing.T) {
	var broken atomic.Bool
	cfg := Config{Maps: []Map{sea()}, Checks: map[string]func() error{"journal": func() error {
		if broken.Load() {
			return errors.New("the disk is full")
		}
		return nil
	}}}
	s, err := New(cfg)
	if err != nil {
		t.Fatal(err)
	}
	if err := s.Ready(); err == nil || !strings.Contains(err.Error(), "not begun") {
		t.Errorf("before it serves: %v", err)
	}
	s, conn := serve(t, cfg)
	watch, err := healthv1.NewHealthClient(conn).Watch(limited(t), &healthv1.HealthCheckRequest{Service: leadlinev1.PositionService_ServiceDesc.ServiceName})
	if err != nil {
		t.Fatal(err)
	}
	next := func(want healthv1.HealthCheckResponse_ServingStatus) {
		t.Helper()
		if r, err := watch.Recv(); err != nil || r.GetStatus() != want {
			t.Errorf("health is %v, %v; want %v", r, err, want)
		}
	}
	next(healthv1.HealthCheckResponse_SERVING)
	broken.Store(true)
	next(healthv1.HealthCheckResponse_NOT_SERVING)
	if err := s.Ready(); err == nil || err.Error() != "journal: the disk is full" {
		t.Errorf("while it is broken: %v", err)
	}
	broken.Store(false)
	next(healthv1.HealthCheckResponse_SERVING)
	go func() { _ = s.Shutdown(limited(t)) }()
	next(healthv1.HealthCheckResponse_NOT_SERVING)
}

// collector is where traces go.
type collector struct {
	collectorv1.UnimplementedTraceServiceServer
	mu    sync.Mutex
	names []string
	text  string
}

func (c *collector) Export(_ context.Context, req *collectorv1.ExportTraceServiceRequest) (*collectorv1.ExportTraceServiceResponse, error) {
	c.mu.Lock()
	defer c.mu.Unlock()
	for _, r := range req.GetResourceSpans() {
		for _, s := range r.GetScopeSpans() {
			for _, span := range s.GetSpans() {
				c.names = append(c.names, span.GetName())
			}
		}
	}
	c.text += fmt.Sprint(req)
	return &collectorv1.ExportTraceServiceResponse{}, nil
}

// TestTraces proves by a real collector that calls are traced, and that traces
// say neither who was asked for nor where they are.
func TestTraces(t *testing.T) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	to, c := grpc.NewServer(), &collector{}
	collectorv1.RegisterTraceServiceServer(to, c)
	go func() { _ = to.Serve(l) }()
	defer to.Stop()
	traces, err := operate.NewTraces(t.Context(), "http://"+l.Addr().String(), "v7", 1)
	if err != nil {
		t.Fatal(err)
	}
	s, conn := serve(t, Config{Traces: traces.Handler()})
	if _, err := fed(limited(t), conn, client.Drive{Header: header("van-seen")}, voyage(1, 3)); err != nil {
		t.Fatal(err)
	}
	if _, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"van-seen"}}); err != nil {
		t.Fatal(err)
	}
	if err := s.Shutdown(limited(t)); err != nil { // streams have ended then
		t.Fatal(err)
	}
	ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
	defer cancel()
	if err := traces.Close(ctx); err != nil {
		t.Fatal(err)
	}
	c.mu.Lock()
	defer c.mu.Unlock()
	names := strings.Join(c.names, " ")
	if !strings.Contains(names, "PositionService/Feed") || !strings.Contains(names, "PositionService/Where") || !strings.Contains(c.text, "v7") {
		t.Errorf("traced: %s", names)
	}
	if strings.Contains(c.text, "van-seen") || strings.Contains(c.text, "53.") {
		t.Errorf("a trace says whose call it was, or where: %s", c.text)
	}
}
