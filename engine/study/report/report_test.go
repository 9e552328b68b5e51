package report

import (
	"bytes"
	"encoding/json"
	"encoding/xml"
	"errors"
	"fmt"
	"html"
	"image/png"
	"io"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/study/results"
	"leadline/engine/study/score"
	"leadline/engine/study/track"
)

// nasty is what a file may have for a name or a text.
const nasty = `<img src=x onerror="document.title='owned'"></script><script>document.title='owned'</script>' & "#D55E00`

// left writes a run's folder: ten minutes over which the error grows to 20 m, of
// which the first is not located.
func left(t *testing.T, dir, setting, folder string, change func(*results.Run, *score.Score)) {
	t.Helper()
	at := filepath.Join(dir, setting, folder)
	if err := os.MkdirAll(at, 0o755); err != nil {
		t.Fatal(err)
	}
	var table strings.Builder
	table.WriteString("time,status,lon_deg,lat_deg,truth_lon_deg,truth_lat_deg,error_m,radius95_m,protection_m\n")
	for s := range 600 {
		status, radius := "located", "15"
		switch {
		case s < 60:
			status, radius = "unsure", "900"
		case s > 500:
			radius = ""
		}
		fmt.Fprintf(&table, "2030-05-01T12:%02d:%02dZ,%s,%.6f,45,%.6f,45.0001,%g,8,%s\n", s/60, s%60, status, -30+1e-4*float64(s), -30+1e-4*float64(s), float64(s)/30, radius)
	}
	half, after, n, held, anees := 10.0, 60.0, 3, 0.95, 2.0
	r := results.Run{
		Drive: folder, DriveFile: folder, Vehicle: "van", Map: "town", MapFingerprint: "f", Setting: setting, Set: []string{},
		AlertLimitM: 25, Program: "p", Version: "v", Command: []string{"leadline", "replay", "a b"},
		Places: []results.Place{{Name: "mast", Lon: -29.99, Lat: 45}},
	}
	s := &score.Score{Drive: folder, Posteriors: 600, LocatedAfterS: &after}
	s.Figures = score.Figures{Scored: 540, RMSEM: &half, MeanM: &half, P50M: &half, P95M: &half, MaxM: &half, Coverage95: &held, ANEES: &anees, BeyondProtection: &n}
	s.RankAlong, s.RankAcross, s.Independent = make([]int, 20), make([]int, 20), &after
	s.RankAlong[3], s.RankAcross[7] = 400, 500
	s.Sensors = []score.Innovation{{Sensor: "odo", Kind: "travel", Component: 1, Weighed: 9, Scores: 9, Histogram: make([]int, 16)}, {Sensor: "gyro"}}
	if change != nil {
		change(&r, s)
	}
	for name, v := range map[string]any{results.RunFile: r, results.ScoreFile: s} {
		if err := results.WriteJSON(filepath.Join(at, name), v); err != nil {
			t.Fatal(err)
		}
	}
	if err := os.WriteFile(filepath.Join(at, results.TableFile), []byte(table.String()), 0o600); err != nil {
		t.Fatal(err)
	}
}

func town(string, string) (*track.Ground, error) {
	return &track.Ground{Frame: geo.NewFrame(geo.FromDegrees(-30, 45)), Roads: [][]geo.Point{{{E: -500}, {E: 5000}}, {{N: 9e5}, {N: 9.1e5}}}}, nil
}

func hostile(t *testing.T) string {
	t.Helper()
	dir := t.TempDir()
	left(t, dir, results.Given, "one", func(r *results.Run, s *score.Score) {
		r.Drive, r.DriveFile, r.Vehicle, r.MapSource, r.FirstRefusal, r.Refused = nasty, nasty, nasty, nasty, nasty, 1
		r.Partial, r.Stopped, r.Command = true, nasty, []string{"leadline", nasty}
		s.Sensors[0].Sensor = nasty
	})
	return dir
}

func written(t *testing.T, in Input) (*Report, string) {
	t.Helper()
	r, err := Make(in)
	if err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	if err := r.WriteHTML(&b); err != nil {
		t.Fatal(err)
	}
	return r, b.String()
}

var svg = regexp.MustCompile(`(?s)<svg.*?</svg>`)

