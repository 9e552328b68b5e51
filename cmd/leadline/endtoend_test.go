package main

import (
	"image/png"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"leadline/engine/drivefile"
	"leadline/fixtures/sim"
)

// answer is what the tests read of posteriors in JSON.
type answer struct {
	Posterior struct {
		Status          string
		AreaProbability float64 `json:"area_probability"`
		Regions         []struct{ Probability float64 }
		Protection      struct{ Risk float64 }
	}
	PosteriorSHA256 string `json:"posterior_sha256"`
	Ended           bool
	Posteriors      string
}

func needPNG(t *testing.T, path string, least int) {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	img, err := png.Decode(f)
	if err != nil {
		t.Fatal(err)
	}
	colours := map[any]bool{}
	b := img.Bounds()
	for y := b.Min.Y; y < b.Max.Y; y++ {
		for x := b.Min.X; x < b.Max.X; x++ {
			colours[img.At(x, y)] = true
		}
	}
	if len(colours) < least {
		t.Errorf("%s has %d colours: is it empty?", path, len(colours))
	}
}

// TestRoadsEndToEnd takes a town from GeoJSON to a posterior: compiled,
// checked, driven, replayed, and fed to a server that answers the same.
func TestRoadsEndToEnd(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	mapPath, drivePath := compiledTown(t, dir, 60)

	var report struct {
		Size struct {
			RoadKM float64 `json:"road_km"`
			Edges  int
		}
		Weak struct{ Count int } `json:"weakly_connected"`
	}
	picture := filepath.Join(dir, "town.png")
	readJSON(t, good(t, "map", "check", mapPath, "--json", "--png", picture), &report)
	// About 2·8·7 streets of some 150 m, a few of them missing.
	if report.Size.RoadKM < 10 || report.Size.RoadKM > 17 || report.Size.Edges < 150 || report.Weak.Count < 1 {
		t.Errorf("map check reports %+v", report)
	}
	needPNG(t, picture, 3)
	if text := good(t, "map", "check", mapPath); !strings.Contains(text, "weakly connected") {
		t.Errorf("map check says %s", text)
	}

	var s struct {
		Drive             string
		Posteriors        int
		RMSEM             *float64 `json:"rmse_m"`
		RightRoadFraction *float64 `json:"right_road_fraction"`
		Hash              string   `json:"posterior_sha256"`
	}
	out := filepath.Join(dir, "results")
	readJSON(t, good(t, "replay", drivePath, "--map", mapPath, "--out", out, "--json"), &s)
	if s.Drive != "morning" || s.Posteriors < 300 || len(s.Hash) != 64 {
		t.Errorf("replay gives %+v", s)
	}
	// Loose: accuracy has tests of its own. The start was known to 8 m, and
	// blocks are 150 m.
	if s.RMSEM == nil || *s.RMSEM > 30 || s.RightRoadFraction == nil || *s.RightRoadFraction < 0.5 {
		t.Errorf("replay's score is %+v", s)
	}
	for _, name := range []string{"track.csv", "track.geojson", "score.json", "timing.json"} {
		b, err := os.ReadFile(filepath.Join(out, "given", "morning", name))
		if err != nil || len(b) < 100 {
			t.Errorf("%s: %v, %d bytes", name, err, len(b))
		}
		if name == "score.json" && !strings.Contains(string(b), s.Hash) {
			t.Errorf("score.json has another hash")
		}
	}
	needPNG(t, filepath.Join(out, "given", "morning", "track.png"), 4)
	// The header names the map, and the map lies beside the drive.
	if again := good(t, "replay", drivePath); !strings.Contains(again, s.Hash) {
		t.Errorf("with the header's map: %s", again)
	}

	wider := writeText(t, filepath.Join(dir, "wider.yaml"), "vehicle:\n  lateral_sigma_m: 4\n")
	srv := serveMaps(t, "--map", mapPath, "--suite", wider)
	var closed, now answer
	readJSON(t, good(t, "feed", drivePath, "--to", srv.address, "--json"), &closed)
	if closed.PosteriorSHA256 != s.Hash {
		t.Errorf("the server's hash is %s, replay's %s", closed.PosteriorSHA256, s.Hash)
	}
	area := writeText(t, filepath.Join(dir, "area.geojson"), // all of the town
		`{"type":"Polygon","coordinates":[[[-30.1,44.9],[-29.9,44.9],[-29.9,45.1],[-30.1,45.1],[-30.1,44.9]]]}`)
	readJSON(t, good(t, "where", "van", "--at", srv.address, "--json", "--region", "50,95", "--risk", "1e-4", "--area", area), &now)
	if now.PosteriorSHA256 != s.Hash || !now.Ended || now.Posterior.Status == "" {
		t.Errorf("where answers %+v", now)
	}
	if r := now.Posterior.Regions; len(r) != 2 || r[0].Probability < 0.5 || r[1].Probability < 0.95 {
		t.Errorf("regions %+v", r)
	}
	if p := now.Posterior.AreaProbability; p < 0.999 || now.Posterior.Protection.Risk != 1e-4 {
		t.Errorf("area %v, protection at %v", p, now.Posterior.Protection.Risk)
	}
	if text := good(t, "where", "van", "--at", srv.address, "--region", "95"); !strings.Contains(text, "van is ") || !strings.Contains(text, s.Hash) {
		t.Errorf("where says %s", text)
	}
	// Fed again, with another suite: another hash, so that the comparison can
	// fail.
	readJSON(t, good(t, "feed", drivePath, "--to", srv.address, "--suite", "wider", "--json"), &closed)
	if closed.PosteriorSHA256 == s.Hash {
		t.Error("a suite changed nothing")
	}
	if again := good(t, "replay", drivePath, "--map", mapPath, "--suite", wider); !strings.Contains(again, closed.PosteriorSHA256) {
		t.Errorf("with a suite the server's hash is %s, and replay says %s", closed.PosteriorSHA256, again)
	}
	if status := srv.stop(t); status != 0 {
		t.Errorf("serve ended with status %d on SIGTERM\n%s", status, srv.log)
	}
}

