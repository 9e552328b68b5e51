package forecast

import (
	"bytes"
	"encoding/json"
	"image/png"
	"math"
	"reflect"
	"runtime"
	"slices"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/study/track"
)

func flat(float64, float64) (h, sE, sN float64) { return 0, 0, 0 }

// TestFlatGroundTellsNothing: over flat ground the bound grows as the odometry
// errs, all is alike, and of what would help a fix brings what a fix can; over
// hills a vehicle is found.
func TestFlatGroundTellsNothing(t *testing.T) {
	if testing.Short() {
		t.Skip("filters for long")
	}
	p := flown(t, over(flat), parsed(t, flyingSuite), 20)
	o := Options{LimitM: 50, SampleM: 100, StretchM: 1000, SearchM: 200, MaxCells: 100}
	f, err := Of(p, o)
	if err != nil {
		t.Fatal(err)
	}
	last := f.Samples[len(f.Samples)-1]
	variance := 400 + 0.25*50*math.Floor(last.TimeS)
	if want := math.Sqrt(variance * -2 * math.Log(0.05)); math.Abs(last.Radius95M-want) > 0.01*want {
		t.Errorf("the radius ends at %v m, want %v", last.Radius95M, want)
	}
	if *f.MostAmbiguous < 0.9 || f.LocateM != nil {
		t.Errorf("over flat ground %v is elsewhere, located after %v", *f.MostAmbiguous, f.LocateM)
	}
	if len(f.Weak) != 1 || len(f.Weak[0].Help) == 0 {
		t.Fatalf("weak: %+v", f.Weak)
	}
	// The radius passes 50 m where 400 + 12.5 t = 50²/(-2 ln 0.05).
	if at := 50 * ((2500/(-2*math.Log(0.05)) - 400) / 12.5); math.Abs(f.Weak[0].FromM-math.Max(at, 0)) > 150 {
		t.Errorf("weak from %v m, want %v", f.Weak[0].FromM, at)
	}
	for _, h := range f.Weak[0].Help {
		if !(h.AfterM < h.BeforeM) || h.By != "bound" {
			t.Errorf("help: %+v", h)
		}
		if h.What == "fix" { // what grows after it, from its own sigma on
			with, _ := p.fixed(h.WayM)
			marks, err := with.bound()
			if err != nil {
				t.Fatal(err)
			}
			if r := radius(markAt(marks, p.Path.timeAt(h.WayM)).cov, 0.95); r > 5*2.4478+1 {
				t.Errorf("with a fix of 5 m the radius is %v m", r)
			}
		}
	}
	hilly, err := Of(flown(t, over(hills), parsed(t, flyingSuite), 20), o)
	if err != nil {
		t.Fatal(err)
	}
	if !(hilly.Samples[len(f.Samples)-1].Radius95M < 0.8*last.Radius95M) || !(*hilly.MostAmbiguous < *f.MostAmbiguous) {
		t.Errorf("over hills the radius is up to %v m, over flat ground %v; %v and %v are elsewhere", hilly.WorstM, f.WorstM, *hilly.MostAmbiguous, *f.MostAmbiguous)
	}
	output(t, hilly)
}

// output writes everything that can be written.
func output(t *testing.T, f *Forecast) {
	t.Helper()
	var picture, features, plain bytes.Buffer
	field := ground{geo.NewFrame(geo.FromDegrees(-30, 45)), 5000, hills}
	if err := f.Picture(&picture, track.Ground{Frame: field.Frame(), Relief: field}); err != nil {
		t.Fatal(err)
	}
	if img, err := png.Decode(&picture); err != nil || img.Bounds().Dx() < 1000 {
		t.Errorf("the picture: %v", err)
	}
	if err := WriteGeoJSON(&features, []*Forecast{f}); err != nil {
		t.Fatal(err)
	}
	var of struct {
		Features []struct{ Properties map[string]any }
	}
	if err := json.Unmarshal(features.Bytes(), &of); err != nil || len(of.Features) < len(f.Samples)-1 || of.Features[0].Properties["radius95_m"] == nil {
		t.Errorf("GeoJSON: %v, %d features", err, len(of.Features))
	}
	if err := json.NewEncoder(&plain).Encode(f); err != nil {
		t.Error(err)
	}
}

