package main

import (
	"bytes"
	"path/filepath"
	"strings"
	"testing"

	"leadline/engine/sensor"
	"leadline/fixtures/scenes"
)

// TestTraffic: counts are those of the world, pictures come in the text form, and
// what cannot be used is said while the rest goes on.
func TestTraffic(t *testing.T) {
	if testing.Short() {
		t.Skip("filters for long: not with -short")
	}
	const seed = 1
	s, err := scenes.Traffic(seed)
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	suite, drive := filepath.Join(dir, s.SuiteName+".yaml"), filepath.Join(dir, "t.drive.jsonl")
	if err := writeBytes(suite, s.Suite); err != nil {
		t.Fatal(err)
	}
	elsewhere := s.Drive.Events[40]
	b := elsewhere.Measurement.(sensor.AcousticBearing)
	b.Post = "elsewhere"
	elsewhere.Measurement = b
	s.Drive.Events[40] = elsewhere
	if err := writeDrive(drive, s.Drive); err != nil {
		t.Fatal(err)
	}
	var out, errs bytes.Buffer
	status := run([]string{"traffic", drive, "--every", "30", "--parts", "6"}, &out, &errs)
	if says := errs.String(); status != exitBad || !strings.Contains(says, `1 measurements could not be used`) || !strings.Contains(says, `post "elsewhere"`) || strings.Count(says, "\n") != 2 {
		t.Errorf("seed %d: status %d: %s", seed, status, says)
	}
	if says := out.String(); !strings.Contains(says, "line middle at 300 m: ") || strings.Count(says, " expected\n") != 6 || !strings.Contains(says, "part 6: ") {
		t.Errorf("seed %d: %s", seed, says)
	}
	for _, c := range []struct {
		args []string
		says string
	}{
		{[]string{"--every", "-1"}, "--every is -1"},
		{[]string{"--least", "2"}, "--least is 2"},
		{[]string{"--parts", "5000"}, "--parts is 5000"},
		{[]string{"--suite", "truck"}, "the suite describes no road"},
	} {
		errs.Reset()
		if status := run(append([]string{"traffic", drive}, c.args...), &out, &errs); status != exitBad || !strings.Contains(errs.String(), c.says) {
			t.Errorf("%v: status %d: %s", c.args, status, errs.String())
		}
	}
	// The wrong one of the two commands says which is the right one.
	const vehicle = "../../docs/first.drive.jsonl"
	for _, c := range [][]string{
		{"leadline traffic " + drive, "replay", drive},
		{"leadline traffic " + drive, "tune", drive, "--suite", suite, "--figure", "vehicle.lateral_sigma_m=0.1:1"},
		{"leadline replay " + vehicle, "traffic", vehicle, "--suite", suite},
	} {
		errs.Reset()
		if status := run(c[1:], &out, &errs); status != exitBad || !strings.Contains(errs.String(), c[0]) || strings.Count(errs.String(), "\n") != 1 {
			t.Errorf("%v: status %d: %s", c, status, errs.String())
		}
	}
}
