package replay

import (
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"leadline/engine/drivefile"
	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
)

var origin = geo.FromDegrees(-30, 45) // in the open Atlantic

const second = sensor.Time(1e9)

// drive is an invented one over open water: a displacement each second,
// from the second one on, and a fix five times a second, east at 10 m/s.
func drive(seconds int) *drivefile.Drive {
	frame := geo.NewFrame(origin)
	d := &drivefile.Drive{Header: drivefile.Header{Vehicle: "boat", Start: drivefile.Start{Point: origin, SigmaM: 10}}}
	for k := range seconds * 5 {
		t := sensor.Time(k+1) * second / 5
		at := frame.Inverse(geo.Point{E: 10 * float64(t) / 1e9})
		d.Events = append(d.Events, sensor.Event{Time: t, Sensor: "gnss", Number: uint64(k), Measurement: sensor.Fix{Position: at, SigmaM: 5}})
		d.Truths = append(d.Truths, drivefile.TimedTruth{Time: t, Truth: drivefile.Truth{Position: at, Vehicle: "boat"}})
		if t%second == 0 && t > second {
			d.Events = append(d.Events, sensor.Event{Time: t, Sensor: "log", Number: uint64(k), Measurement: sensor.Displacement{
				Since: t - second, EastM: 10, CovM2: [3]float64{1, 0, 1},
			}})
		}
	}
	return d
}

func config(t *testing.T, suite string) session.Config {
	t.Helper()
	s, err := sensor.ParseSuite("test", []byte(suite))
	if err != nil {
		t.Fatal(err)
	}
	return session.Config{Space: plane.Open(origin, 20e3, 100), Suite: s, MaxCells: 3000}
}

// hashOf is the hash of the posteriors of a result.
func hashOf(r *Result) string {
	h := summary.NewHasher()
	for _, p := range r.Posteriors {
		h.Add(p)
	}
	return h.Sum()
}

// TestPosteriorsAreFinal proves that the posteriors of a result are those that
// its hash sums up, also where the displacement comes so late, after 1 s with a
// hold of 0.3 s, that it revises what was computed without it.
func TestPosteriorsAreFinal(t *testing.T) {
	for name, suite := range map[string]string{
		"waiting":  "vehicle:\n  hold_s: 2\n  late_window_s: 5\n",
		"revising": "vehicle:\n  hold_s: 0.3\n  late_window_s: 5\n",
	} {
		d := drive(10)
		var calls [][2]int
		r, err := Run(d, config(t, suite), Options{Progress: func(done, total int) { calls = append(calls, [2]int{done, total}) }})
		if err != nil {
			t.Fatal(err)
		}
		if r.Hash != hashOf(r) || len(r.Hash) != 64 {
			t.Errorf("%s: the result's hash is %s, its posteriors' %s", name, r.Hash, hashOf(r))
		}
		revised := 0
		for i, p := range r.Posteriors {
			if p.Revises {
				revised++
			}
			if i > 0 && p.TimeNS <= r.Posteriors[i-1].TimeNS {
				t.Fatalf("%s: posterior %d is out of order", name, i)
			}
		}
		if (revised > 0) != (name == "revising") {
			t.Errorf("%s: %d posteriors revise others", name, revised)
		}
		if r.Accepted != 59 || r.Refused != 0 || r.Timing.Measurements != 59 || r.Timing.Posteriors != len(r.Posteriors) || r.Start != second/5 || r.Timing.DriveS != 9.8 {
			t.Errorf("%s: %d accepted, %d refused, start %d, %+v", name, r.Accepted, r.Refused, r.Start, r.Timing)
		}
		if m := r.Timing; !(m.P50Ms <= m.P99Ms && m.P99Ms <= m.MaxMs && m.FilterS > 0) {
			t.Errorf("%s: %+v", name, m)
		}
		if n := len(calls); n == 0 || calls[n-1] != [2]int{59, 59} {
			t.Errorf("%s: progress %v", name, calls)
		}
		last := r.Posteriors[len(r.Posteriors)-1]
		if e, _, err := geo.WGS84.Distance(last.Mean, d.Truths[len(d.Truths)-1].Position); err != nil || e > 5 {
			t.Errorf("%s: the last mean is %.1f m off", name, e)
		}
	}
}

