package sensor

import (
	"errors"
	"math"
	"strings"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

const second = Time(1e9)

// good holds one usable measurement of each kind, at time 100 s.
func good() []Measurement {
	since := 99 * second
	here := geo.FromDegrees(10, 50)
	return []Measurement{
		Travel{since, 5, 0.1},
		Turn{since, 0.1, 0.01},
		Displacement{since, 3, 4, [3]float64{1, 0.2, 1}},
		BodyDisplacement{since, 5, 0.1, 0.1, 0.1, 0.1, 0.01},
		Speed{MPS: 3, SigmaMPS: 0.1},
		Speed{MPS: 3, SigmaMPS: 0.1, HasCourse: true, CourseRad: 1},
		HeadingFix{1, 0.1},
		Clearance{100, 500, 3},
		Sounding{DepthBelowTransducerM: 30, TransducerDepthM: 1, SigmaM: 0.3, Beams: []Beam{{10, 0, 31, 0.3}}},
		Barometer{AltitudeM: 100, SigmaM: 3},
		Barometer{HasPressure: true, PressureHPa: 1000, SigmaM: 3},
		Range{Beacon{Position: here}, 100, 5},
		Bearing{Beacon{Position: here}, 1, 0.1},
		AcousticBearing{"post", 1, 0.1},
		Fix{here, 5},
		Sighting{Road: "High Street", Mistaken: 0.1},
		Standstill{},
		Sighting{Area: [][]geo.LonLat{{here, geo.FromDegrees(10.1, 50), geo.FromDegrees(10, 50.1)}}, Mistaken: 0.1},
	}
}

func TestCheckAccepts(t *testing.T) {
	kinds := map[string]bool{}
	for _, m := range good() {
		kinds[m.Kind()] = true
		if err := m.Check(100 * second); err != nil {
			t.Error(err)
		}
	}
	for _, k := range Kinds() {
		if !kinds[k] {
			t.Errorf("no example of %s", k)
		}
	}
	if len(kinds) != len(Kinds()) {
		t.Errorf("%d kinds have an example, %d are listed", len(kinds), len(Kinds()))
	}
}

func TestCheckRefuses(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	at, since := 100*second, 99*second
	here := geo.FromDegrees(10, 50)
	ring := []geo.LonLat{here, geo.FromDegrees(10.1, 50), geo.FromDegrees(10, 50.1)}
	for _, c := range []struct {
		m    Measurement
		want string
	}{
		{Travel{since, nan, 0.1}, "distance_m"},
		{Travel{since, 1, 0}, "sigma_m is 0"},
		{Travel{since, 1, -1}, "sigma_m"},
		{Travel{since, 1, 1e-300}, "sigma_m"}, // its square would be 0
		{Travel{at, 1, 0.1}, "since"},
		{Travel{at + 1, 1, 0.1}, "since"},
		{Travel{math.MinInt64, 1, 0.1}, "since"}, // the difference overflows
		{Travel{at - 25*3600*second, 1, 0.1}, "24 hours"},
		{Travel{since, 1e300, 0.1}, "distance_m"},
		{Turn{since, inf, 0.1}, "angle_deg"},
		{Turn{since, 1, nan}, "sigma_deg"},
		{Displacement{since, nan, 0, [3]float64{1, 0, 1}}, "east_m"},
		{Displacement{since, 1, 0, [3]float64{0, 0, 1}}, "east_m2"},
		{Displacement{since, 1, 0, [3]float64{1, 1, 1}}, "positive definite"},
		{Displacement{since, 1, 0, [3]float64{1, nan, 1}}, "positive definite"},
		{BodyDisplacement{since, 1, inf, 0, 1, 1, 1}, "right_m"},
		{BodyDisplacement{since, 1, 1, 0, 1, 0, 1}, "sigma_right_m"},
		{Speed{MPS: nan, SigmaMPS: 1}, "mps"},
		{Speed{MPS: 1, SigmaMPS: 1, HasCourse: true, CourseRad: nan}, "course_deg"},
		{HeadingFix{1, -0.1}, "sigma_deg"},
		{Clearance{nan, 1, 1}, "clearance_m"},
		{Clearance{1, inf, 1}, "altitude_m"},
		{Sounding{DepthBelowTransducerM: -1, SigmaM: 1}, "depth_below_transducer_m"},
		{Sounding{DepthBelowTransducerM: 1, SigmaM: 1, Beams: make([]Beam, maxBeams+1)}, "beams"},
		{Sounding{DepthBelowTransducerM: 1, SigmaM: 1, Beams: []Beam{{1, 1, 1, 1}, {nan, 1, 1, 1}}}, "beam 2: forward_m"},
		{Barometer{HasPressure: true, PressureHPa: 0, SigmaM: 1}, "pressure_hpa"},
		{Barometer{AltitudeM: nan, SigmaM: 1}, "altitude_m"},
		{Range{Beacon{Position: here}, -1, 1}, "range_m"},
		{Range{Beacon{Position: geo.LonLat{Lat: 3}}, 1, 1}, "not on the globe"},
		{Bearing{Beacon{ID: strings.Repeat("x", 300)}, 1, 1}, "beacon id"},
		{Bearing{Beacon{Position: here}, nan, 1}, "bearing_deg"},
		{AcousticBearing{"", 1, 1}, "post"},
		{Fix{geo.LonLat{Lon: nan}, 1}, "not on the globe"},
		{Fix{here, inf}, "sigma_m"},
		{Sighting{Mistaken: 0.1}, "either an area or a road"},
		{Sighting{Road: "a", Area: [][]geo.LonLat{ring}}, "either an area or a road"},
		{Sighting{Road: "a", Mistaken: 1}, "mistaken"},
		{Sighting{Road: "a", Mistaken: nan}, "mistaken"},
		{Sighting{Area: [][]geo.LonLat{{here, ring[1], here}}}, "three corners"},
		{Sighting{Area: [][]geo.LonLat{ring, {}}}, "ring 2"},
		{Sighting{Area: [][]geo.LonLat{make([]geo.LonLat, maxVertices+1)}}, "simplify"},
	} {
		err := c.m.Check(at)
		if err == nil || !strings.Contains(err.Error(), c.want) || !strings.HasPrefix(err.Error(), c.m.Kind()+": ") {
			t.Errorf("%+v: %v, want %q", c.m, err, c.want)
		}
	}
	// All that is wrong is said at once.
	err := Travel{at, nan, -1}.Check(at)
	for _, w := range []string{"since", "distance_m", "sigma_m"} {
		if err == nil || !strings.Contains(err.Error(), w) {
			t.Errorf("%v lacks %s", err, w)
		}
	}
}

func TestSupports(t *testing.T) {
	road := Default(1).Quantities(1)
	heading := (&Suite{Sensors: []Sensor{{Name: "a", Kind: KindTurn}}}).Quantities(2)
	for _, m := range good() {
		if err := Supports(m, 1, road); err != nil {
			t.Errorf("roads: %v", err)
		}
		_, isBarometer := m.(Barometer)
		s, isSighting := m.(Sighting)
		never := isBarometer || isSighting && s.Road != ""
		if err := Supports(m, 2, heading); (err != nil) != never {
			t.Errorf("plane with heading: %s: %v", m.Kind(), err)
		}
		bare := never
		switch m := m.(type) {
		case Travel, Turn, BodyDisplacement, HeadingFix:
			bare = true
		case Speed:
			bare = !m.HasCourse
		}
		err := Supports(m, 2, nil)
		if (err != nil) != bare || err != nil && !errors.Is(err, ErrWrongSpace) {
			t.Errorf("bare plane: %s: %v", m.Kind(), err)
		}
	}
	if err := Supports(Turn{}, 1, []filter.Quantity{{Name: filter.Along}}); err == nil {
		t.Error("a turn without a heading quantity passes")
	}
}

func TestPrepare(t *testing.T) {
	lon, lat, axis := 10.0, 50.0, 90.0
	s := (&Suite{
		Sensors: []Sensor{
			{Name: "odo", Kind: KindTravel, Sign: -1, TimeOffsetS: 0.5, Noise: SensorNoise{SigmaMPerSqrtM: 0.02}},
			{Name: "gyro", Kind: KindTurn, Noise: SensorNoise{DegPerSqrtS: 0.1}},
		},
		Beacons: []Place{{ID: "mast", LonDeg: &lon, LatDeg: &lat}},
		Posts:   []Post{{ID: "gate", LonDeg: &lon, LatDeg: &lat, AxisDeg: &axis, SpacingM: 0.2, DelaySigmaS: 1.0 / 48000}},
	}).For(1)
	ev, err := s.Prepare(Event{Time: 100 * second, Sensor: "odo", Measurement: Travel{Since: 96 * second, DistanceM: -25}})
	if err != nil {
		t.Fatal(err)
	}
	tr := ev.Measurement.(Travel)
	if ev.Time != 99.5e9 || tr.Since != 95.5e9 || tr.DistanceM != 25 || !near(tr.SigmaM, 0.1, 1e-15) {
		t.Errorf("%v %+v", ev.Time, tr)
	}
	ev, _ = s.Prepare(Event{Time: 100 * second, Sensor: "gyro", Measurement: Turn{Since: 96 * second, AngleRad: 1}})
	if got := ev.Measurement.(Turn).SigmaRad; !near(got, geo.Rad(0.2), 1e-15) {
		t.Errorf("gyro sigma %v", got)
	}
	ev, err = s.Prepare(Event{Time: 1, Measurement: Range{Beacon{ID: "mast"}, 10, 1}})
	if err != nil || ev.Measurement.(Range).Beacon != (Beacon{Position: geo.FromDegrees(10, 50)}) || ev.Sensor != KindRange {
		t.Errorf("%+v %v", ev, err)
	}
	// sigma = c·σ_τ/(d cos θ) at broadside, which for this axis is north.
	ev, err = s.Prepare(Event{Time: 1, Measurement: AcousticBearing{Post: "gate"}})
	want := 20.05 * math.Sqrt(288.15) / 48000 / 0.2
	if err != nil || !near(ev.Measurement.(AcousticBearing).SigmaRad, want, 1e-12) {
		t.Errorf("%+v %v, want %v", ev, err, want)
	}
	ev, err = s.Prepare(Event{Time: 1, Measurement: AcousticBearing{Post: "gate", BearingRad: math.Pi / 2}})
	if err != nil || !near(ev.Measurement.(AcousticBearing).SigmaRad, math.Pi/math.Sqrt(3), 1e-9) {
		t.Errorf("along the axis: %+v %v", ev, err)
	}
	for _, c := range []struct {
		ev   Event
		want string
	}{
		{Event{Time: 1}, "no measurement"},
		{Event{Time: -1, Measurement: Standstill{}}, "1970"},
		{Event{Time: math.MaxInt64, Measurement: Standstill{}}, "1970"},
		{Event{Time: 1, Sensor: "odo", Measurement: Standstill{}}, "the suite says it is a travel"},
		{Event{Time: 1, Measurement: Range{Beacon{ID: "mist"}, 10, 1}}, `"mist" is not in the suite`},
		{Event{Time: 1, Measurement: Bearing{Beacon{ID: "mist"}, 1, 1}}, `"mist" is not in the suite`},
		{Event{Time: 1, Measurement: AcousticBearing{"mist", 1, 1}}, `"mist" is not in the suite`},
		{Event{Time: 2, Measurement: Travel{Since: 1, DistanceM: 3}}, "sigma_m is 0 or missing"},
		{Event{Time: 2, Sensor: strings.Repeat("x", 300), Measurement: Standstill{}}, "bytes"},
	} {
		if _, err := s.Prepare(c.ev); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%+v: %v, want %q", c.ev, err, c.want)
		}
	}
}

func TestEventsCompare(t *testing.T) {
	in := []Event{{Time: 1, Sensor: "b"}, {Time: 2, Sensor: "a"}, {Time: 2, Sensor: "a", Number: 1}, {Time: 2, Sensor: "b"}}
	for i := range in {
		for j := range in {
			if got, want := in[i].Compare(in[j]), i-j; got*want < 0 || (got == 0) != (want == 0) {
				t.Errorf("%d against %d: %d", i, j, got)
			}
		}
	}
}
