package main

import (
	"bytes"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"
)

// TestForecastOneOfTwoFails: a route that cannot be forecast costs the others
// nothing; what failed and how many did not is one line, and the status 2.
func TestForecastOneOfTwoFails(t *testing.T) {
	dir := t.TempDir()
	roads := townRoads(t, dir)
	route := filepath.Join(checkout, "docs/first.route.geojson")
	off := filepath.Join(dir, "off.geojson")
	if err := os.WriteFile(off, []byte(`{"type":"LineString","coordinates":[[50,50],[50.1,50]]}`), 0o644); err != nil {
		t.Fatal(err)
	}
	var out, errs bytes.Buffer
	features := filepath.Join(dir, "f.geojson")
	status := run([]string{"forecast", off, route, "--map", roads, "--suite", "truck", "--speed", "10", "--no-ambiguity", "--geojson", features}, &out, &errs)
	if status != exitBad || !strings.Contains(out.String(), "predicted 95 % radius") {
		t.Errorf("status %d, %s", status, out.String())
	}
	if s := errs.String(); strings.Count(s, "\n") != 1 || !strings.Contains(s, "off.geojson") || !strings.Contains(s, "1 of 2 routes were forecast") {
		t.Errorf("the error: %q", s)
	}
	if text, err := os.ReadFile(features); err != nil || !bytes.Contains(text, []byte(`"radius95_m"`)) {
		t.Errorf("the features: %v", err)
	}
}

func townRoads(t *testing.T, dir string) string {
	t.Helper()
	var out, errs bytes.Buffer
	roads := filepath.Join(dir, "q.roads.arrow")
	if run([]string{"map", "roads", filepath.Join(checkout, "fixtures/roads/quillmere.geojson"), "-o", roads}, &out, &errs) != exitDone {
		t.Fatal(errs.String())
	}
	return roads
}

// interrupted runs a command, sends it SIGINT once it has gone on for a while, and
// returns what it said and how long it took to end.
func interrupted(t *testing.T, after time.Duration, args ...string) (stdout, stderr string, status int, took time.Duration) {
	t.Helper()
	var out, errs bytes.Buffer
	c := command(t.Context(), args...)
	c.Stdout, c.Stderr = &out, &errs
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	time.Sleep(after)
	sent := time.Now()
	_ = c.Process.Signal(syscall.SIGINT)
	_ = c.Wait()
	return out.String(), errs.String(), c.ProcessState.ExitCode(), time.Since(sent)
}

// soon is how long a command may take to end by a signal, on a machine that does
// much else.
const soon = 30 * time.Second

// TestForecastInterrupted: a signal ends runs that would take hours with one
// sentence and status 1.
func TestForecastInterrupted(t *testing.T) {
	runsProgram(t)
	t.Parallel()
	roads := townRoads(t, t.TempDir())
	route := filepath.Join(checkout, "docs/first.route.geojson")
	_, errs, status, took := interrupted(t, 5*time.Second, "forecast", route, route, "--map", roads, "--suite", "truck", "--speed", "10", "--runs", "10000")
	if status != exitFailure || took > soon || errs != "leadline: interrupted after 0 of 2 routes: nothing was kept\n" {
		t.Errorf("status %d after %v: %q", status, took, errs)
	}
}
