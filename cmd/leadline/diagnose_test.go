package main

import (
	"bytes"
	"math"
	"path/filepath"
	"strings"
	"sync/atomic"
	"testing"

	"leadline/engine/drivefile"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/terrain"
)

// why is what the tests read of a replay's studies in JSON.
type why struct {
	Drive    string
	Findings struct {
		Reasons []string
		Fits    []struct {
			Sensor string
			Bad    bool
		}
	}
	Diagnosis *struct {
		Candidates []struct {
			Mistake  string
			GainNats float64 `json:"gain_nats"`
			Named    bool
		}
		Verdict string
	}
	Explanation *struct {
		At      string
		Effects []struct {
			AtS    float64 `json:"at_s"`
			Kind   string
			Sensor string
		}
	}
}

// TestReplayDiagnoses replays a drive, the same with its gyro reversed, and
// reads what the command says of each.
func TestReplayDiagnoses(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	mapPath, drivePath := compiledTown(t, dir, 50)
	d, err := readDrive(drivePath)
	if err != nil {
		t.Fatal(err)
	}
	for i := range d.Events {
		if m, ok := d.Events[i].Measurement.(sensor.Turn); ok {
			m.AngleRad *= -1
			d.Events[i].Measurement = m
		}
	}
	var b bytes.Buffer
	w := drivefile.NewWriter(&b)
	if err := w.Write(&drivefile.Record{Time: d.Time, Header: &d.Header}); err != nil {
		t.Fatal(err)
	}
	for _, ev := range d.Events {
		if err := w.WriteEvent(ev); err != nil {
			t.Fatal(err)
		}
	}
	for _, tr := range d.Truths {
		if err := w.Write(&drivefile.Record{Time: tr.Time, Truth: &tr.Truth}); err != nil {
			t.Fatal(err)
		}
	}
	reversed := writeText(t, filepath.Join(dir, "reversed"+drivefile.Suffix), b.String())

	text := good(t, "replay", drivePath, "--map", mapPath)
	if strings.Contains(text, "suspect") || strings.Contains(text, "verdict") {
		t.Errorf("a good drive is suspect:\n%s", text)
	}
	out := filepath.Join(dir, "out")
	text = good(t, "replay", reversed, "--map", mapPath, "--max-cells", "1000", "--out", out)
	for _, want := range []string{"suspect", "mistakes", "gain, nats", "verdict", "gyro: turn sign reversed", "`sign: -1`"} {
		if !strings.Contains(text, want) {
			t.Errorf("a reversed gyro: no %q in\n%s", want, text)
		}
	}
	// A report says so first.
	var page struct{ Cautions []string }
	readJSON(t, good(t, "report", out, "--json"), &page)
	if len(page.Cautions) == 0 || !strings.HasPrefix(page.Cautions[0], "reversed is suspect: ") || !strings.Contains(page.Cautions[0], "logs: gyro: turn sign reversed") {
		t.Errorf("the report's cautions: %q", page.Cautions)
	}
	var s why
	readJSON(t, good(t, "replay", reversed, "--map", mapPath, "--json", "--diagnose", "never", "--explain", "30", "--explain-within", "500ms"), &s)
	if s.Drive != "reversed" || len(s.Findings.Reasons) == 0 || s.Diagnosis != nil || s.Explanation == nil {
		t.Fatalf("%+v", s)
	}
	moves := 0
	for _, e := range s.Explanation.Effects {
		if e.AtS < -0.5 || e.AtS > 0.5 {
			t.Errorf("%v s is explained", e.AtS)
		}
		if e.Kind == "move" && e.Sensor == "gyro, odometer" {
			moves++
		}
	}
	if moves < 5 {
		t.Errorf("%d moves in a second at 10 Hz: %+v", moves, s.Explanation.Effects)
	}
	text = good(t, "replay", drivePath, "--map", mapPath, "--explain", s.Explanation.At, "--diagnose", "always", "--max-cells", "1000")
	for _, want := range []string{"none of the usual mistakes", "what moved the belief around " + s.Explanation.At, "information, nats", "move: gyro, odometer"} {
		if !strings.Contains(text, want) {
			t.Errorf("a good drive: no %q in\n%s", want, text)
		}
	}
	bad(t, []string{"--explain", "nothing moved"}, "replay", drivePath, "--map", mapPath, "--explain", "5000")
	bad(t, []string{"--explain", "noon", "2030-05-01T12:00:05.5Z"}, "replay", drivePath, "--map", mapPath, "--explain", "noon")
	bad(t, []string{"--explain-within", "1h"}, "replay", drivePath, "--map", mapPath, "--explain", "5", "--explain-within", "2h")
	bad(t, []string{"--diagnose", "perhaps", "auto"}, "replay", drivePath, "--map", mapPath, "--diagnose", "perhaps")
}

