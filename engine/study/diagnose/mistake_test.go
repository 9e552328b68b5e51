package diagnose

import (
	"math"
	"reflect"
	"slices"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/fixtures/accept"
)

// TestUndoes plants mistakes by hand and undoes them: what was there comes
// back, to rounding, and every mistake of the catalogue is among them.
func TestUndoes(t *testing.T) {
	const at = sensor.Time(1_900_000_000e9)
	before := func(s float64) sensor.Time { return at - sensor.Time(s*1e9) }
	north := geo.Rad(10)
	for _, c := range []struct {
		name       string
		good, bad  sensor.Measurement
		badTime    sensor.Time
		noise, deg float64
	}{
		{name: "turn sign reversed", good: sensor.Turn{Since: before(1), AngleRad: 0.1, SigmaRad: 0.01}, bad: sensor.Turn{Since: before(1), AngleRad: -0.1, SigmaRad: 0.01}},
		{name: "forward and backward reversed", good: sensor.Travel{Since: before(1), DistanceM: 7, SigmaM: 1}, bad: sensor.Travel{Since: before(1), DistanceM: -7, SigmaM: 1}},
		{name: "distances ten times too large", good: sensor.Travel{Since: before(1), DistanceM: 7, SigmaM: 1}, bad: sensor.Travel{Since: before(1), DistanceM: 70, SigmaM: 1}},
		{name: "distances ten times too small", good: sensor.Travel{Since: before(1), DistanceM: 7, SigmaM: 1}, bad: sensor.Travel{Since: before(1), DistanceM: 0.7, SigmaM: 1}},
		{name: "times late", good: sensor.Travel{Since: before(1), DistanceM: 7, SigmaM: 1}, bad: sensor.Travel{Since: at, DistanceM: 7, SigmaM: 1}, badTime: at + 1e9},
		{name: "times early", good: sensor.Turn{Since: before(1), AngleRad: 1, SigmaRad: 1}, bad: sensor.Turn{Since: before(2), AngleRad: 1, SigmaRad: 1}, badTime: at - 1e9},
		{name: "times late", good: sensor.Fix{SigmaM: 1}, bad: sensor.Fix{SigmaM: 1}, badTime: at + 1e9},
		{name: "speeds ten times too large", good: sensor.Speed{MPS: 3, SigmaMPS: 1}, bad: sensor.Speed{MPS: 30, SigmaMPS: 1}},
		{name: "speeds in kilometres an hour, taken as m/s", good: sensor.Speed{MPS: 10, SigmaMPS: 1}, bad: sensor.Speed{MPS: 36, SigmaMPS: 1}},
		{name: "speeds in knots, taken as m/s", good: sensor.Speed{MPS: 1852.0 / 3600, SigmaMPS: 1}, bad: sensor.Speed{MPS: 1, SigmaMPS: 1}},
		{name: "forward and backward reversed", good: sensor.Speed{MPS: 3, SigmaMPS: 1}, bad: sensor.Speed{MPS: -3, SigmaMPS: 1}},
		{name: "right and left reversed", good: sensor.BodyDisplacement{Since: before(1), ForwardM: 1, RightM: 2, TurnRad: 3}, bad: sensor.BodyDisplacement{Since: before(1), ForwardM: 1, RightM: -2, TurnRad: 3}},
		{name: "right and left reversed, turns too", good: sensor.BodyDisplacement{Since: before(1), ForwardM: 1, RightM: 2, TurnRad: 3}, bad: sensor.BodyDisplacement{Since: before(1), ForwardM: 1, RightM: -2, TurnRad: -3}},
		{name: "turn sign reversed", good: sensor.BodyDisplacement{Since: before(1), ForwardM: 1, RightM: 2, TurnRad: 3}, bad: sensor.BodyDisplacement{Since: before(1), ForwardM: 1, RightM: 2, TurnRad: -3}},
		{name: "forward and backward reversed", good: sensor.BodyDisplacement{Since: before(1), ForwardM: 1}, bad: sensor.BodyDisplacement{Since: before(1), ForwardM: -1}},
		{name: "distances ten times too large", good: sensor.BodyDisplacement{Since: before(1), ForwardM: 1, RightM: 2, TurnRad: 3}, bad: sensor.BodyDisplacement{Since: before(1), ForwardM: 10, RightM: 20, TurnRad: 3}},
		{name: "times late", good: sensor.BodyDisplacement{Since: before(1), ForwardM: 1}, bad: sensor.BodyDisplacement{Since: at, ForwardM: 1}, badTime: at + 1e9},
		{name: "east and north swapped", good: sensor.Displacement{Since: before(1), EastM: 3, NorthM: 4, CovM2: [3]float64{1, 0.5, 2}}, bad: sensor.Displacement{Since: before(1), EastM: 4, NorthM: 3, CovM2: [3]float64{2, 0.5, 1}}},
		{name: "east and west reversed", good: sensor.Displacement{Since: before(1), EastM: 3, NorthM: 4}, bad: sensor.Displacement{Since: before(1), EastM: -3, NorthM: 4}},
		{name: "north and south reversed", good: sensor.Displacement{Since: before(1), EastM: 3, NorthM: 4}, bad: sensor.Displacement{Since: before(1), EastM: 3, NorthM: -4}},
		{name: "whole displacement reversed", good: sensor.Displacement{Since: before(1), EastM: 3, NorthM: 4}, bad: sensor.Displacement{Since: before(1), EastM: -3, NorthM: -4}},
		{name: "distances ten times too small", good: sensor.Displacement{Since: before(1), EastM: 3, NorthM: 4}, bad: sensor.Displacement{Since: before(1), EastM: 0.3, NorthM: 0.4}},
		{name: "times early", good: sensor.Displacement{Since: before(1), EastM: 3, NorthM: 4}, bad: sensor.Displacement{Since: before(2), EastM: 3, NorthM: 4}, badTime: at - 1e9},
		{name: "depth sign reversed", good: sensor.Sounding{DepthBelowTransducerM: 5, TransducerDepthM: 1, Beams: []sensor.Beam{{ForwardM: 3, DepthBelowTransducerM: 6}}}, bad: sensor.Sounding{DepthBelowTransducerM: -5, TransducerDepthM: -1, Beams: []sensor.Beam{{ForwardM: 3, DepthBelowTransducerM: -6}}}},
		{name: "depths in feet", good: sensor.Sounding{DepthBelowTransducerM: 3.048, TransducerDepthM: 0.3048}, bad: sensor.Sounding{DepthBelowTransducerM: 10, TransducerDepthM: 1}},
		{name: "depths in metres, but converted as if from feet", good: sensor.Sounding{DepthBelowTransducerM: 10, TransducerDepthM: 1}, bad: sensor.Sounding{DepthBelowTransducerM: 3.048, TransducerDepthM: 0.3048}},
		{name: "depths ten times too small", good: sensor.Sounding{DepthBelowTransducerM: 10}, bad: sensor.Sounding{DepthBelowTransducerM: 1}},
		{name: "altitude and clearance in feet", good: sensor.Clearance{ClearanceM: 3.048, AltitudeM: 304.8, SigmaM: 3}, bad: sensor.Clearance{ClearanceM: 10, AltitudeM: 1000, SigmaM: 3}},
		{name: "altitude in feet", good: sensor.Clearance{ClearanceM: 10, AltitudeM: 304.8}, bad: sensor.Clearance{ClearanceM: 10, AltitudeM: 1000}},
		{name: "clearance in feet", good: sensor.Clearance{ClearanceM: 3.048, AltitudeM: 1000}, bad: sensor.Clearance{ClearanceM: 10, AltitudeM: 1000}},
		{name: "clearance ten times too large", good: sensor.Clearance{ClearanceM: 1, AltitudeM: 1000}, bad: sensor.Clearance{ClearanceM: 10, AltitudeM: 1000}},
		{name: "altitude sign reversed", good: sensor.Clearance{ClearanceM: 10, AltitudeM: 1000}, bad: sensor.Clearance{ClearanceM: 10, AltitudeM: -1000}},
		{name: "clearance sign reversed", good: sensor.Clearance{ClearanceM: 10, AltitudeM: 1000}, bad: sensor.Clearance{ClearanceM: -10, AltitudeM: 1000}},
		{name: "altitude and clearance signs reversed", good: sensor.Clearance{ClearanceM: 10, AltitudeM: 1000}, bad: sensor.Clearance{ClearanceM: -10, AltitudeM: -1000}},
		{name: "altitude sign reversed", good: sensor.Barometer{AltitudeM: 10}, bad: sensor.Barometer{AltitudeM: -10}},
		{name: "altitude ten times too large", good: sensor.Barometer{AltitudeM: 10}, bad: sensor.Barometer{AltitudeM: 100}},
		{name: "longitude and latitude swapped", good: sensor.Fix{Position: geo.LonLat{Lon: 1, Lat: 0.5}, SigmaM: 1}, bad: sensor.Fix{Position: geo.LonLat{Lon: 0.5, Lat: 1}, SigmaM: 1}},
		{name: "vertical datum off", noise: 30, good: sensor.Clearance{ClearanceM: 10, AltitudeM: 1000}, bad: sensor.Clearance{ClearanceM: 10, AltitudeM: 1030}},
		{name: "vertical datum off", noise: 30, good: sensor.Sounding{DepthBelowTransducerM: 10, TransducerDepthM: 40}, bad: sensor.Sounding{DepthBelowTransducerM: 10, TransducerDepthM: 10}},
		{name: "vertical datum off", noise: -20, good: sensor.Barometer{HasPressure: true, PressureHPa: sensor.StandardPressureHPa(500, 1013.25)}, bad: sensor.Barometer{HasPressure: true, PressureHPa: sensor.StandardPressureHPa(480, 1013.25)}},
		{name: "directions from another north", deg: 10, good: sensor.HeadingFix{HeadingRad: 1}, bad: sensor.HeadingFix{HeadingRad: 1 - north}},
		{name: "directions from another north", deg: 10, good: sensor.Bearing{BearingRad: 1}, bad: sensor.Bearing{BearingRad: 1 - north}},
		{name: "directions from another north", deg: 10, good: sensor.AcousticBearing{BearingRad: 1}, bad: sensor.AcousticBearing{BearingRad: 1 - north}},
		{name: "directions from another north", deg: 10, good: sensor.Speed{MPS: 1, HasCourse: true, CourseRad: 1}, bad: sensor.Speed{MPS: 1, HasCourse: true, CourseRad: 1 - north}},
		// 5 m towards 30°, as seen from 10°: towards 20°; with an ellipse along it.
		{name: "directions from another north", deg: 10, good: along(before(1), 30), bad: along(before(1), 20)},
	} {
		bad := sensor.Event{Time: at, Sensor: "it", Measurement: c.bad}
		if c.badTime != 0 {
			bad.Time = c.badTime
		}
		vs := voices([]sensor.Event{bad})
		ms := catalogue(vs)
		ms = append(ms, vs[0].offset(c.noise, 0, 0), northOff("directions from another north", "it", "", vs[0].is, geo.Rad(c.deg)))
		i := slices.IndexFunc(ms, func(m Mistake) bool { return m.Name == c.name })
		if i < 0 {
			t.Errorf("%s: not tried for %s", c.name, vs[0].kind)
			continue
		}
		recorded := bad.Measurement
		got := ms[i].undo(bad)
		if got.Time != at || !alike(reflect.ValueOf(got.Measurement), reflect.ValueOf(c.good)) {
			t.Errorf("%s: undone %+v at %d is %+v at %d, want %+v at %d", c.name, recorded, bad.Time, got.Measurement, got.Time, c.good, at)
		}
		if !reflect.DeepEqual(bad.Measurement, recorded) {
			t.Errorf("%s: undoing changed the log", c.name)
		}
		other := sensor.Event{Time: at, Sensor: "other", Measurement: c.bad}
		if !reflect.DeepEqual(ms[i].undo(other), other) {
			t.Errorf("%s: undone in another sensor, too", c.name)
		}
	}
}