// TestOrderInFile proves that the file's order does not matter.
func TestOrderInFile(t *testing.T) {
	c := config(t, "vehicle:\n  late_window_s: 5\n")
	d := drive(10)
	want, err := Run(d, c, Options{})
	if err != nil {
		t.Fatal(err)
	}
	const seed = 3
	rand.New(rand.NewPCG(seed, 0)).Shuffle(len(d.Events), func(i, j int) { d.Events[i], d.Events[j] = d.Events[j], d.Events[i] })
	before := append([]sensor.Event(nil), d.Events...)
	got, err := Run(d, c, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if got.Hash != want.Hash || len(got.Posteriors) != len(want.Posteriors) {
		t.Errorf("seed %d: shuffled, the hash is %s, in order %s", seed, got.Hash, want.Hash)
	}
	if !reflect.DeepEqual(before, d.Events) {
		t.Error("Run changed the drive")
	}
}

// TestRefusals proves that refused measurements are listed, up to a bound, and
// leave the rest as it was.
func TestRefusals(t *testing.T) {
	c := config(t, "vehicle:\n  late_window_s: 5\n")
	d := drive(10)
	want, err := Run(d, c, Options{})
	if err != nil {
		t.Fatal(err)
	}
	bad := []sensor.Event{
		{Time: 2 * second, Sensor: "gnss", Number: 900, Measurement: sensor.Fix{Position: origin, SigmaM: math.NaN()}},
		{Time: 3 * second, Sensor: "baro", Number: 1, Measurement: sensor.Barometer{AltitudeM: 5, SigmaM: 1}},
		{Time: 3 * second, Sensor: "gnss", Number: 14, Measurement: sensor.Fix{Position: origin, SigmaM: 9}}, // that number is taken
	}
	for i := range MaxRefusals {
		bad = append(bad, sensor.Event{Time: 4 * second, Sensor: "gnss", Number: uint64(1000 + i), Measurement: sensor.Fix{SigmaM: -1}})
	}
	d.Events = append(d.Events, bad...)
	got, err := Run(d, c, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if got.Hash != want.Hash {
		t.Error("refused measurements changed posteriors")
	}
	if got.Refused != uint64(len(bad)) || len(got.Refusals) != MaxRefusals {
		t.Fatalf("%d refused, %d listed", got.Refused, len(got.Refusals))
	}
	for i, reason := range []session.Reason{session.Unusable, session.WrongSpace, session.Conflicting} {
		if r := got.Refusals[i]; r.Reason != reason || r.Detail == "" {
			t.Errorf("refusal %d: %v, want %q", i, r, reason)
		}
	}
	const words = `the measurement at 1970-01-01T00:00:03Z (sensor "baro", number 1): wrong space: `
	if s := got.Refusals[1].Error(); !strings.HasPrefix(s, words) {
		t.Errorf("%s", s)
	}
}

func TestNothingToRun(t *testing.T) {
	d := drive(1)
	d.Events = nil
	if _, err := Run(d, config(t, ""), Options{}); !errors.Is(err, ErrNoMeasurements) {
		t.Errorf("got %v", err)
	}
	d = drive(1)
	d.Header.Start.Point = geo.FromDegrees(30, 45)
	if _, err := Run(d, config(t, ""), Options{}); err == nil || !strings.Contains(err.Error(), "start") {
		t.Errorf("a start off the map: %v", err)
	}
}

// TestTruth keeps the vehicle's own truths, by time.
func TestTruth(t *testing.T) {
	at := func(s int, vehicle string) drivefile.TimedTruth {
		return drivefile.TimedTruth{Time: sensor.Time(s), Truth: drivefile.Truth{SigmaM: float64(s), Vehicle: vehicle}}
	}
	d := &drivefile.Drive{Header: drivefile.Header{Vehicle: "boat"}, Truths: []drivefile.TimedTruth{at(3, ""), at(2, "tug"), at(1, "boat")}}
	got := Truth(d)
	if len(got) != 2 || got[0].TimeNS != 1 || got[0].SigmaM != 1 || got[1].TimeNS != 3 {
		t.Errorf("%+v", got)
	}
}
