package session

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/kernel"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// ridge is a height field: hills of a smooth formula.
type ridge struct{ frame geo.Frame }

var _ geo.Field = ridge{}

func (r ridge) Frame() geo.Frame { return r.frame }
func (r ridge) Bounds() geo.Box {
	return geo.Box{Min: geo.Point{E: -5000, N: -5000}, Max: geo.Point{E: 5000, N: 5000}}
}

func (r ridge) height(p geo.Point) float64 {
	return -30 + 8*math.Sin(p.E/90) + 6*math.Cos(p.N/70)
}

func (r ridge) Sample(dst geo.Heights, east, north []float64) {
	for i := range east {
		dst.HeightM[i] = r.height(geo.Point{E: east[i], N: north[i]})
		dst.SlopeE[i], dst.SlopeN[i] = 8./90*math.Cos(east[i]/90), -6./70*math.Sin(north[i]/70)
		dst.VarianceM2[i] = 0.25
	}
}

func degrees(f geo.Frame, p geo.Point) (lon, lat *float64) {
	a, b := f.Inverse(p).Degrees()
	return &a, &b
}

// TestEveryKind takes each kind through a session once, on each space that it
// is for: the measurements give finite evidence, and leave the belief sharper
// or as wide; the motions cover their time.
func TestEveryKind(t *testing.T) {
	town := crossing()
	town.Height = func(e, n float64) (h, gE, gN float64) { return 100 + 0.05*e + 0.02*n, 0.05, 0.02 }
	bottom := plane.Over(ridge{geo.NewFrame(seaOrigin)}, "ridge", 10)
	where := town.charted(60)
	h, _, _ := town.Height(where.E, where.N)
	_, heading, _ := town.At(0, 60)
	post := where.Add(geo.Point{E: 25, N: 10})
	lon, lat := degrees(town.Frame(), post)
	onRoad := &sensor.Suite{Posts: []sensor.Post{{ID: "gate", LonDeg: lon, LatDeg: lat}}, Beacons: []sensor.Place{{ID: "mast", LonDeg: lon, LatDeg: lat}}}
	// Grid and true north are the same on the frame's meridian, and 3e-7 rad
	// apart 20 m from it.
	toPost := post.Sub(where)
	fromPost := kernel.Atan2(-toPost.E, -toPost.N)
	lon2, lat2 := degrees(bottom.Frame(), geo.Point{E: 300, N: 200})
	onWater := &sensor.Suite{Beacons: []sensor.Place{{ID: "mast", LonDeg: lon2, LatDeg: lat2}}}
	turning := &sensor.Suite{Beacons: onWater.Beacons, Sensors: []sensor.Sensor{{Name: "turn", Kind: "turn"}, {Name: "travel", Kind: "travel"}, {Name: "body_displacement", Kind: "body_displacement"}, {Name: "heading", Kind: "heading"}, {Name: "speed", Kind: "speed"}}}
	depth := -ridge{}.height(geo.Point{})
	area := func(f geo.Frame, at geo.Point) [][]geo.LonLat {
		return [][]geo.LonLat{{f.Inverse(at.Add(geo.Point{E: -20, N: -20})), f.Inverse(at.Add(geo.Point{E: 20, N: -20})), f.Inverse(at.Add(geo.Point{N: 30}))}}
	}
	roads := Config{Space: town, Names: town, Suite: onRoad, Start: pointStart(town, where, 15), MaxCells: 20000}
	water := Config{Space: bottom, Suite: onWater, Start: pointStart(bottom, geo.Point{}, 40), MaxCells: 3000}
	facing := Config{Space: bottom, Suite: turning, Start: pointStart(bottom, geo.Point{}, 40), MaxCells: 600}
	seen := map[string]bool{}
	for _, c := range []struct {
		name   string
		config Config
		m      sensor.Measurement
	}{
		{"roads", roads, sensor.Travel{Since: at(0), DistanceM: 5, SigmaM: 0.1}},
		{"roads", roads, sensor.Turn{Since: at(0), AngleRad: 0.01, SigmaRad: 0.01}},
		{"roads", roads, sensor.Displacement{Since: at(0), EastM: 1.5, NorthM: 4.8, CovM2: [3]float64{0.1, 0, 0.1}}},
		{"roads", roads, sensor.BodyDisplacement{Since: at(0), ForwardM: 5, TurnRad: 0.01, SigmaForwardM: 0.1, SigmaRightM: 0.1, SigmaTurnRad: 0.01}},
		{"roads", roads, sensor.Speed{MPS: 5, SigmaMPS: 0.3}},
		{"roads", roads, sensor.Standstill{}},
		{"roads", roads, sensor.HeadingFix{HeadingRad: heading, SigmaRad: 0.1}},
		{"roads", roads, sensor.Barometer{AltitudeM: h, SigmaM: 1}},
		{"roads", roads, sensor.Barometer{HasPressure: true, PressureHPa: sensor.StandardPressureHPa(h, 1013.25), SigmaM: 1}},
		{"roads", roads, sensor.Clearance{ClearanceM: 20, AltitudeM: h + 20, SigmaM: 1}},
		{"roads", roads, sensor.Sounding{DepthBelowTransducerM: 1, TransducerDepthM: -h - 1, SigmaM: 1}},
		{"roads", roads, sensor.Range{Beacon: sensor.Beacon{ID: "mast"}, RangeM: toPost.Norm(), SigmaM: 1}},
		{"roads", roads, sensor.Bearing{Beacon: sensor.Beacon{ID: "mast"}, BearingRad: kernel.Atan2(toPost.E, toPost.N), SigmaRad: 0.05}},
		{"roads", roads, sensor.AcousticBearing{Post: "gate", BearingRad: fromPost, SigmaRad: 0.05}},
		{"roads", roads, sensor.Fix{Position: town.Frame().Inverse(where), SigmaM: 4}},
		{"roads", roads, sensor.Sighting{Road: "Long Street", Mistaken: 0.1}},
		{"roads", roads, sensor.Sighting{Area: area(town.Frame(), where), Mistaken: 0.1}},
		{"water", water, sensor.Displacement{Since: at(0), EastM: 4, CovM2: [3]float64{0.1, 0, 0.1}}},
		{"water", water, sensor.Speed{MPS: 4, SigmaMPS: 0.3, HasCourse: true, CourseRad: 1}},
		{"water", water, sensor.Standstill{}},
		{"water", water, sensor.Clearance{ClearanceM: 50, AltitudeM: 50 - depth, SigmaM: 1}},
		{"water", water, sensor.Sounding{DepthBelowTransducerM: depth - 2, TransducerDepthM: 2, SigmaM: 0.3, Beams: []sensor.Beam{{RightM: 30, DepthBelowTransducerM: depth, SigmaM: 1}}}},
		{"water", water, sensor.Range{Beacon: sensor.Beacon{ID: "mast"}, RangeM: math.Hypot(300, 200), SigmaM: 2}},
		{"water", water, sensor.Bearing{Beacon: sensor.Beacon{ID: "mast"}, BearingRad: math.Atan2(300, 200), SigmaRad: 0.02}},
		{"water", water, sensor.Fix{Position: seaOrigin, SigmaM: 10}},
		{"water", water, sensor.Sighting{Area: area(bottom.Frame(), geo.Point{}), Mistaken: 0.1}},
		{"facing", facing, sensor.Travel{Since: at(0), DistanceM: 5, SigmaM: 0.1}},
		{"facing", facing, sensor.Turn{Since: at(0), AngleRad: 0.01, SigmaRad: 0.01}},
		{"facing", facing, sensor.BodyDisplacement{Since: at(0), ForwardM: 5, RightM: 0.2, TurnRad: 0.01, SigmaForwardM: 0.1, SigmaRightM: 0.1, SigmaTurnRad: 0.01}},
		{"facing", facing, sensor.Speed{MPS: 5, SigmaMPS: 0.3}},
		{"facing", facing, sensor.HeadingFix{HeadingRad: 1, SigmaRad: 0.1}},
		{"facing", facing, sensor.Sounding{DepthBelowTransducerM: depth - 2, TransducerDepthM: 2, SigmaM: 0.3, Beams: []sensor.Beam{{RightM: 30, DepthBelowTransducerM: depth, SigmaM: 1}}}},
	} {
		kind := c.m.Kind()
		seen[kind] = true
		t.Run(c.name+"/"+kind, func(t *testing.T) {
			s := open(t, c.config)
			// Something at 0 s begins the session and says nothing; a first
			// speed is only there to be followed.
			events := []sensor.Event{everywhere(c.config.Space.Frame(), 0, 0)}
			if _, ok := c.m.(sensor.Speed); ok {
				events = append(events, sensor.Event{Time: at(0), Sensor: kind, Number: 1, Measurement: c.m})
			}
			if !sensor.IsMotion(kind) { // or the gap spreads the belief
				events = append(events, sensor.Event{Time: at(1), Sensor: "handbrake", Measurement: sensor.Standstill{}})
			}
			o := feed(t, s, append(events, sensor.Event{Time: at(1), Sensor: kind, Number: 2, Measurement: c.m}))
			if len(o.posteriors) != 2 {
				t.Fatalf("%d posteriors", len(o.posteriors))
			}
			before, after := o.posteriors[0], o.posteriors[1]
			own := 0
			for _, e := range after.Evidence {
				if e.Sensor == kind {
					own++
					if e.Kind != kind || e.Number != 2 || math.IsInf(e.LogEvidence, 0) || math.IsNaN(e.LogEvidence) {
						t.Errorf("evidence %+v", e)
					}
				}
			}
			if own != 1 && !sensor.IsMotion(kind) || own != 0 && sensor.IsMotion(kind) {
				t.Errorf("%d evidences: %+v", own, after.Evidence)
			}
			_, onlyTurns := c.m.(sensor.Turn)
			if gap := after.GapS; (gap == 1) != onlyTurns {
				t.Errorf("a gap of %v s", gap)
			}
			v0, v1 := before.CovFrame.EE+before.CovFrame.NN, after.CovFrame.EE+after.CovFrame.NN
			if !(v1 > 0 && (onlyTurns || v1 < v0+40)) { // 5 m in an unknown direction add 25 m², slip, map error and scale less than (3 m)²
				t.Errorf("the variance goes from %v to %v m²", v0, v1)
			}
			moved := after.MeanFrame.Sub(before.MeanFrame).Norm()
			switch kind {
			case sensor.KindTravel, sensor.KindDisplacement, sensor.KindBodyDisplacement, sensor.KindSpeed:
				// A heading that nobody knows leaves the mean where it is.
				if !after.Speed.Known || c.name != "facing" && (moved < 2 || moved > 6) {
					t.Errorf("speed %+v, the mean moves by %v m", after.Speed, moved)
				}
			case sensor.KindRange, sensor.KindBearing, sensor.KindFix, sensor.KindAcousticBearing:
				if v1 > 0.95*v0 {
					t.Errorf("the variance goes from %v to %v m²: it says nothing", v0, v1)
				}
			}
		})
	}
	for _, kind := range sensor.Kinds() {
		if !seen[kind] {
			t.Errorf("no case for %s", kind)
		}
	}
}

