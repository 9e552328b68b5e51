package sensor

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// linears are events whose likelihoods are linear, with the position that
// they are looked at from being (400, 150) or so.
func (w world) linears() []Event {
	beacon := Beacon{Position: w.frame.Inverse(geo.Point{E: -500, N: 700})}
	here := w.frame.Inverse(geo.Point{E: 405, N: 140})
	return []Event{
		{Sensor: "range", Measurement: Range{beacon, 1050, 10}},
		{Sensor: "arm", Measurement: Range{beacon, 1050, 10}},
		{Sensor: "bearing", Measurement: Bearing{beacon, -1, 0.1}},
		{Sensor: "armbearing", Measurement: Bearing{beacon, -1, 0.1}},
		{Sensor: "acoustic", Measurement: AcousticBearing{"post", 0.5, 0.1}},
		{Sensor: "fix", Measurement: Fix{here, 5}},
		{Sensor: "armfix", Measurement: Fix{here, 5}},
		{Sensor: "heading", Measurement: HeadingFix{0.4, 0.05}},
		{Sensor: "clearance", Measurement: Clearance{300, 420, 3}},
		{Sensor: "armclear", Measurement: Clearance{300, 420, 3}},
		{Sensor: "sounding", Measurement: Sounding{DepthBelowTransducerM: 30, TransducerDepthM: 1, SigmaM: 0.5, Beams: []Beam{{25, 0, 31, 0.5}, {0, -30, 28, 0.5}}}},
		{Sensor: "barometer", Measurement: Barometer{AltitudeM: 110, SigmaM: 3}},
	}
}

// Rows are the derivatives of the residual (with the sign turned), against
// central differences: along the road, in east and north, and in heading.
// With steps of 1e-3 the third derivatives here (below 1e-3 a metre squared or
// radian squared) leave 1e-9, rounding of residuals up to 1e3 leaves 1e-10 /
// 1e-3; 1e-6 has room for both. A fix on roads turns its axes with the road,
// and the road's own grade is not differentiated in turn; both are left out
// of rows by design and checked by value instead.
func TestRowsAreDerivatives(t *testing.T) {
	w := newWorld()
	const step, tol = 1e-3, 1e-6
	check := func(name string, l filter.LinearLikelihood, qs []filter.Quantity, at func(x []float64) *filter.Columns, x []float64) {
		t.Helper()
		m, k := l.Rows(), len(x)
		n := len(qs)
		eval := func(x []float64) *filter.Terms {
			tm := terms(1, m, k)
			l.Linearize(tm, at(x), qs, x[:n])
			return tm
		}
		base := eval(x)
		if !math.IsNaN(base.Flat[0]) {
			t.Errorf("%s: flat", name)
			return
		}
		for j := range k {
			up, down := append([]float64(nil), x...), append([]float64(nil), x...)
			up[j] += step
			down[j] -= step
			a, b := eval(up), eval(down)
			for r := range m {
				want := -(a.Residual[r] - b.Residual[r]) / (2 * step)
				if got := base.Row[r*k+j]; !near(got, want, tol) {
					t.Errorf("%s: row %d, quantity %d: %v, differences say %v", name, r, j, got, want)
				}
			}
		}
	}
	at := geo.Point{E: 400, N: 150}
	for _, ev := range w.linears() {
		kind := ev.Measurement.Kind()
		if kind != KindBarometer {
			for _, qs := range [][]filter.Quantity{planeQuantities(), nil} {
				if kind == KindHeading && qs == nil {
					continue
				}
				ls, err := Likelihoods(ev, w.context(2, qs, at))
				if err != nil {
					t.Fatal(err)
				}
				x := []float64{400, 150, 0.7, 0.01}
				if qs == nil {
					x = x[:2]
				}
				for i, l := range ls {
					lin := l.(filter.LinearLikelihood)
					check(fmt.Sprintf("%s %d on a plane over %d", ev.Sensor, i, len(qs)), lin, qs, func(x []float64) *filter.Columns {
						return w.spot(lin.Wants(), geo.Point{E: x[0], N: x[1]})
					}, x)
				}
			}
		}
		if kind == KindFix || ev.Sensor == "armclear" {
			continue
		}
		for _, qs := range [][]filter.Quantity{Default(1).Quantities(1), {{Name: filter.Along}}} {
			ls, err := Likelihoods(ev, w.context(1, qs, at))
			if err != nil {
				t.Fatal(err)
			}
			lin := ls[0].(filter.LinearLikelihood)
			if strings.HasPrefix(ev.Sensor, "arm") {
				continue // the arm turns with the road: left out of the row
			}
			check(ev.Sensor+" on a road", lin, qs, func(x []float64) *filter.Columns {
				return w.road(lin.Wants(), x[:1])
			}, []float64{120, 0.5, 0.01}[:len(qs)])
		}
	}
	// The two that belong to a step.
	qs := Default(1).Quantities(1)
	al, ok := RoadAlignment(qs, 2)
	if !ok {
		t.Fatal("no alignment")
	}
	check("alignment", al, qs, func(x []float64) *filter.Columns { return w.road(al.Wants(), x[:1]) }, []float64{120, 0.5, 0})
	m := &Motion{Suite: Default(1)}
	m.Reset(0, second)
	m.Add(Event{Time: second, Sensor: "ins", Measurement: Displacement{0, 2, 3, [3]float64{0.1, 0, 0.1}}}, 0)
	ct, ok := m.CrossTrack(w.frame, Pose{})
	if !ok {
		t.Fatal("no cross track")
	}
	// The normal is taken half a step back along the arc; how far that is
	// changes with position by κ|D|/2 of itself, second order in the step:
	// |D|²κ²/2 ≈ 1.6e-4 of a metre a metre, left out of the row.
	one := []filter.Quantity{{Name: filter.Along}}
	tm := func(s float64) *filter.Terms {
		tm := terms(1, 1, 1)
		ct.Linearize(tm, w.road(ct.Wants(), []float64{s}), one, []float64{s})
		return tm
	}
	want := -(tm(120.001).Residual[0] - tm(119.999).Residual[0]) / 0.002
	if got := tm(120).Row[0]; !near(got, want, 2e-4) {
		t.Errorf("cross track: %v, differences say %v", got, want)
	}
}

