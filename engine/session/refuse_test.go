package session

import (
	"math"
	"reflect"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/monitor"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// TestRefusals proves that each wrong event has its reason and one line that
// says what is wrong and what to do, and that the session is as it was.
func TestRefusals(t *testing.T) {
	road := crossing()
	fixAt := func(s float64, name string) sensor.Event {
		p, _, _ := road.At(0, 50)
		return sensor.Event{Time: at(s), Sensor: name, Measurement: sensor.Fix{Position: road.Frame().Inverse(p), SigmaM: 3}}
	}
	travel := func(from, to, d, sigma float64) sensor.Event {
		return sensor.Event{Time: at(to), Sensor: "odo", Measurement: sensor.Travel{Since: at(from), DistanceM: d, SigmaM: sigma}}
	}
	of := func(m sensor.Measurement) sensor.Event {
		return sensor.Event{Time: at(10.5), Sensor: "x", Measurement: m}
	}
	onRoad := func(t *testing.T) *Session {
		s := open(t, Config{Space: road, Names: road, Start: pointStart(road, geo.Point{E: 10, N: 30}, 10), MaxCells: 5000})
		for i := range 100 {
			if _, err := s.Add(travel(float64(i)/10, float64(i+1)/10, 0.5, 0.05)); err != nil {
				t.Fatal(err)
			}
		}
		mustAdd(t, s, fixAt(9.95, "gps"))
		mustAdd(t, s, fixAt(11, "gps"))
		return s
	}
	onWater := func(t *testing.T) *Session {
		p := sea()
		s := open(t, Config{Space: p, Start: pointStart(p, geo.Point{}, 50), MaxCells: 2000})
		for i := range 12 {
			mustAdd(t, s, sensor.Event{Time: at(float64(i)), Sensor: "gps", Measurement: sensor.Fix{Position: seaOrigin, SigmaM: 10}})
		}
		return s
	}
	for _, c := range []struct {
		name   string
		open   func(*testing.T) *Session
		ev     sensor.Event
		reason Reason
		detail []string // what it is and what to do
	}{
		{"late", onRoad, fixAt(7, "other"), TooLate, []string{"3.000 s before", "window is 2 s", "late_window_s"}},
		{"just late", onRoad, fixAt(7.999, "other"), TooLate, []string{"2.001 s before"}},
		{"late since", onRoad, sensor.Event{Time: at(10.2), Sensor: "inertial", Measurement: sensor.Travel{Since: at(7), DistanceM: 3, SigmaM: 1}}, TooLate, []string{"3.000 s before", "hold_s"}},
		{"conflict", onRoad, fixAt(11, "gps"), "", nil}, // the same once more
		{"another", onRoad, func() sensor.Event {
			ev := fixAt(11, "gps")
			ev.Measurement = sensor.Fix{Position: road.Frame().Inverse(geo.Point{}), SigmaM: 3}
			return ev
		}(), Conflicting, []string{`"gps"`, "number 0", "number them"}},
		{"overlap", onRoad, travel(9.95, 10.05, 0.5, 0.05), Conflicting, []string{`"odo"`, "0.050 s", "begin where the one before ended"}},
		{"inside", onRoad, travel(9.92, 9.98, 0.5, 0.05), Conflicting, []string{"0.060 s"}},
		{"around", onRoad, travel(8.5, 10.5, 0.5, 0.05), Conflicting, []string{"by another one"}},
		{"early", onRoad, fixAt(11+86401, "other"), TooEarly, []string{"86401 s ahead", "check the sensor's clock"}},
		{"swapped", onWater, of(sensor.Fix{Position: geo.FromDegrees(50.01, 10), SigmaM: 3}), Unusable, []string{"lon 50.01", "from the map's middle", "longitude and latitude swapped", "1 km from there"}},
		{"on another continent", onWater, of(sensor.Fix{Position: geo.FromDegrees(-70, -20), SigmaM: 3}), Unusable, []string{"from the map's middle: check the position and the map"}},
		{"heading on water", onWater, of(sensor.HeadingFix{HeadingRad: 1, SigmaRad: 0.1}), WrongSpace, []string{"heading", "suite"}},
		{"travel on water", onWater, of(sensor.Travel{Since: at(10), DistanceM: 1, SigmaM: 1}), WrongSpace, []string{"travel", "declare the sensor"}},
		{"barometer on water", onWater, of(sensor.Barometer{AltitudeM: 1, SigmaM: 1}), WrongSpace, []string{"barometer", "clearance"}},
		{"road on water", onWater, of(sensor.Sighting{Road: "Long Street"}), WrongSpace, []string{"no roads", "area"}},
		{"kilometres", onRoad, of(sensor.Travel{Since: at(10), DistanceM: 4e7, SigmaM: 1}), Unusable, []string{"40000000 m", "0.500 s", "max_speed_mps"}},
		{"kilometres on water", onWater, of(sensor.Displacement{Since: at(10), EastM: 4e7, CovM2: [3]float64{1, 0, 1}}), Unusable, []string{`"x"`, "40000000 m", "0.500 s", "max_speed_mps"}},
		{"off the map", onWater, of(sensor.Displacement{Since: at(10.5 - 86000), NorthM: -1.6e6, CovM2: [3]float64{1, 0, 1}}), Unusable, []string{"1600000 m", "1500 km", "check its unit"}},
		{"no idea", onWater, of(sensor.Displacement{Since: at(10.5 - 86000), CovM2: [3]float64{9e12, 0, 1}}), Unusable, []string{"sigma of 3000000 m", "leave out"}},
		{"tells nothing", onRoad, of(sensor.Speed{SigmaMPS: 5000}), Unusable, []string{"sigma of 5000 m", "leave out"}},
		{"nothing", onRoad, of(nil), Unusable, []string{`"x"`, "no measurement"}},
		{"NaN", onRoad, of(sensor.Travel{Since: at(10.4), DistanceM: math.NaN(), SigmaM: 1}), Unusable, []string{"distance_m is NaN"}},
		{"infinite", onRoad, of(sensor.HeadingFix{HeadingRad: math.Inf(1), SigmaRad: 1}), Unusable, []string{"heading", "+Inf"}},
		{"no sigma", onRoad, of(sensor.Fix{Position: seaOrigin}), Unusable, []string{"sigma_m is 0", "standard deviation"}},
		{"negative sigma", onRoad, of(sensor.Fix{Position: seaOrigin, SigmaM: -1}), Unusable, []string{"sigma_m is -1"}},
		{"backwards", onRoad, of(sensor.Turn{Since: at(10.6), AngleRad: 1, SigmaRad: 1}), Unusable, []string{"since", "before"}},
		{"far away", onRoad, of(sensor.Fix{Position: geo.FromDegrees(150, -30), SigmaM: 1}), Unusable, []string{"from the map's middle", "check the position"}},
		{"unknown beacon", onRoad, of(sensor.Range{Beacon: sensor.Beacon{ID: "pier"}, RangeM: 10, SigmaM: 1}), Unusable, []string{`"pier"`, "add it under beacons"}},
		{"unknown post", onRoad, of(sensor.AcousticBearing{Post: "gate", SigmaRad: 0.1}), Unusable, []string{`"gate"`, "add it under posts"}},
		{"unknown road", onRoad, of(sensor.Sighting{Road: "Elsewhere"}), Unusable, []string{`"Elsewhere"`, "spelling"}},
		{"year", onRoad, sensor.Event{Time: -5, Sensor: "x", Measurement: sensor.Standstill{}}, Unusable, []string{"1970"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			s, twin := c.open(t), c.open(t)
			if c.reason == "" {
				if ps, err := s.Add(c.ev); err != nil || len(ps) > 0 {
					t.Errorf("a duplicate gives %v, %v", ps, err)
				}
			} else {
				r := refusal(t, s, c.ev)
				if r.Reason != c.reason {
					t.Errorf("reason %q, want %q: %s", r.Reason, c.reason, r.Detail)
				}
				for _, d := range c.detail {
					if !strings.Contains(r.Detail, d) {
						t.Errorf("%q does not say %q", r.Detail, d)
					}
				}
				if strings.ContainsAny(r.Error(), "\n\x00") {
					t.Errorf("%q is not one line", r.Error())
				}
				if _, refused := s.Counts(); refused != 1 {
					t.Errorf("%d refused", refused)
				}
			}
			sameState(t, twin, s)
			s.Flush()
			twin.Flush()
			sameState(t, twin, s)
		})
	}
}

// TestJustInTime accepts what reaches back as far as the window, to the
// nanosecond.
func TestJustInTime(t *testing.T) {
	p := sea()
	for _, d := range []sensor.Time{0, 1} {
		s := open(t, Config{Space: p, Start: pointStart(p, geo.Point{}, 50), MaxCells: 2000})
		for i := range 12 {
			mustAdd(t, s, sensor.Event{Time: at(float64(i)), Sensor: "gps", Measurement: sensor.Fix{Position: seaOrigin, SigmaM: 10}})
		}
		// 11 s waits; 9 s has been computed, hold_s being 1 s.
		_, err := s.Add(sensor.Event{Time: at(7) - d, Sensor: "other", Measurement: sensor.Fix{Position: seaOrigin, SigmaM: 10}})
		if (err == nil) != (d == 0) {
			t.Errorf("%d ns beyond the window: %v", d, err)
		}
	}
}

// TestFirstEvent refuses what is a day from the first event on either side.
func TestFirstEvent(t *testing.T) {
	p := sea()
	s := open(t, Config{Space: p, Start: pointStart(p, geo.Point{}, 50)})
	fix := func(sec float64) sensor.Event {
		return sensor.Event{Time: at(sec), Sensor: "gps", Measurement: sensor.Fix{Position: seaOrigin, SigmaM: 10}}
	}
	if _, err := s.Add(fix(0)); err != nil {
		t.Fatal(err)
	}
	if r := refusal(t, s, fix(-86401)); r.Reason != TooLate || !strings.Contains(r.Detail, "clock") {
		t.Error(r)
	}
	if r := refusal(t, s, fix(86401)); r.Reason != TooEarly || !strings.Contains(r.Detail, "clock") {
		t.Error(r)
	}
	if s.Latest() != nil || s.Hash() != open(t, Config{Space: p, Start: pointStart(p, geo.Point{}, 50)}).Hash() {
		t.Error("a time was computed that waits")
	}
}

// TestConfigurations says what is wrong with each.
func TestConfigurations(t *testing.T) {
	road := crossing()
	ring := func(ps ...geo.LonLat) [][]geo.LonLat { return [][]geo.LonLat{ps} }
	zero := geo.FromDegrees(0, 0)
	for _, c := range []struct {
		name, says string
		config     Config
	}{
		{"no map", "no map", Config{}},
		{"outside", "does not touch the map", Config{Space: road, Start: Start{Kind: AtPoint, Point: geo.FromDegrees(10, 50), SigmaM: 10}}},
		{"outside on water", "does not touch the map", Config{Space: plane.Open(seaOrigin, 1000, 10), Start: Start{Kind: AtPoint, Point: geo.FromDegrees(11, 50), SigmaM: 10}}},
		{"area outside", "does not touch the map", Config{Space: road, Start: Start{Kind: InArea, Area: ring(seaOrigin, geo.FromDegrees(10, 50.1), geo.FromDegrees(10.1, 50))}}},
		{"no sigma", "sigma_m is 0", Config{Space: road, Start: Start{Kind: AtPoint, Point: zero}}},
		{"NaN", "sigma_m is NaN", Config{Space: road, Start: Start{Kind: AtPoint, Point: zero, SigmaM: math.NaN()}}},
		{"latitude", "latitude", Config{Space: road, Start: Start{Kind: AtPoint, Point: geo.FromDegrees(0, 95), SigmaM: 1}}},
		{"no area", "three corners", Config{Space: road, Start: Start{Kind: InArea}}},
		{"two corners", "three corners", Config{Space: road, Start: Start{Kind: InArea, Area: ring(zero, zero)}}},
		{"too many", "10000", Config{Space: road, Start: Start{Kind: InArea, Area: ring(make([]geo.LonLat, maxRing+1)...)}}},
		{"kind", "unknown kind 7", Config{Space: road, Start: Start{Kind: 7}}},
		{"cells", "MaxCells", Config{Space: road, MaxCells: -1}},
		{"suite", "late_window_s", Config{Space: road, Suite: &sensor.Suite{Vehicle: sensor.Vehicle{LateWindowS: math.NaN()}}}},
	} {
		s, err := New(c.config)
		if err == nil || s != nil || !strings.Contains(err.Error(), c.says) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%s: %v, want one line that says %q", c.name, err, c.says)
		}
	}
}

