package main

import (
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"leadline/engine/geo"
	"leadline/engine/study/results"
	"leadline/engine/study/track"
)

// TestSweepAndCompare: a sweep over the README's drive, taken up again, and a gate
// over what it left, by the command line alone.
func TestSweepAndCompare(t *testing.T) {
	dir := t.TempDir()
	town, out := filepath.Join(dir, "quillmere.roads.arrow"), filepath.Join(dir, "out")
	drive := filepath.Join(checkout, "docs", "first.drive.jsonl")
	status := func(want int, says string, args ...string) {
		t.Helper()
		var o, e strings.Builder
		got := run(args, &o, &e)
		if all := o.String() + e.String(); got != want || !strings.Contains(all, says) {
			t.Errorf("leadline %s: status %d, want %d with %q: %s", strings.Join(args, " "), got, want, says, all)
		}
	}
	status(exitDone, "", "map", "roads", filepath.Join(checkout, "fixtures", "roads", "quillmere.geojson"), "-o", town)
	sweep := []string{"replay", drive, "--map", town, "--out", out, "--set", "vehicle.corner_sigma_m=2", "--set", "vehicle.corner_sigma_m=3"}
	status(exitDone, "2 settings tried so far, 2 runs here, 0 of them from an earlier job", sweep...)
	status(exitDone, "2 of them from an earlier job", sweep...)
	forms := append(sweep, "--also", "gpx,parquet")
	status(exitDone, "0 of them from an earlier job", forms...) // which has not left them
	status(exitDone, "2 of them from an earlier job", forms...)
	status(exitBad, "is no form of a track", append(sweep, "--also", "csv")...)
	status(exitBad, "--also needs --out", "replay", drive, "--map", town, "--also", "gpx")
	names, err := results.Settings(out)
	if err != nil || len(names) != 2 {
		t.Fatalf("%v, %v", names, err)
	}
	a, b := filepath.Join(out, names[0]), filepath.Join(out, names[1])
	status(exitDone, "1 drives compared", "compare", a, b, "--fail-if", "log_evidence > 1e9")
	status(exitFailure, `--fail-if "drives == 1" holds`, "compare", a, b, "--fail-if", "drives == 1")
	status(exitBad, "it ends where", "compare", a, b, "--fail-if", "drives ==")
	status(exitBad, "holds no results", "compare", dir, b)
	// A belief on roads, and the posterior of its time.
	single := filepath.Join(dir, "single")
	status(exitDone, "", "replay", drive, "--map", town, "--out", single, "--diagnose", "never", "--belief-at", "2030-05-01T12:00:15Z", "--belief-at", "900")
	wantBelief(t, filepath.Join(single, results.Given, "first"))
	status(exitBad, "--belief-at is", "replay", drive, "--map", town, "--out", single, "--belief-at", "noon")
	status(exitBad, "--belief-at needs --out", "replay", drive, "--map", town, "--belief-at", "5")
	page, moved := filepath.Join(dir, "report.html"), filepath.Join(dir, "moved.roads.arrow")
	status(exitDone, "2 runs", "report", out, "-o", page, "--pictures", filepath.Join(dir, "pictures"))
	text, err := os.ReadFile(page)
	if err != nil || !strings.Contains(string(text), "roads</text>") || strings.Contains(string(text), "without the map") {
		t.Errorf("the report has no roads: %v", err)
	}
	if err := os.Rename(town, moved); err != nil {
		t.Fatal(err)
	}
	status(exitDone, "Tracks are drawn without the map under them: there is no map file", "report", a, "--json")
	status(exitDone, `"cautions": []`, "report", a, "--map", moved, "--json")
	if err := os.Rename(moved, town); err != nil {
		t.Fatal(err)
	}
	status(exitBad, "say what to make", "report", out)
	status(exitBad, "there is no folder", "report", filepath.Join(dir, "nothing"), "--json")
	status(exitBad, "vehicle.nonsense", "replay", drive, "--map", town, "--set", "vehicle.nonsense=1")
	status(exitBad, "is no KEY=VALUE", "replay", drive, "--map", town, "--set", "vehicle")
	status(exitBad, "give three", "replay", drive, "--map", town, "--truth-offset", "1,2")
}

// wantBelief: the one belief in a run's folder holds all probability, with the mean
// of the posterior of its time.
func wantBelief(t *testing.T, run string) {
	t.Helper()
	files, err := filepath.Glob(filepath.Join(run, "belief-*"))
	if err != nil || len(files) != 1 || filepath.Base(files[0]) != "belief-20300501T120015Z.geojson" {
		t.Fatalf("%v, %v", files, err)
	}
	var b struct {
		Features []struct {
			Properties struct{ Probability float64 }
			Geometry   struct{ Coordinates [2][2]float64 }
		}
	}
	if err := results.ReadJSON(files[0], &b); err != nil {
		t.Fatal(err)
	}
	var mass, lon, lat float64
	for _, f := range b.Features {
		p, c := f.Properties.Probability, f.Geometry.Coordinates
		mass, lon, lat = mass+p, lon+p*(c[0][0]+c[1][0])/2, lat+p*(c[0][1]+c[1][1])/2
	}
	f, err := os.Open(filepath.Join(run, results.TableFile))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	for row, err := range track.Rows(f, "track.csv") {
		if err != nil {
			t.Fatal(err)
		}
		if time.Unix(0, row.TimeNS).UTC().Format(time.TimeOnly) != "12:00:15" {
			continue
		}
		d, _, err := geo.WGS84.Distance(row.At, geo.FromDegrees(lon/mass, lat/mass))
		if err != nil || math.Abs(mass-1) > 1e-6 || d > 1 {
			t.Errorf("%d cells hold %v, their mean %v m from the posterior's, %v", len(b.Features), mass, d, err)
		}
		return
	}
	t.Error("there is no posterior of that time")
}
