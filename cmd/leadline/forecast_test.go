package main

import (
	"bytes"
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// TestForecastAndTuneWrong: wrong use is status 2 and one line.
func TestForecastAndTuneWrong(t *testing.T) {
	dir := t.TempDir()
	roads := filepath.Join(dir, "q.roads.arrow")
	var out, errs bytes.Buffer
	if run([]string{"map", "roads", filepath.Join(checkout, "fixtures/roads/quillmere.geojson"), "-o", roads}, &out, &errs) != exitDone {
		t.Fatal(errs.String())
	}
	cut := filepath.Join(dir, "cut.geojson")
	if err := os.WriteFile(cut, []byte(`{"type":"LineString","coordinates":[[`), 0o644); err != nil {
		t.Fatal(err)
	}
	route := filepath.Join(checkout, "docs/first.route.geojson")
	drive := filepath.Join(checkout, "docs/first.drive.jsonl")
	for _, c := range []struct{ line, want string }{
		{"forecast " + route, "needs --map and --suite"},
		{"forecast --map " + roads + " --suite truck", "needs routes, or --whole"},
		{"forecast " + route + " --whole x --map " + roads + " --suite truck", "give one of the two"},
		{"forecast " + route + " --map " + roads + " --suite truck", "give --speed"},
		{"forecast " + route + " --map " + roads + " --suite truck --speed -1", "--speed is -1"},
		{"forecast " + route + " --map " + roads + " --suite truck --speed NaN", "--speed is NaN: give metres a second, a number above 0"},
		{"forecast " + route + " --map " + roads + " --suite truck --speed Inf", "--speed is +Inf: give"},
		{"forecast " + route + " --map " + roads + " --suite truck --speed 0", "--speed is 0: give"},
		{"forecast " + route + " --map " + roads + " --suite truck --speed 1e9", "max_speed_mps 30: give a lower speed, or raise max_speed_mps"},
		{"forecast " + route + " nowhere.gpx --map " + roads + " --suite truck --speed 1e9", "no route file nowhere.gpx: give a GeoJSON file with a LineString, or a GPX file; 0 of 2 routes were forecast"},
		{"forecast " + route + " --map " + roads + " --suite truck --speed 9 --rate odo", `--rate is "odo"`},
		{"forecast " + route + " --map " + roads + " --suite truck --speed 9 --rate wheel=1", `"wheel", which is no sensor`},
		{"forecast " + route + " --map " + roads + " --suite truck --speed 9 --limit -1", "the limit is -1 m"},
		{"forecast " + route + " --map " + roads + " --suite lorry --speed 9", "there is no suite lorry"},
		{"forecast " + cut + " --map " + roads + " --suite truck --speed 9", "not valid JSON"},
		{"forecast nowhere.gpx --map " + roads + " --suite truck --speed 9", "there is no route file nowhere.gpx"},
		{"tune " + drive, "needs --suite and --figure"},
		{"tune " + drive + " --suite truck --figure vehicle.hold_s --hold-out 1", "--hold-out is 1"},
		{"tune " + drive + " --suite truck --figure vehicle.hold_s=1 --map " + roads, "give KEY=LOW:HIGH"},
		{"tune " + drive + " --suite truck --figure vehicle.hold --map " + roads, `there is no "hold" in vehicle`},
		{"tune " + drive + " --suite truck --figure vehicle.hold_s --plots p --no-profile", "give one of the two"},
		{"tune " + drive + " --suite truck --figure vehicle.hold_s --map nowhere.roads.arrow", "there is no map file"},
	} {
		out.Reset()
		errs.Reset()
		if status := run(strings.Fields(c.line), &out, &errs); status != exitBad {
			t.Errorf("%s: status %d", c.line, status)
		}
		if s := errs.String(); !strings.Contains(s, c.want) || strings.Count(s, "\n") != 1 {
			t.Errorf("%s: %q, want %q", c.line, s, c.want)
		}
	}
	out.Reset()
	features, picture := filepath.Join(dir, "w.geojson"), filepath.Join(dir, "p.png")
	if run([]string{"forecast", "--map", roads, "--suite", "truck", "--whole", features}, &out, &errs) != exitDone {
		t.Fatal(errs.String())
	}
	text, err := os.ReadFile(features)
	if err != nil || !json.Valid(text) || !bytes.Contains(text, []byte(`"rms_m":`)) {
		t.Errorf("a whole map: %v, %.200s", err, text)
	}
	out.Reset()
	if run([]string{"forecast", route, "--map", roads, "--suite", "truck", "--speed", "10", "--no-ambiguity", "--json", "--png", picture}, &out, &errs) != exitDone {
		t.Fatal(errs.String())
	}
	var f struct {
		Length  float64 `json:"length_m"`
		Samples []struct {
			Radius float64 `json:"radius95_m"`
		}
	}
	if err := json.Unmarshal(out.Bytes(), &f); err != nil || f.Length < 1000 || len(f.Samples) < 100 || !(f.Samples[0].Radius > 0) {
		t.Errorf("a forecast: %v, %.200s", err, out.String())
	}
	if info, err := os.Stat(picture); err != nil || info.Size() < 10_000 {
		t.Errorf("a picture: %v", err)
	}
}