// TestRunsDoNotDependOnProcessors: the same seed gives the same runs, another seed
// others, and they state about what the bound says over hills that leave no doubt.
func TestRunsDoNotDependOnProcessors(t *testing.T) {
	of := func(processors int, seed uint64) *Forecast {
		defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(processors))
		p := flownFor(t, over(hills), parsed(t, flyingSuite), 20, 0.4)
		f, err := Of(p, Options{SampleM: 200, Runs: 2, Seed: seed, NoAmbiguity: true, MaxCells: 500})
		if err != nil {
			t.Fatal(err)
		}
		return f
	}
	one, two, other := of(1, 1), of(2, 1), of(2, 2)
	if !reflect.DeepEqual(one.Samples, two.Samples) {
		t.Error("one and two processors give different runs")
	}
	if reflect.DeepEqual(one.Samples, other.Samples) {
		t.Error("another seed gives the same runs")
	}
	sum := 0.0
	for _, s := range one.Samples[1:] {
		sum += math.Log(s.Runs.Radius95P50M / s.BoundRadius95M)
	}
	if ratio := math.Exp(sum / float64(len(one.Samples)-1)); !(ratio > 0.8 && ratio < 1.25) {
		t.Errorf("seed 1: runs state %v times the bound", ratio)
	}
}

func TestPlanWrong(t *testing.T) {
	space := over(hills)
	path := flown(t, space, parsed(t, flyingSuite), 20).Path
	for _, c := range []struct {
		suite string
		rates map[string]float64
		start float64
		want  string
	}{
		{"vehicle: {hold_s: 1}", nil, 1, "declares no sensors"},
		{"sensors: [{name: a, kind: clearance, noise: {sigma_m: 1}}]", nil, 1, "measures distance, speed or displacement"},
		{"sensors: [{name: a, kind: displacement}]", nil, 1, "noise"},
		{flyingSuite, map[string]float64{"odo": 1}, 1, `"odo", which is no sensor of the suite: there are ins, altimeter`},
		{flyingSuite, map[string]float64{"ins": -1}, 1, "rate"},
		{flyingSuite, map[string]float64{"ins": 0}, 1, "measures distance, speed or displacement"},
		{flyingSuite, nil, 0, "start"},
	} {
		_, err := NewPlan(path, parsed(t, c.suite), c.rates, c.start)
		if err == nil || !strings.Contains(err.Error(), c.want) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%s: got %v, want %q", c.suite, err, c.want)
		}
	}
	f := space.Frame()
	off := &Route{Name: "far", Points: []geo.LonLat{f.Inverse(geo.Point{}), f.Inverse(geo.Point{E: 9000})}}
	if _, err := NewPath(space, off, 50); err == nil || !strings.Contains(err.Error(), "point 2 lies off the map") {
		t.Errorf("off the map: %v", err)
	}
	off.Points[1] = f.Inverse(geo.Point{E: 100})
	if _, err := NewPath(space, off, 0); err == nil || !strings.Contains(err.Error(), "--speed") {
		t.Errorf("without times: %v", err)
	}
	if _, err := NewPath(space, off, 1e-6); err == nil || !strings.Contains(err.Error(), "it takes") {
		t.Errorf("too slow: %v", err)
	}
	for _, speed := range []float64{math.NaN(), math.Inf(1), -1} {
		if _, err := NewPath(space, off, speed); err == nil || !strings.Contains(err.Error(), "must be a number above 0") {
			t.Errorf("%v m/s: %v", speed, err)
		}
	}
	for _, c := range []struct {
		vehicle string
		speed   float64
		want    string
	}{
		{"", 399, ""},
		{"", 401, "beyond 10 times the 40 of a suite without vehicle.max_speed_mps"},
		{"vehicle: {max_speed_mps: 30}", 30, ""},
		{"vehicle: {max_speed_mps: 30}", 30.1, "the suite's vehicle.max_speed_mps 30: give a lower speed, or raise max_speed_mps"},
		{"vehicle: {max_speed_mps: 30}", 1e9, "the speed is 1e+09 m/s"},
		{"vehicle: {max_speed_mps: 500}", 450, ""},
	} {
		fast, err := NewPath(space, off, c.speed)
		if err != nil {
			t.Fatal(err)
		}
		suite := parsed(t, c.vehicle+flyingSuite)
		_, err = NewPlan(fast, suite, nil, 1)
		_, err2 := Heights(space, suite, []geo.Point{{}}, WholeOptions{SpeedMPS: c.speed})
		for _, err := range []error{err, err2} {
			if c.want == "" && err != nil || c.want != "" && (err == nil || !strings.Contains(err.Error(), c.want)) {
				t.Errorf("%s at %v m/s: %v, want %q", c.vehicle, c.speed, err, c.want)
			}
		}
	}
}