// along is a displacement of 5 m towards a direction, with standard deviations
// of 2 m along it and 1 m across.
func along(since sensor.Time, deg float64) sensor.Displacement {
	s, c := math.Sincos(geo.Rad(deg))
	return sensor.Displacement{Since: since, EastM: 5 * s, NorthM: 5 * c, CovM2: [3]float64{4*s*s + c*c, 3 * s * c, 4*c*c + s*s}}
}

// alike compares values, numbers to rounding.
func alike(a, b reflect.Value) bool {
	if a.Type() != b.Type() {
		return false
	}
	switch a.Kind() {
	case reflect.Float64:
		return math.Abs(a.Float()-b.Float()) <= 1e-9*(1+math.Abs(a.Float()))
	case reflect.Struct:
		for i := range a.NumField() {
			if !alike(a.Field(i), b.Field(i)) {
				return false
			}
		}
		return true
	case reflect.Slice, reflect.Array:
		if a.Len() != b.Len() {
			return false
		}
		for i := range a.Len() {
			if !alike(a.Index(i), b.Index(i)) {
				return false
			}
		}
		return true
	}
	return a.Interface() == b.Interface()
}

// TestBroadens: a coarse value stands for its neighbours, by the root of the
// sum of squares, and takes the suite's sigma where the log states none.
func TestBroadens(t *testing.T) {
	if s := broaden(sensor.Clearance{SigmaM: 3}, 4, 9).(sensor.Clearance).SigmaM; math.Abs(s-5) > 1e-12 {
		t.Errorf("3 m and 4 m make %v", s)
	}
	if s := broaden(sensor.Sounding{}, 4, 3).(sensor.Sounding).SigmaM; math.Abs(s-5) > 1e-12 {
		t.Errorf("the suite's 3 m and 4 m make %v", s)
	}
	if s := broaden(sensor.Barometer{}, 0, 3).(sensor.Barometer).SigmaM; s != 0 {
		t.Errorf("an exact value states %v", s)
	}
}