// TestEachAtOnce: every index comes once.
func TestEachAtOnce(t *testing.T) {
	t.Parallel()
	for _, n := range []int{0, 1, 2, 100} {
		seen := make([]atomic.Int32, n)
		eachAtOnce(n, func(i int) { seen[i].Add(1) })
		for i := range seen {
			if seen[i].Load() != 1 {
				t.Errorf("%d of %d came %d times", i, n, seen[i].Load())
			}
		}
	}
}

// TestGridOfMap: a height map in UTM gives its grid's convergence, one in
// longitude and latitude none.
func TestGridOfMap(t *testing.T) {
	t.Parallel()
	utm, err := terrain.UTM(33, false)
	if err != nil {
		t.Fatal(err)
	}
	heights := make([]float32, 9)
	for _, c := range []struct {
		grid terrain.Grid
		want int
	}{
		{terrain.Grid{CRS: utm, Cols: 3, Rows: 3, FirstX: 700000, FirstY: 6600000, StepX: 30, StepY: -30}, 1},
		{terrain.Grid{CRS: terrain.LonLat(), Cols: 3, Rows: 3, FirstX: 18, FirstY: 59, StepX: 0.001, StepY: -0.001}, 0},
	} {
		r, err := terrain.New(c.grid, heights, terrain.Meta{})
		if err != nil {
			t.Fatal(err)
		}
		grids := (&mapFile{Heights: r}).grids()
		if len(grids) != c.want {
			t.Fatalf("%d grids, want %d", len(grids), c.want)
		}
		if c.want == 0 {
			continue
		}
		// To first order the convergence is the longitude from the central
		// meridian times the sine of the latitude.
		p := c.grid.Middle()
		lon, _ := p.Degrees()
		want := geo.Rad(lon-15) * math.Sin(p.Lat)
		if got := grids[0].Convergence(p); got < 0.99*want || got > 1.01*want {
			t.Errorf("convergence %v, want %v", got, want)
		}
	}
	if got := (&mapFile{}).grids(); len(got) != 0 {
		t.Errorf("roads have %d grids", len(got))
	}
}

// TestWrongMap: a drive over roads on a height map is refused whole: the reason
// is said at once, and no mistake is tried, even if that is asked for.
func TestWrongMap(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	hills := filepath.Join(dir, "hills.heights.tif")
	good(t, "map", "heights", reliefASCII(t, filepath.Join(dir, "relief.asc")), "-o", hills, "--crs", "EPSG:4326")
	drive := writeText(t, filepath.Join(dir, "van.drive.jsonl"), strings.Replace(head, `"lon":-30,"lat":45`, `"lon":-29.89,"lat":44.89`, 1)+travel)
	for _, mode := range []string{"auto", "always"} {
		out, _, status := leadline(t, "replay", drive, "--map", hills, "--diagnose", mode, "--allow-refused")
		if status != 0 || !strings.Contains(out, "all 1 measurements are refused: this is a height map") || !strings.Contains(out, "(travel)") ||
			strings.Contains(out, "mistakes") || strings.Contains(out, "never located") {
			t.Errorf("%s: status %d\n%s", mode, status, out)
		}
	}
}