// TestHeightsEndToEnd does the same over heights in feet.
func TestHeightsEndToEnd(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	grid := reliefASCII(t, filepath.Join(dir, "relief.asc"))
	mapPath := filepath.Join(dir, "relief.heights.tif")
	text := good(t, "map", "heights", grid, "-o", mapPath, "--unit", "ft", "--crs", "EPSG:4326", "--sigma", "1", "--licence", "CC0")
	if !strings.Contains(text, "400 × 400") || !strings.Contains(strings.ToLower(text), "datum is unstated") {
		t.Errorf("map heights says %s", text)
	}
	var report struct {
		LowestM     float64 `json:"lowest_m"`
		HighestM    float64 `json:"highest_m"`
		Licence     string
		Fingerprint string `json:"fingerprint_sha256"`
	}
	picture := filepath.Join(dir, "relief.png")
	readJSON(t, good(t, "map", "check", mapPath, "--json", "--png", picture), &report)
	// 60 waves of 7.5 to 40 m around 600 m, written in feet.
	if !(report.LowestM > 200 && report.HighestM < 1000 && report.HighestM > 600) || report.Licence != "CC0" {
		t.Errorf("map check reports %+v", report)
	}
	needPNG(t, picture, 50)
	var again struct {
		Fingerprint string `json:"fingerprint_sha256"`
		Columns     int
		Notes       []string
	}
	readJSON(t, good(t, "map", "heights", grid, "-o", filepath.Join(dir, "again.heights.tif"), "--unit", "ft", "--crs", "EPSG:4326", "--sigma", "1", "--licence", "CC0", "--json"), &again)
	if again.Fingerprint != report.Fingerprint || again.Columns != 400 || len(again.Notes) == 0 {
		t.Errorf("map heights --json says %+v", again)
	}

	m, err := openMap(mapPath)
	if err != nil {
		t.Fatal(err)
	}
	defer m.Close()
	o := sim.StandardFlight()
	o.DurationS, o.StartSigmaM, o.MarginM = 60, 200, 500
	d, err := sim.Flight(2, m.Heights, o)
	if err != nil {
		t.Fatal(err)
	}
	drivePath := simulated(t, filepath.Join(dir, "flight"+drivefile.Suffix), d, "relief")
	var s struct {
		RMSEM *float64 `json:"rmse_m_all"`
		Right *float64 `json:"right_road_fraction"`
		Hash  string   `json:"posterior_sha256"`
	}
	readJSON(t, good(t, "replay", drivePath, "--json"), &s)
	if s.RMSEM == nil || *s.RMSEM > 1000 || s.Right != nil {
		t.Errorf("replay's score is %+v", s)
	}
	srv := serveMaps(t, "--map", "hills="+mapPath)
	var closed answer
	readJSON(t, good(t, "feed", drivePath, "--to", srv.address, "--map", "hills", "--speed", "100", "--json"), &closed)
	if closed.PosteriorSHA256 != s.Hash {
		t.Errorf("the server's hash is %s, replay's %s", closed.PosteriorSHA256, s.Hash)
	}
}

// TestSuiteCommand proves that what it prints is a suite.
func TestSuiteCommand(t *testing.T) {
	t.Parallel()
	names := strings.Fields(good(t, "suite"))
	if len(names) != 4 {
		t.Fatalf("starter suites: %q", names)
	}
	for _, n := range names {
		path := writeText(t, filepath.Join(t.TempDir(), n+".yaml"), good(t, "suite", n))
		if _, err := openSuite(path); err != nil {
			t.Error(err)
		}
	}
}