// TestFindsTheHeading starts a boat at a point with its heading unknown. What
// it measures is in its own axes, besides ranges to three beacons: within the
// run it knows its heading and place, as well as it says.
func TestFindsTheHeading(t *testing.T) {
	water := sea()
	f := water.Frame()
	masts := []geo.Point{{E: 400, N: 100}, {E: -250, N: 350}, {E: -100, N: -450}}
	for _, body := range []bool{true, false} {
		suite := &sensor.Suite{Sensors: []sensor.Sensor{{Name: "radio", Kind: "range"}}}
		if body {
			suite.Sensors = append(suite.Sensors, sensor.Sensor{Name: "camera", Kind: "body_displacement"})
		} else {
			suite.Sensors = append(suite.Sensors, sensor.Sensor{Name: "log", Kind: "travel"}, sensor.Sensor{Name: "gyro", Kind: "turn"}, sensor.Sensor{Name: "compass", Kind: "heading"})
		}
		for i, m := range masts {
			lon, lat := degrees(f, m)
			suite.Beacons = append(suite.Beacons, sensor.Place{ID: string(rune('a' + i)), LonDeg: lon, LatDeg: lat})
		}
		nees, angle, n, beyond := 0.0, 0.0, 0, 0
		for seed := range uint64(4) {
			rng := rand.New(rand.NewPCG(seed, 5))
			s := open(t, Config{Space: water, Suite: suite, Start: pointStart(water, geo.Point{E: 3, N: -2}, 6), MaxCells: 1000})
			place, facing := geo.Point{E: 3 + 6*rng.NormFloat64(), N: -2 + 6*rng.NormFloat64()}, 2*math.Pi*rng.Float64()
			first := facing
			var last *summary.Posterior
			for i := 1; i <= 40; i++ {
				from, to := float64(i-1), float64(i)
				turn := 0.05 * math.Sin(to/5)
				sin, cos := math.Sincos(facing + turn/2)
				place = place.Add(geo.Point{E: 4 * sin, N: 4 * cos})
				facing += turn
				put := func(name string, number int, m sensor.Measurement) {
					ps, err := s.Add(sensor.Event{Time: at(to), Sensor: name, Number: uint64(number), Measurement: m})
					if err != nil {
						t.Fatal(err)
					}
					if len(ps) > 0 {
						last = ps[len(ps)-1]
					}
				}
				forward, turned := 4+0.1*rng.NormFloat64(), turn+0.005*rng.NormFloat64()
				if body {
					put("camera", i, sensor.BodyDisplacement{Since: at(from), ForwardM: forward, RightM: 0.1 * rng.NormFloat64(), TurnRad: turned, SigmaForwardM: 0.1, SigmaRightM: 0.1, SigmaTurnRad: 0.005})
				} else {
					put("log", i, sensor.Travel{Since: at(from), DistanceM: forward, SigmaM: 0.1})
					put("gyro", i, sensor.Turn{Since: at(from), AngleRad: turned, SigmaRad: 0.005})
					if i == 20 { // once, and not good
						put("compass", i, sensor.HeadingFix{HeadingRad: facing + 0.1*rng.NormFloat64(), SigmaRad: 0.1})
					}
				}
				m := i % 3
				put("radio", i, sensor.Range{Beacon: sensor.Beacon{ID: string(rune('a' + m))}, RangeM: place.Sub(masts[m]).Norm() + rng.NormFloat64(), SigmaM: 1})
			}
			if ps := s.Flush(); len(ps) > 0 {
				last = ps[len(ps)-1]
			}
			d := last.MeanFrame.Sub(place)
			g, _ := f.Convergence(place)
			turned := geo.WrapPi(last.Heading.TrueRad - g - facing)
			// 160 m run with ranges of 1 m: the ends' error of some 1 m gives
			// the heading to 0.6/160·√12, the gyro's walk of 0.005·√40 = 0.03
			// rad on top; five times of which.
			if !last.Heading.Known || last.Heading.SigmaRad > 0.1 || math.Abs(turned) > 5*last.Heading.SigmaRad {
				t.Errorf("seed %d, begun at %.2f rad: the heading is %.3f ± %.3f rad off", seed, first, turned, last.Heading.SigmaRad)
			}
			// Two beacons at right angles give 1 m an axis within a few
			// seconds: a 95 % radius of 2.4 m.
			if last.Radius95M > 2.4 {
				t.Errorf("seed %d: a 95 %% radius of %.1f m", seed, last.Radius95M)
			}
			if d.Norm() > last.Radius95M {
				beyond++
			}
			c := last.CovFrame
			nees += (c.NN*d.E*d.E - 2*c.EN*d.E*d.N + c.EE*d.N*d.N) / (c.EE*c.NN - c.EN*c.EN)
			angle += turned * turned / (last.Heading.SigmaRad * last.Heading.SigmaRad)
			n++
		}
		// Binomial(4, 0.05): three or more beyond have a probability of 5e-4.
		if beyond > 2 {
			t.Errorf("body %v: %d of %d runs end beyond their 95 %% radius", body, beyond, n)
		}
		// Chi-square with 8 and 4 degrees of freedom: 99.9 % points 26.1 and 18.5.
		if nees > 26.1 || angle > 18.5 {
			t.Errorf("body %v: sums over %d runs of squared errors over variance: position %.1f, heading %.1f", body, n, nees, angle)
		}
	}
}