// TestBeginsOnATick: a forecast may begin anywhere along the way, also where a
// sensor speaks but for rounding: the first increment has a length all the same,
// and no more than that of two ticks.
func TestBeginsOnATick(t *testing.T) {
	suite := parsed(t, flyingSuite)
	space := over(hills)
	f := space.Frame()
	r := &Route{Name: "straight", Points: []geo.LonLat{f.Inverse(geo.Point{E: -2010}), f.Inverse(geo.Point{E: 1887})}}
	short := 0
	for _, speed := range []float64{2.5, 3, 7, 10, 20, 30} {
		path, err := NewPath(space, r, speed)
		if err != nil {
			t.Fatal(err)
		}
		for _, hz := range []float64{0.7, 1, 5, 10, 100} {
			p, err := NewPlan(path, suite, map[string]float64{"ins": hz}, 20)
			if err != nil {
				t.Fatal(err)
			}
			for k := range 40 {
				tick := path.timeAt(float64(k) * 97)
				for _, from := range []float64{tick, math.Floor(tick*hz) / hz, math.Nextafter(math.Ceil(tick*hz)/hz, 0), math.Ceil(tick*hz)/hz - 4e-10} {
					w := p.worldFrom(math.Max(from, 0))
					for i, d := range w.sensors {
						if d.Name != "ins" {
							continue
						}
						if n := float64(w.next[i]) - w.t*hz; at(float64(w.next[i])/hz) <= at(w.t) || n > 2 {
							t.Errorf("%v m/s, %v Hz: from %v s on the first increment is %v ticks", speed, hz, w.t, n)
							short++
						}
					}
					for w.more() && len(w.events) < 3 {
						if err := w.step(); err != nil {
							t.Fatalf("%v m/s, %v Hz, from %v s: %v", speed, hz, from, err)
						}
					}
				}
			}
		}
	}
	if short > 0 {
		t.Errorf("%d beginnings without a first increment", short)
	}
}

// TestHintOfNoise: what a suite's noise would mend is said of a suite that lacks it,
// and of nothing else.
func TestHintOfNoise(t *testing.T) {
	const hint = "a forecast needs each sensor's noise in the suite"
	p := flown(t, over(hills), parsed(t, flyingSuite), 20)
	w := p.world(nil)
	d := w.sensors[slices.IndexFunc(w.sensors, func(s planned) bool { return s.Name == "ins" })].Sensor
	if _, err := w.sigmas(d, sensor.Displacement{Since: at(w.t), EastM: 1}); err == nil || strings.Contains(err.Error(), hint) {
		t.Errorf("an increment without a length: %v", err)
	}
	_, err := NewPlan(p.Path, parsed(t, "sensors: [{name: a, kind: displacement}]"), nil, 1)
	if err == nil || !strings.Contains(err.Error(), hint) {
		t.Errorf("a suite without noise: %v", err)
	}
}
