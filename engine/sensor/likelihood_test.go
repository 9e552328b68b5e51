package sensor

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
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

// Every density, outliers included, integrates to 1 over what could have been
// measured. Seeds are fixed; sigmas and outlier shares are drawn.
func TestDensitiesIntegrateToOne(t *testing.T) {
	w := newWorld()
	rng := rand.New(rand.NewPCG(1, 2))
	beaconAt := geo.Point{E: -500, N: 700}
	beacon := Beacon{Position: w.frame.Inverse(beaconAt)}
	here := geo.Point{E: 400, N: 150}
	for trial := range 20 {
		out, heavy := 0.3*rng.Float64(), 0.2*rng.Float64()
		c := w.context(2, nil, here)
		qs := planeQuantities()
		if trial%2 == 1 {
			c.Quantities = qs
		} else {
			qs = nil
		}
		set := func(kind string) {
			c.Suite.Sensors = []Sensor{{Name: kind, Kind: kind, OutlierProbability: &out, HeavyProbability: heavy, HeavyFactor: 3, MaxRangeM: 4000}}
		}
		mean := []float64{0, 0, 0.7, 0}[:len(qs)]
		integrate := func(name string, lo, hi float64, n int, of func(z float64) Measurement) {
			t.Helper()
			sum := 0.0
			for i := range n {
				m := of(lo + (hi-lo)*(float64(i)+0.5)/float64(n))
				set(m.Kind())
				ls, err := Likelihoods(Event{Sensor: m.Kind(), Measurement: m}, c)
				if err != nil {
					t.Fatal(err)
				}
				switch l := ls[0].(type) {
				case filter.LinearLikelihood:
					sum += density(l, w.spot(l.Wants(), here), qs, mean)
				case filter.Likelihood:
					dst := []float64{0}
					l.LogLikelihood(dst, w.spot(l.Wants(), here))
					sum += math.Exp(dst[0])
				}
			}
			// Midpoints at two or more a sigma are exact to e^(-2π²·4) for
			// Gaussians (Poisson summation); the ends cut what lies beyond 6
			// sigma of a heavy part: 2e-9. 1e-6 has room.
			if got := sum * (hi - lo) / float64(n); !near(got, 1, 1e-6) {
				t.Errorf("trial %d: %s integrates to %v", trial, name, got)
			}
		}
		sigma := 20 * (0.5 + rng.Float64())
		integrate("range", 0, 4000, 1000, func(z float64) Measurement { return Range{beacon, z, sigma} })
		// Near the beacon: the exact form; z below 0 counts here, since the
		// normal part reaches there, and the flat part then spans the same.
		b := beaconAt
		beaconAt = geo.Point{E: here.E + 30, N: here.N}
		nearBeacon := Beacon{Position: w.frame.Inverse(beaconAt)}
		integrate("near range", -2000, 2000, 1000, func(z float64) Measurement { return Range{nearBeacon, z, sigma} })
		beaconAt = b
		for _, deg := range []float64{2 + 10*rng.Float64(), 20 + 40*rng.Float64()} {
			s := geo.Rad(deg)
			// A heavy part of three times 12° is cut at 180°, 5 sigma of it:
			// 6e-7 of its share, at most 0.2.
			integrate("bearing", -math.Pi, math.Pi, 720, func(z float64) Measurement { return Bearing{beacon, z, s} })
			integrate("post", -math.Pi, math.Pi, 720, func(z float64) Measurement { return AcousticBearing{"post", z, s} })
			integrate("line of microphones", -math.Pi, math.Pi, 720, func(z float64) Measurement { return AcousticBearing{"line", z, s} })
			if qs != nil && deg < 15 {
				integrate("heading", -math.Pi, math.Pi, 720, func(z float64) Measurement { return HeadingFix{z, s} })
			}
		}
		lo, hi := c.Suite.Vehicle.LowestM, c.Suite.Vehicle.HighestM
		integrate("clearance", lo, hi, 5000, func(z float64) Measurement { return Clearance{0, z, sigma} })
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
		{math.Inf(1), math.Inf(1), true, 1}, {5, 100, true, 1}, {0.01, 0.1, true, 0.01},
		{0.01, 0.1, false, 0.01}, {0.5, 0.5, false, 0.1}, {1, 0, false, 1e-6},
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

func TestFormsChosen(t *testing.T) {
	w := newWorld()
	c := w.context(2, nil, geo.Point{})
	beacon := Beacon{Position: w.frame.Inverse(geo.Point{E: 500})}
	linear := func(m Measurement) bool {
		t.Helper()
		ls, err := Likelihoods(Event{Sensor: m.Kind(), Measurement: m}, c)
		if err != nil {
			t.Fatal(err)
		}
		_, ok := ls[0].(filter.LinearLikelihood)
		return ok
	}
	if !linear(Bearing{beacon, 1, geo.Rad(14.9)}) || linear(Bearing{beacon, 1, geo.Rad(15.1)}) {
		t.Error("the form of a bearing does not change at 15°")
	}
	if !linear(AcousticBearing{"post", 1, 0.05}) || linear(AcousticBearing{"line", 1, 0.05}) {
		t.Error("an ambiguous array is not taken exactly")
	}
	// A line of microphones east-west hears north and south alike.
	ls, err := Likelihoods(Event{Sensor: "acoustic_bearing", Measurement: AcousticBearing{"line", 0.3, 0.05}}, c)
	if err != nil {
		t.Fatal(err)
	}
	post := w.frame.Forward(c.Suite.Posts[1].Position())
	s, co := math.Sincos(0.3 - 0) // the post is 320 m off the middle: convergence 4e-5
	dst := make([]float64, 3)
	ls[0].(filter.Likelihood).LogLikelihood(dst, w.spot(filter.WantPosition,
		geo.Point{E: post.E + 100*s, N: post.N + 100*co}, geo.Point{E: post.E + 100*s, N: post.N - 100*co}, geo.Point{E: post.E - 100*s, N: post.N + 100*co}))
	if !near(dst[0], dst[1], 1e-3) || dst[2] > dst[0]-2 {
		t.Errorf("both sides and elsewhere: %v", dst)
	}
}

func TestSightings(t *testing.T) {
	w := newWorld()
	c := w.context(2, nil, geo.Point{})
	pt := func(e, n float64) geo.LonLat { return w.frame.Inverse(geo.Point{E: e, N: n}) }
	square := [][]geo.LonLat{
		{pt(0, 0), pt(100, 0), pt(100, 100), pt(0, 100), pt(0, 0)},
		{pt(40, 40), pt(60, 40), pt(60, 60), pt(40, 60)}, // a hole, not closed
	}
	for _, mistaken := range []float64{0, 0.2} {
		ls, err := Likelihoods(Event{Sensor: "sighting", Measurement: Sighting{Area: square, Mistaken: mistaken}}, c)
		if err != nil {
			t.Fatal(err)
		}
		dst := make([]float64, 5)
		ls[0].(filter.Likelihood).LogLikelihood(dst, w.spot(filter.WantPosition,
			geo.Point{E: 10, N: 10}, geo.Point{E: 50, N: 50}, geo.Point{E: -1, N: 50}, geo.Point{E: 99, N: 1}, geo.Point{E: 50, N: 200}))
		in, out := math.Log(1-mistaken), math.Log(mistaken)
		for i, want := range []float64{in, out, out, in, out} {
			if dst[i] != want && !near(dst[i], want, 1e-15) {
				t.Errorf("mistaken %v, point %d: %v, want %v", mistaken, i, dst[i], want)
			}
		}
	}
	far := [][]geo.LonLat{{geo.FromDegrees(100, 0), geo.FromDegrees(101, 0), geo.FromDegrees(100, 1)}}
	if _, err := Likelihoods(Event{Sensor: "sighting", Measurement: Sighting{Area: far}}, c); err == nil || !strings.Contains(err.Error(), "from the map's middle") {
		t.Errorf("an area on another continent: %v", err)
	}
	c = w.context(1, []filter.Quantity{{Name: filter.Along}}, geo.Point{})
	if _, err := Likelihoods(Event{Sensor: "sighting", Measurement: Sighting{Road: "Nowhere"}}, c); err == nil || !strings.Contains(err.Error(), `"Nowhere"`) {
		t.Errorf("an unknown road: %v", err)
	}
	c.Roads = twoRoads{}
	ls, err := Likelihoods(Event{Sensor: "sighting", Measurement: Sighting{Road: "Bent Lane", Mistaken: 0.1}}, c)
	if err != nil {
		t.Fatal(err)
	}
	dst := make([]float64, 5)
	ls[0].(filter.Likelihood).LogLikelihood(dst, w.spot(filter.WantPosition,
		geo.Point{E: 30, N: 40}, geo.Point{E: 60, N: 90}, geo.Point{E: 30, N: 40.2}, geo.Point{E: 60, N: 131}, geo.Point{E: 10, N: 100}))
	for i, want := range []float64{math.Log(0.9), math.Log(0.9), math.Log(0.1), math.Log(0.1), math.Log(0.1)} {
		if !near(dst[i], want, 1e-15) {
			t.Errorf("road, point %d: %v, want %v", i, dst[i], want)
		}
	}
	c = w.context(2, nil, geo.Point{})
	if _, err := Likelihoods(Event{Sensor: "sighting", Measurement: Sighting{Road: "High Street"}}, c); !errors.Is(err, ErrWrongSpace) {
		t.Errorf("a road on a plane: %v", err)
	}
}

// twoRoads has one named road of two corners and one without a name.
type twoRoads struct{}

func (twoRoads) Named(name string) []int32 {
	if name == "Bent Lane" {
		return []int32{1}
	}
	return nil
}

func (twoRoads) Polyline(chart int32) (eastM, northM []float64) {
	if chart == 1 {
		return []float64{0, 60, 60}, []float64{0, 80, 130}
	}
	return []float64{0, 100}, []float64{100, 100}
}

func TestBeamsAreThinned(t *testing.T) {
	var fan []Beam
	for i := -50; i <= 50; i++ {
		fan = append(fan, Beam{RightM: float64(i), DepthBelowTransducerM: 30, SigmaM: 0.3})
	}
	kept := thin(fan, 20)
	var at []float64
	for _, b := range kept {
		at = append(at, b.RightM)
	}
	// From the transducer outwards, port first because it comes first.
	if fmt.Sprint(at) != "[-20 20 -40 40]" {
		t.Errorf("kept %v", at)
	}
	if got := len(thin(fan, 0.5)); got != maxKeptBeams {
		t.Errorf("%d beams kept, at most %d may be", got, maxKeptBeams)
	}
	w := newWorld()
	ev := Event{Sensor: "sounding", Measurement: Sounding{DepthBelowTransducerM: 30, SigmaM: 0.3, Beams: fan}}
	for _, c := range []struct {
		qs   []filter.Quantity
		pose float64
		want int
	}{{nil, NoHeading, 1}, {nil, 0.01, 5}, {planeQuantities(), NoHeading, 5}} {
		ctx := w.context(2, c.qs, geo.Point{})
		ctx.Pose.HeadingVar = c.pose
		ls, err := Likelihoods(ev, ctx)
		if err != nil || len(ls) != c.want {
			t.Errorf("%d likelihoods, want %d (%v)", len(ls), c.want, err)
		}
	}
}

// The same event and context give the same bits.
func TestSameBits(t *testing.T) {
	w := newWorld()
	for _, ev := range w.linears() {
		if ev.Measurement.Kind() == KindBarometer {
			continue
		}
		var first string
		for range 3 {
			qs := planeQuantities()
			ls, err := Likelihoods(ev, w.context(2, qs, geo.Point{E: 400, N: 150}))
			if err != nil {
				t.Fatal(err)
			}
			text := ""
			for _, l := range ls {
				lin := l.(filter.LinearLikelihood)
				tm := terms(1, lin.Rows(), 4)
				lin.Linearize(tm, w.spot(lin.Wants(), geo.Point{E: 400, N: 150}), qs, []float64{0, 0, 0.7, 0})
				for _, v := range append(append(tm.Residual, tm.Row...), tm.Extra...) {
					text += fmt.Sprintf("%x ", math.Float64bits(v))
				}
			}
			if first == "" {
				first = text
			}
			if text != first {
				t.Errorf("%s: %s, then %s", ev.Sensor, first, text)
			}
		}
	}
}