// TestPage: texts are escaped, pictures are well-formed and follow light and dark,
// nothing is loaded, and all figures are in the page.
func TestPage(t *testing.T) {
	r, page := written(t, Input{Dirs: []string{hostile(t)}, Ground: town, Version: nasty, Command: []string{"leadline", "report", nasty}})
	for _, bad := range []string{"<img", "<script>", `onerror="`, "http://", "https://", "src=", "url(", "@import", "<link"} {
		for at := range strings.SplitSeq(page, bad) {
			if len(at) == len(page) {
				continue
			}
			if bad == "src=" || bad == "http://" { // in words, escaped, or a namespace
				continue
			}
			t.Errorf("the page has %q", bad)
			break
		}
	}
	if n := strings.Count(page, "http://"); n != strings.Count(page, "http://www.w3.org/") {
		t.Error("the page names an address")
	}
	pictures := svg.FindAllString(page, -1)
	if len(pictures) != 5 {
		t.Fatalf("%d pictures, want map, time, scatter, ranks and one sensor", len(pictures))
	}
	for i, p := range pictures {
		d := xml.NewDecoder(strings.NewReader(p))
		for {
			if _, err := d.Token(); errors.Is(err, io.EOF) {
				break
			} else if err != nil {
				t.Fatalf("picture %d: %v", i, err)
			}
		}
		if !strings.Contains(p, "var(--ink)") || regexp.MustCompile(`:#[0-9A-F]{6}`).MatchString(p) {
			t.Errorf("picture %d has colours of its own", i)
		}
	}
	_, text, ok := strings.Cut(page, `id="figures">`)
	text, _, _ = strings.Cut(text, "</script>")
	var back Report
	if err := json.Unmarshal([]byte(text), &back); !ok || err != nil {
		t.Fatal(err)
	}
	if len(back.Runs) != 1 || back.Runs[0].Run.Drive != nasty || *back.Runs[0].Score.Figures.P95M != 10 || back.Runs[0].WeakFound != len(r.Runs[0].Weak) {
		t.Errorf("%+v", back.Runs[0])
	}
	for _, want := range []string{html.EscapeString(`leadline report '<img`), "is partial", "were refused", "An aid, not certified", "2030-05-01T12:00:00Z"} {
		if !strings.Contains(page, want) {
			t.Errorf("the page does not say %q", want)
		}
	}
}

// TestBrowser opens the page in Chromium: no text of a file becomes markup.
func TestBrowser(t *testing.T) {
	chromium, err := exec.LookPath("chromium")
	if err != nil {
		t.Skip("chromium is not installed")
	}
	if testing.Short() {
		t.Skip("starts a browser")
	}
	_, page := written(t, Input{Dirs: []string{hostile(t)}, Ground: town})
	path := filepath.Join(t.TempDir(), "report.html")
	if err := os.WriteFile(path, []byte(page), 0o600); err != nil {
		t.Fatal(err)
	}
	dom, err := exec.Command(chromium, "--headless", "--no-sandbox", "--disable-gpu", "--no-first-run", "--disable-background-networking",
		"--disable-component-update", "--disable-sync", "--user-data-dir="+t.TempDir(), "--dump-dom", "file://"+path).Output()
	if err != nil {
		t.Fatal(err)
	}
	title := html.UnescapeString(string(regexp.MustCompile(`<title>(.*?)</title>`).FindSubmatch(dom)[1]))
	if want := "How well it was positioned: " + nasty; title != want {
		t.Errorf("the title is %q", title)
	}
	for name, want := range map[string]int{"<img": 0, "<script": 1, "<figure": 5, "<svg": 5} {
		if n := bytes.Count(bytes.Split(dom, []byte(`id="figures"`))[0], []byte(name)); n != want {
			t.Errorf("%d of %s, want %d", n, name, want)
		}
	}
}