// TestSearchesReachEverywhere: no value within reach is farther than half a
// step from a coarse one or from none, and the last one found is within half
// of the finest step of any within a step.
func TestSearchesReachEverywhere(t *testing.T) {
	vs := voices([]sensor.Event{
		{Sensor: "a", Measurement: sensor.Clearance{}},
		{Sensor: "b", Measurement: sensor.Displacement{}},
		{Sensor: "c", Measurement: sensor.HeadingFix{}},
	})
	ss := scans(vs, sensor.Default(2))
	var families []string
	for i := range ss {
		s := &ss[i]
		families = append(families, s.family)
		var values []float64
		if !s.broadens() {
			values = append(values, 0) // the log as it stands
		}
		for _, m := range s.coarse() {
			values = append(values, m.Value)
			if m.search != s || m.family != s.family {
				t.Errorf("%s: a coarse value is not of its family", s.family)
			}
		}
		slices.Sort(values)
		if values[0] != -s.reach || values[len(values)-1] != s.reach {
			t.Errorf("%s: reaches from %v to %v, want ±%v", s.family, values[0], values[len(values)-1], s.reach)
		}
		for j := 1; j < len(values); j++ {
			if values[j]-values[j-1] > s.step+1e-9 {
				t.Errorf("%s: nothing is tried between %v and %v", s.family, values[j-1], values[j])
			}
		}
	}
	if got := strings.Join(families, "; "); got != "datum a; north b; north c; north b, c" {
		t.Errorf("searched for: %s", got)
	}
}