func TestUnknownHeightIsBroad(t *testing.T) {
	w := newWorld()
	c := w.context(2, nil, geo.Point{})
	c.Plane = nil
	ls, err := Likelihoods(Event{Sensor: "clearance", Measurement: Clearance{10, 200, 3}}, c)
	if err != nil {
		t.Fatal(err)
	}
	l := ls[0].(filter.LinearLikelihood)
	cols := w.spot(l.Wants(), geo.Point{}, geo.Point{E: 5})
	cols.Height[0] = math.NaN()
	tm := terms(2, 1, 2)
	l.Linearize(tm, cols, nil, nil)
	// One over the span of plausible heights, -11000 to 9000 m.
	if !near(tm.Flat[0], -math.Log(20000), 1e-12) || tm.Row[0] != 0 || tm.Row[1] != 0 {
		t.Errorf("void: %v, row %v", tm.Flat[0], tm.Row[:2])
	}
	if !math.IsNaN(tm.Flat[1]) || tm.Extra[1] != worldVarM2 {
		t.Errorf("known: flat %v, map variance %v", tm.Flat[1], tm.Extra[1])
	}
}

// What each kind measures, by hand.
func TestResiduals(t *testing.T) {
	w := newWorld()
	at := geo.Point{E: 400, N: 150}
	h, sE, sN := w.height(at.E, at.N)
	value := func(c Context, ev Event, cols func(filter.Wants) *filter.Columns, mean []float64) *filter.Terms {
		t.Helper()
		ls, err := Likelihoods(ev, c)
		if err != nil {
			t.Fatal(err)
		}
		l := ls[0].(filter.LinearLikelihood)
		tm := terms(1, l.Rows(), max(len(c.Quantities), c.Dim))
		l.Linearize(tm, cols(l.Wants()), c.Quantities, mean)
		return tm
	}
	spot := func(wants filter.Wants) *filter.Columns { return w.spot(wants, at) }
	c := w.context(2, nil, at)
	tm := value(c, Event{Sensor: "clearance", Measurement: Clearance{30, 150, 3}}, spot, nil)
	if !near(tm.Residual[0], 120-h, 1e-12) {
		t.Errorf("clearance: %v, want %v", tm.Residual[0], 120-h)
	}
	tm = value(c, Event{Sensor: "sounding", Measurement: Sounding{DepthBelowTransducerM: 30, TransducerDepthM: 2, SigmaM: 1}}, spot, nil)
	if !near(tm.Residual[0], -32-h, 1e-12) {
		t.Errorf("sounding: %v, want %v", tm.Residual[0], -32-h)
	}
	// Without a heading the arm is variance: slope²·|arm|²/2.
	tm = value(c, Event{Sensor: "armclear", Measurement: Clearance{30, 150, 3}}, spot, nil)
	if want := worldVarM2 + (sE*sE+sN*sN)*10/2; !near(tm.Extra[0], want, 1e-12) || !near(tm.Residual[0], 119.5-h, 1e-12) {
		t.Errorf("arm without heading: extra %v, want %v; residual %v", tm.Extra[0], want, tm.Residual[0])
	}
	// With one it is a place: heading east, forward is east, right is south.
	c.Quantities = planeQuantities()
	tm = value(c, Event{Sensor: "armclear", Measurement: Clearance{30, 150, 3}}, spot, []float64{0, 0, math.Pi / 2, 0})
	hArm, _, _ := w.height(at.E+3, at.N+1)
	if !near(tm.Residual[0], 119.5-hArm, 1e-9) || tm.Extra[0] != worldVarM2 {
		t.Errorf("arm with heading: %v, want %v", tm.Residual[0], 119.5-hArm)
	}
	// A range is true metres: at 50 km from the frame's middle a kilometre of
	// frame is 1000/(1 + 50²/2·6381²) true (Euler radius in the prime
	// vertical at 50° N 6391 km, along the meridian 6373 km).
	far := geo.Point{E: 50000, N: 0}
	beacon := geo.Point{E: 51000, N: 0}
	d, _, err := geo.WGS84.Distance(w.frame.Inverse(far), w.frame.Inverse(beacon))
	if err != nil {
		t.Fatal(err)
	}
	c = w.context(2, nil, far)
	tm = value(c, Event{Sensor: "range", Measurement: Range{Beacon{Position: w.frame.Inverse(beacon)}, d, 1}},
		func(wants filter.Wants) *filter.Columns { return w.spot(wants, far) }, nil)
	// The scale's next term is 3e-10 here; Vincenty's distance is good to
	// 0.1 mm on such lines.
	if !near(tm.Residual[0], 0, 2e-4) {
		t.Errorf("geodesic range: residual %v", tm.Residual[0])
	}
	// A true bearing at the vehicle: the geodesic's azimuth, up to the bend of
	// the geodesic in the frame (1 km at 50 km: 1e3·5e4/(2·6.4e6²) = 6e-7 rad).
	target := geo.Point{E: 50400, N: 900}
	_, az, err := geo.WGS84.Distance(w.frame.Inverse(far), w.frame.Inverse(target))
	if err != nil {
		t.Fatal(err)
	}
	tm = value(c, Event{Sensor: "bearing", Measurement: Bearing{Beacon{Position: w.frame.Inverse(target)}, az, 0.01}},
		func(wants filter.Wants) *filter.Columns { return w.spot(wants, far) }, nil)
	if !near(tm.Residual[0], 0, 2e-6) {
		t.Errorf("geodesic bearing: residual %v", tm.Residual[0])
	}
	// And from a post to the vehicle, measured at the post.
	lon, lat := w.frame.Inverse(far).Degrees()
	c.Suite.Posts = append(c.Suite.Posts, Post{ID: "far", LonDeg: &lon, LatDeg: &lat})
	tm = value(c, Event{Sensor: "acoustic", Measurement: AcousticBearing{"far", az, 0.01}},
		func(wants filter.Wants) *filter.Columns { return w.spot(wants, target) }, nil)
	if !near(tm.Residual[0], 0, 2e-6) {
		t.Errorf("geodesic post bearing: residual %v", tm.Residual[0])
	}
	// A fix beside the road: the offset is across, and the lateral variance
	// is in the second row only.
	road := w.road(filter.WantPosition, []float64{0}) // heading north at (300, 0)
	cr := w.context(1, []filter.Quantity{{Name: filter.Along}}, geo.Point{E: 300})
	ev := Event{Sensor: "fix", Measurement: Fix{w.frame.Inverse(geo.Point{E: 303, N: 4}), 5}}
	tm = value(cr, ev, func(filter.Wants) *filter.Columns { return road }, []float64{0})
	ls, _ := Likelihoods(ev, cr)
	cov := ls[0].(filter.LinearLikelihood).Noise().Parts[0].Cov
	if !near(tm.Residual[0], 4, 1e-6) || !near(tm.Residual[1], 3, 1e-6) || tm.Row[0] != 1 || tm.Row[1] != 0 || cov != [3]float64{25, 0, 25 + 6.25} {
		t.Errorf("fix on a road: %v row %v cov %v", tm.Residual, tm.Row, cov)
	}
	// On roads the vehicle beside the centreline blurs a bearing by
	// lateral / distance: a beacon due north of a road due north.
	ev = Event{Sensor: "bearing", Measurement: Bearing{Beacon{Position: w.frame.Inverse(geo.Point{E: 300, N: 100})}, 0, 0.01}}
	tm = value(cr, ev, func(filter.Wants) *filter.Columns { return road }, []float64{0})
	if want := square(2.5 / 100); !near(tm.Extra[0], want, 1e-9) {
		t.Errorf("bearing's lateral variance %v, want %v", tm.Extra[0], want)
	}
}

