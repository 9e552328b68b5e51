package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"leadline/engine/study/results"
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