// TestUnitsKeepEvidence proves that runs are comparable: a log in feet (its
// sigmas, too), read as such, has the evidence of the log in metres and the
// logarithm of the unit for each measurement, and one whose distances are ten
// times too large has that of the right one.
func TestUnitsKeepEvidence(t *testing.T) {
	s := flyer(t, 5)
	c, err := newCourse(s.drive, s.config, Options{MaxCells: 1000, OpeningS: 20})
	must(t, c, err)
	whole := func(events []sensor.Event, m *Mistake) float64 {
		r, err := newRun(c.config, c.suite, events, m)
		must(t, r, err)
		if err := r.advance(0, true, math.Inf(1), c.stop); err != nil {
			t.Fatal(err)
		}
		return r.nats()
	}
	want := whole(c.events, &Mistake{})
	spoiled := func(spoil func(*sensor.Event)) []sensor.Event {
		out := slices.Clone(c.events)
		for i := range out {
			spoil(&out[i])
		}
		return out
	}
	find := func(name string) *Mistake {
		ms := catalogue(c.voices)
		return &ms[slices.IndexFunc(ms, func(m Mistake) bool { return m.Name == name })]
	}
	feet := spoiled(each(func(m *sensor.Clearance) { m.AltitudeM /= 0.3048; m.ClearanceM /= 0.3048 }))
	n := 0
	for _, ev := range c.events {
		if ev.Measurement.Kind() == sensor.KindClearance {
			n++
		}
	}
	got := whole(feet, find("altitude and clearance in feet"))
	if n < 15 || math.Abs(got-want-float64(n)*math.Log(0.3048)) > 1e-6 {
		t.Errorf("%d measurements in feet have %v nats, want %v and %d ln 0.3048", n, got, want, n)
	}
	long := spoiled(each(func(m *sensor.Displacement) { m.EastM *= 10; m.NorthM *= 10 }))
	if got := whole(long, find("distances ten times too large")); math.Abs(got-want) > 1e-6 {
		t.Errorf("distances in another unit have %v nats, want %v", got, want)
	}
}