// TestSeveral: settings are compared with the first, what cannot be compared is
// said, and the smallest errors are left out of the pictures.
func TestSeveral(t *testing.T) {
	dir, other := t.TempDir(), t.TempDir()
	for i := range mostDrawn + 2 {
		left(t, dir, "a=1", fmt.Sprintf("drive-%02d", i), func(r *results.Run, s *score.Score) {
			p95 := float64(i)
			s.Figures.P95M, r.HeldOut = &p95, i == 0
			if i == 1 {
				s.LocatedAfterS = nil
			}
		})
	}
	left(t, dir, "a=2", "drive-07", func(r *results.Run, _ *score.Score) { r.Program = "another" })
	left(t, other, results.Given, "alone", nil)
	r, page := written(t, Input{Dirs: []string{dir}, Ground: func(string, string) (*track.Ground, error) { return nil, errors.New("no such map") }})
	if len(r.Comparisons) != 1 || r.Comparisons[0].Drives != 1 || r.Comparisons[0].B != "a=2" || len(r.Settings) != 3 {
		t.Errorf("%+v, %+v", r.Comparisons, r.Settings)
	}
	undrawn := map[string]bool{}
	for _, x := range r.Runs {
		if !x.Drawn {
			undrawn[x.Run.Drive] = true
		}
	}
	if len(undrawn) != 3 || !undrawn["drive-00"] || !undrawn["drive-02"] || undrawn["drive-01"] {
		t.Errorf("without pictures: %v", undrawn)
	}
	for _, want := range []string{"without the map under them: no such map", "2 different programs", "3 of 63 runs", "drive-07 · a=<wbr>2"} {
		if !strings.Contains(page, want) {
			t.Errorf("the page does not say %q", want)
		}
	}
	if len(page) > 5e6 {
		t.Errorf("%d runs take %d bytes", len(r.Runs), len(page))
	}
	if r, _ := written(t, Input{Dirs: []string{filepath.Join(dir, "a=2"), other}}); len(r.Comparisons) != 0 || !strings.Contains(strings.Join(r.Cautions, "\n"), "no drive is in both") {
		t.Errorf("%v", r.Cautions)
	}
	for want, dirs := range map[string][]string{
		"given twice":      {dir, dir},
		"there is no fold": {filepath.Join(dir, "nothing")},
	} {
		if _, err := Make(Input{Dirs: dirs}); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v: %v", dirs, err)
		}
	}
	if err := os.Remove(filepath.Join(other, results.Given, "alone", results.TableFile)); err != nil {
		t.Fatal(err)
	}
	if _, err := Make(Input{Dirs: []string{other}}); err == nil || !strings.Contains(err.Error(), "holds no track.csv") {
		t.Error(err)
	}
}

// TestPictures: each as SVG and PNG, and all figures.
func TestPictures(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "pictures")
	r, _ := written(t, Input{Dirs: []string{hostile(t)}, Ground: town})
	if err := r.WritePictures(dir); err != nil {
		t.Fatal(err)
	}
	pngs, _ := filepath.Glob(filepath.Join(dir, "*.png"))
	svgs, _ := filepath.Glob(filepath.Join(dir, "*.svg"))
	if len(pngs) != 5 || len(svgs) != 5 {
		t.Fatalf("%v %v", pngs, svgs)
	}
	f, err := os.Open(pngs[0])
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	if _, err := png.Decode(f); err != nil {
		t.Error(err)
	}
	var back Report
	if err := results.ReadJSON(filepath.Join(dir, "figures.json"), &back); err != nil || len(back.Runs) != 1 {
		t.Error(err)
	}
}

// TestNothingKnown: a run without posteriors, and one without truth and radii.
func TestNothingKnown(t *testing.T) {
	for _, rows := range []string{"", "2030-05-01T12:00:00Z,unsure,1,2,,,,9,\n"} {
		dir := t.TempDir()
		left(t, dir, results.Given, "empty", func(_ *results.Run, s *score.Score) { *s = score.Score{Drive: "empty"} })
		head := "time,status,lon_deg,lat_deg,truth_lon_deg,truth_lat_deg,error_m,radius95_m,protection_m\n"
		if err := os.WriteFile(filepath.Join(dir, results.Given, "empty", results.TableFile), []byte(head+rows), 0o600); err != nil {
			t.Fatal(err)
		}
		_, page := written(t, Input{Dirs: []string{dir}})
		if !strings.Contains(page, "no truth to compare with") || strings.Contains(page, "NaN") {
			t.Errorf("with rows %q", rows)
		}
	}
}