// TestContradiction sends what is impossible everywhere: the belief and the
// sum of evidence stay, the evidence says so, and what follows goes on.
func TestContradiction(t *testing.T) {
	road, water := crossing(), sea()
	far := func(f geo.Frame) [][]geo.LonLat {
		p := geo.Point{E: 5000}
		return [][]geo.LonLat{{f.Inverse(p), f.Inverse(p.Add(geo.Point{E: 100})), f.Inverse(p.Add(geo.Point{N: 100}))}}
	}
	for _, c := range []struct {
		name       string
		config     Config
		impossible sensor.Measurement
	}{
		{"roads", Config{Space: road, Names: road, Suite: onRoads(), Start: pointStart(road, geo.Point{E: 10, N: 30}, 5)}, sensor.Sighting{Area: far(road.Frame())}},
		{"plane", Config{Space: water, Start: pointStart(water, geo.Point{}, 20), MaxCells: 3000}, sensor.Sighting{Area: far(water.Frame())}},
	} {
		t.Run(c.name, func(t *testing.T) {
			with, without := open(t, c.config), open(t, c.config)
			f := c.config.Space.Frame()
			fix := func(s float64) sensor.Event {
				return sensor.Event{Time: at(s), Sensor: "gps", Measurement: sensor.Fix{Position: f.Inverse(geo.Point{E: 10, N: 32}), SigmaM: 10}}
			}
			for _, s := range []*Session{with, without} {
				mustAdd(t, s, fix(0))
				mustAdd(t, s, fix(1))
				if s == with {
					if _, err := s.Add(sensor.Event{Time: at(1), Sensor: "who", Measurement: c.impossible}); err != nil {
						t.Fatal(err)
					}
				}
				mustAdd(t, s, fix(2))
				mustAdd(t, s, fix(3)) // 1 s is computed
			}
			p, q := with.Latest(), without.Latest()
			if p.TimeNS != int64(at(1)) || len(p.Evidence) != 2 || len(q.Evidence) != 1 {
				t.Fatalf("%d: %v, %v", p.TimeNS, p.Evidence, q.Evidence)
			}
			if e := p.Evidence[1]; e.Sensor != "who" || e.Kind != sensor.KindSighting || !math.IsInf(e.LogEvidence, -1) {
				t.Errorf("evidence %+v", e)
			}
			if !(p.LogEvidence < 0) || math.IsInf(p.LogEvidence, 0) {
				t.Errorf("running evidence %v", p.LogEvidence)
			}
			if p.Status != summary.Contradicted || len(p.Alarms) != 1 || p.Alarms[0].Kind != monitor.Impossible || p.Alarms[0].Key.Sensor != "who" {
				t.Errorf("status %v, alarms %+v", p.Status, p.Alarms)
			}
			with.Flush()
			without.Flush()
			if !reflect.DeepEqual(with.state.belief, without.state.belief) || with.state.logEvidence != without.state.logEvidence {
				t.Error("the belief or its running evidence is another one")
			}
			if len(with.Latest().Evidence) != 1 || with.Latest().LogEvidence == p.LogEvidence {
				t.Errorf("what followed was not taken: %+v", with.Latest().Evidence)
			}
			for i := 4; i < 14; i++ { // 0 s to 13 s: ten since, for 12 s
				mustAdd(t, with, fix(float64(i)))
			}
			with.Flush()
			if got := with.Latest(); got.Status == summary.Contradicted || len(got.Alarms) > 0 {
				t.Errorf("ten measurements later: status %v, alarms %+v", got.Status, got.Alarms)
			}
		})
	}
}

// TestEndOfTheFrame displaces a vehicle on a plane by thousands of kilometres: it
// stays where its frame ends, and every figure is a number.
func TestEndOfTheFrame(t *testing.T) {
	p := sea()
	s := open(t, Config{Space: p, Start: pointStart(p, geo.Point{}, 50), MaxCells: 2000})
	for i := range 12 {
		mustAdd(t, s, sensor.Event{Time: at(float64(i+1) * 4000), Sensor: "ins", Measurement: sensor.Displacement{
			Since: at(float64(i) * 4000), EastM: 1.4e6, NorthM: 1e5, CovM2: [3]float64{100, 0, 100},
		}})
	}
	s.Flush()
	q := s.Latest()
	if r := q.MeanFrame.Norm(); !(r > endOfFrameM && r < 2*endOfFrameM) || q.Mean.Check() != nil || !(q.CovFrame.EE < 1e6) {
		t.Errorf("%v, %v, %+v", q.MeanFrame, q.Mean, q.CovFrame)
	}
}

func mustAdd(t *testing.T, s *Session, ev sensor.Event) {
	t.Helper()
	if _, err := s.Add(ev); err != nil {
		t.Fatal(err)
	}
}