// TestDensityOfTheLog is the slow way to see that the unit is taken into
// account: whatever is undone, the density of a number in the log sums to 1.
func TestDensityOfTheLog(t *testing.T) {
	s := flyer(t, 6)
	s.drive.Header.Start.SigmaM = 10
	s.config.Suite = parse(t, "sensors: [{name: altimeter, kind: clearance, outlier_probability: 0}, {name: odometry, kind: displacement}]")
	c, err := newCourse(s.drive, s.config, Options{MaxCells: 500, OpeningS: 1})
	must(t, c, err)
	at := slices.IndexFunc(c.events, func(ev sensor.Event) bool { return ev.Measurement.Kind() == sensor.KindClearance })
	true0 := c.events[at].Measurement.(sensor.Clearance)
	for _, k := range []struct {
		name  string
		scale float64 // of the log's clearance
	}{
		{"altitude and clearance in feet", 1 / 0.3048},
		{"clearance in feet", 1 / 0.3048},
		{"altitude in metres, but converted as if from feet", 1},
		{"clearance ten times too small", 0.1},
		{"clearance sign reversed", -1},
	} {
		ms := catalogue(c.voices)
		m := ms[slices.IndexFunc(ms, func(m Mistake) bool { return m.Name == k.name })]
		sum := 0.0
		const stepM = 2.0
		for o := -80.0; o <= 80; o += stepM { // the ground within 50 m is known to less than 10 m
			ev := true0
			ev.ClearanceM = k.scale * (true0.ClearanceM + o)
			switch {
			case strings.HasPrefix(k.name, "altitude and"):
				ev.AltitudeM /= 0.3048
			case strings.HasPrefix(k.name, "altitude"):
				ev.AltitudeM *= 0.3048
			}
			events := slices.Clone(c.events[:at+1])
			events[at].Measurement = ev
			r, err := newRun(c.config, c.suite, events, &m)
			must(t, r, err)
			if err := r.advance(0, true, math.Inf(1), c.stop); err != nil {
				t.Fatal(err)
			}
			sum += math.Exp(r.nats()) * stepM * math.Abs(k.scale)
		}
		if math.Abs(sum-1) > 0.01 {
			t.Errorf("%s: the density sums to %v", k.name, sum)
		}
	}
}

// TestBudget: what a diagnosis may take follows the replay's work, between its
// bounds, and is the cap where there was none.
func TestBudget(t *testing.T) {
	for _, c := range []struct {
		replay *Record
		wantS  float64
	}{{nil, mostS}, {&Record{}, leastS}, {&Record{work: 0.5 * workPerS}, 0.5 * timesReplay}, {&Record{work: 100 * workPerS}, mostS}} {
		if got := budgetOf(c.replay).most / workPerS; math.Abs(got-c.wantS) > 1e-9 {
			t.Errorf("%+v: %v s, want %v", c.replay, got, c.wantS)
		}
	}
}

// TestCutShort: with little to spend, less of the drive is tried with all but the
// finalists, which the opening's end decides between: what is wrong is named, and
// nothing where nothing is.
func TestCutShort(t *testing.T) {
	for _, c := range []struct {
		name  string
		scene *scene
		most  float64
		want  string
	}{
		{"a flight", flyer(t, 1), 3e5, ""},
		{"a car whose gyro is reversed", spoiled(plainCar(t, 1), each(func(m *sensor.Turn) { m.AngleRad *= -1 })), 1.6e6, "turn sign reversed"},
	} {
		k, err := newCourse(c.scene.drive, c.scene.config, Options{MaxCells: 1000, Each: accept.Each})
		must(t, k, err)
		k.budget.most = c.most
		r := &Report{}
		if err := k.tryAll(r, Options{}); err != nil {
			t.Fatal(err)
		}
		short, whole := 0, 0
		for _, m := range r.Candidates {
			if m.Named != (m.Mistake == c.want) {
				t.Errorf("%s: %s, gain %.1f: named %v", c.name, m.Text(), m.GainNats, m.Named)
			}
			if m.GivenUpAfter == nil {
				whole++
			} else {
				short++
			}
		}
		if !k.cutShort() || whole > finalists || short < 10 {
			t.Errorf("%s: cut %v, %d finalists, %d others", c.name, k.cutShort(), whole, short)
		}
	}
}

// TestUnmeasured: a suspect log without distance, displacement or speed says so
// first; one that has some does not.
func TestUnmeasured(t *testing.T) {
	turns := []sensor.Event{{Sensor: "gyro", Measurement: sensor.Turn{}}, {Sensor: "compass", Measurement: sensor.HeadingFix{}}}
	if text := unmeasured(turns); !strings.HasPrefix(text, "nothing in the log measures distance") {
		t.Errorf("%q", text)
	}
	for _, m := range []sensor.Measurement{sensor.Travel{}, sensor.Displacement{}, sensor.BodyDisplacement{}, sensor.Speed{}} {
		if text := unmeasured(append(turns, sensor.Event{Measurement: m})); text != "" {
			t.Errorf("%T: %q", m, text)
		}
	}
}