// TestClasses around the boundaries.
func TestClasses(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		status            string
		errM, protectionM float64
		want              Class
	}{
		{"located", 5, 25, Usable},
		{"located", nan, 25, Usable},
		{"located", 5, 25.1, Wide},
		{"located", 5, nan, Wide},
		{"located", 25, 25, Usable},
		{"located", 20.1, 20, Wrong},
		{"located", 25.1, nan, Wrong},
		{"located", 25.1, 30, Wrong},
		{"unsure", 25.1, 30, Unlocated},
		{"unsure", 30.1, 30, Wrong},
		{"unsure", nan, nan, Unlocated},
	} {
		if got := classOf(track.Row{Status: c.status, ErrorM: c.errM, ProtectionM: c.protectionM}, 25); got != c.want {
			t.Errorf("%+v: %v", c, got)
		}
	}
}

// TestSeries: joined points keep the worst of what they join, and counts are of
// all rows, against a slow reference.
func TestSeries(t *testing.T) {
	const n, most = 1003, 10
	s := newSeries(25, most)
	errM := func(i int) float64 { return float64(i * 7919 % 1009) }
	for i := range n {
		s.add(track.Row{TimeNS: int64(i) * 1e9, Status: "located", ErrorM: errM(i), Radius95M: -errM(i), ProtectionM: math.NaN()})
	}
	if len(s.points) < most || len(s.points) >= 2*most {
		t.Fatalf("%d points", len(s.points))
	}
	for k, p := range s.points {
		worst, radius := 0.0, math.Inf(-1)
		for i := k * s.every; i < min(n, (k+1)*s.every); i++ {
			worst, radius = math.Max(worst, errM(i)), math.Max(radius, -errM(i))
		}
		if p.errM != worst || p.radiusM != radius || p.ns != int64(k*s.every)*1e9 || p.bounded {
			t.Errorf("point %d: %+v, want %v", k, p, worst)
		}
	}
	if c := s.counts(); c[Usable.String()]+c[Wide.String()]+c[Unlocated.String()]+c[Wrong.String()] != n || s.noBound != n {
		t.Errorf("%v, %d", c, s.noBound)
	}
}

// TestStretches: short interruptions do not end one, long ones do, and the worst
// come first, of however many.
func TestStretches(t *testing.T) {
	var w stretches
	add := func(s float64, c Class, errM float64) {
		w.add(track.Row{TimeNS: int64(s * 1e9), ErrorM: errM, Radius95M: s}, c, 0)
	}
	for _, s := range []float64{0, 1, 2, 4, 9} { // usable from 2 to 4
		add(s, Wide, math.NaN())
	}
	add(10, Usable, 1)
	add(12, Wide, 1) // goes on
	add(13, Usable, 1)
	add(14.5, Usable, 1)
	add(15, Wide, 1) // begins anew
	add(15.5, Wrong, 3)
	add(16, Wrong, 2)
	got, n := w.worst()
	if n != 3 || len(got) != 3 || got[0].class != Wrong || *got[0].MaxErrorM != 3 || got[0].ForS != 0.5 || got[1].ForS != 12 || got[1].AfterS != 0 ||
		got[1].MaxRadius95M != 12 || got[2].AfterS != 15 || got[1].From != "1970-01-01T00:00:00Z" {
		t.Errorf("%d: %+v", n, got)
	}
	w = stretches{}
	for i := range 3 * mostGathered {
		for k := range 1 + i%5 {
			add(100*float64(i)+float64(k), Wide, 1)
		}
		add(100*float64(i)+50, Usable, 1)
	}
	if got, n := w.worst(); n != 3*mostGathered || len(got) != mostStretches || got[mostStretches-1].ForS != 4 || len(w.list) > mostGathered {
		t.Errorf("%d of %d: %+v", len(got), n, got)
	}
}

func TestCommandLine(t *testing.T) {
	for want, args := range map[string][]string{
		"leadline replay a.jsonl --set k=1":   {"leadline", "replay", "a.jsonl", "--set", "k=1"},
		`leadline 'a b' 'it'\''s' '' '$(rm)'`: {"leadline", "a b", "it's", "", "$(rm)"},
	} {
		if got := commandLine(args); got != want {
			t.Errorf("%s, want %s", got, want)
		}
	}
}