// The convergence model against the exact one at 60° N: 2e-6 rad within 20 km,
// 1e-4 within 100 km.
func TestSkew(t *testing.T) {
	f := geo.NewFrame(geo.FromDegrees(10, 60))
	for _, at := range []geo.Point{{}, {E: 50000, N: -30000}, {E: -80000, N: 80000}} {
		s := newSkew(f, at)
		for _, d := range []struct{ reach, tol float64 }{{20000, 2e-6}, {100000, 1e-4}} {
			for e := -1.0; e <= 1; e += 0.25 {
				for n := -1.0; n <= 1; n += 0.25 {
					p := geo.Point{E: at.E + e*d.reach, N: at.N + n*d.reach}
					want, _ := f.Convergence(p)
					if got := s.gamma(p.E, p.N); !near(got, want, d.tol) {
						t.Errorf("from %v at %v: %v, want %v", at, p, got, want)
					}
				}
			}
		}
	}
}

// The share of a measurement whose error lasts is its spacing over that time.
func TestPower(t *testing.T) {
	w := newWorld()
	qs := Default(1).Quantities(1)
	for _, c := range []struct {
		since, travelled float64
		heading          bool
		want             float64
	}{
		{math.Inf(1), math.Inf(1), true, 1},
		{5, 100, true, 1},
		{0.01, 0.1, true, 0.01},
		{0.01, 0.1, false, 0.01},
		{0.5, 0.5, false, 0.1},
		{1, 0, false, 1e-6},
	} {
		ctx := w.context(1, qs, geo.Point{})
		if !c.heading {
			ctx.Quantities = qs[:1]
		}
		ctx.SincePreviousS, ctx.TravelledM = c.since, c.travelled
		ls, err := Likelihoods(Event{Sensor: "heading", Measurement: HeadingFix{1, 0.1}}, ctx)
		if err != nil {
			t.Fatal(err)
		}
		if got := ls[0].(filter.LinearLikelihood).Noise().Power; !near(got, c.want, 1e-12) {
			t.Errorf("%+v: power %v", c, got)
		}
	}
	for _, c := range []struct{ d, want float64 }{{0.05, 0.01}, {-1, 0.2}, {5, 1}, {50, 1}} {
		l, ok := RoadAlignment(qs, c.d)
		if !ok || !near(l.Noise().Power, c.want, 1e-12) {
			t.Errorf("alignment over %v m: %v", c.d, l)
		}
	}
	if _, ok := RoadAlignment(qs, 0); ok {
		t.Error("a standing vehicle is aligned")
	}
	if _, ok := RoadAlignment(qs[:1], 5); ok {
		t.Error("a belief without heading is aligned")
	}
}
