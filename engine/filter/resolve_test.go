package filter_test

import (
	"errors"
	"math"
	"reflect"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/plane"
)

// TestSharpMeasurement: a lattice of 40 m spacing, sigma 100 m, takes a
// position of any sigma: mean within 1 % of the posterior's sigma, variance
// within 1 %, and the exact evidence, within the budget, whichever way the
// truth lies between the coarse cells.
func TestSharpMeasurement(t *testing.T) {
	p := plane.Open(geo.LonLat{}, 20000, 100)
	for _, sigma := range []float64{200, 80, 40, 20, 10, 5, 2} {
		for _, z := range []float64{17, 83, -260} {
			b, err := filter.Seed(p, filter.AtPoint{SigmaM: 100}, nil, 1<<18)
			if err != nil {
				t.Fatal(err)
			}
			var w filter.Workspace
			const budget = 1 << 20
			e, err := filter.UpdateWithin(b, p, filtertest.Along{Z: z, SigmaM: sigma}, budget, &w)
			if err != nil {
				t.Fatal(err)
			}
			_, m, v := b.Moments(p, &w)
			gain := 1e4 / (1e4 + sigma*sigma)
			wantVar := sigma * sigma * gain
			wantE := -0.5*z*z/(1e4+sigma*sigma) - 0.5*math.Log(2*math.Pi*(1e4+sigma*sigma))
			if math.Abs(m.N-z*gain) > 0.003*math.Sqrt(wantVar)*(1+math.Abs(z)/100) || math.Abs(v[2]/wantVar-1) > 0.003 {
				t.Errorf("sigma %g, z %g: mean %.4f, variance %.4f; want %.4f, %.4f (spacing %g)", sigma, z, m.N, v[2], z*gain, wantVar, b.Lattice.SpacingM)
			}
			// East is not measured; the interpolations keep it (0.3 % at worst).
			if math.Abs(v[0]/1e4-1) > 5e-3 || math.Abs(m.E) > 0.1 {
				t.Errorf("sigma %g, z %g: east %.4f with variance %.1f; want 0 and 10000", sigma, z, m.E, v[0])
			}
			if math.Abs(e-wantE) > 0.003*(1+z*z/1e4) {
				t.Errorf("sigma %g, z %g: log evidence %.5f, want %.5f", sigma, z, e, wantE)
			}
			if h := b.Lattice.SpacingM; h > 0.41*math.Sqrt(wantVar) || b.Cells() > budget || math.Abs(mass(b)-1) > 1e-12 {
				t.Errorf("sigma %g: spacing %g m, %d cells, mass %v", sigma, h, b.Cells(), mass(b))
			}
		}
	}
}

// TestSharpenWithinBudget: without a budget it is Update, to the bit; and a
// contradiction leaves every bit.
func TestSharpenWithinBudget(t *testing.T) {
	p := plane.Open(geo.LonLat{}, 20000, 100)
	b, err := filter.Seed(p, filter.AtPoint{SigmaM: 100}, nil, 1<<18)
	if err != nil {
		t.Fatal(err)
	}
	var w filter.Workspace
	before := b.Clone()
	for _, l := range []any{never{}, neverLinear{}, filtertest.Along{Z: 1e200, SigmaM: 1e-3}} {
		if _, err := filter.UpdateWithin(b, p, l, 1<<18, &w); !errors.Is(err, filter.ErrContradiction) || !reflect.DeepEqual(b, before) {
			t.Errorf("%T: %v, or the belief changed", l, err)
		}
	}
	plain := b.Clone()
	l := filtertest.Along{Z: 17, SigmaM: 5}
	e1, err1 := filter.UpdateWithin(b, p, l, 10, &w)
	e2, err2 := filter.Update(plain, p, l, &w)
	if e1 != e2 || err1 != nil || err2 != nil || !reflect.DeepEqual(b, plain) {
		t.Errorf("with a budget of 10 cells: %v %v, Update: %v %v", e1, err1, e2, err2)
	}
}

// TestSharpArc: a range of 2 m sigma to a beacon in a prior of 100 m leaves an
// arc; its moments are those of a dense polar integration, although the
// lattice began 40 m wide. The noise is widened by h²/12 ≤ 1.3 % where a cell
// holds mass alone; the arc's own moments hardly depend on it. Gaussians are
// cut and merged besides.
func TestSharpArc(t *testing.T) {
	p := plane.Open(geo.LonLat{}, 20000, 100)
	beacon := geo.Point{E: -150, N: 30}
	const z, sigma = 180, 2
	logE, mean, cov := arc(beacon, z, sigma, 100)
	for _, c := range []struct {
		what         string
		qs           []filter.Quantity
		moments, ofE float64 // tolerances
	}{
		{"masses", nil, 0.01, 0.01},
		{"Gaussians", planeWithScale, 0.02, 0.03},
	} {
		b, err := filter.Seed(p, filter.AtPoint{SigmaM: 100}, c.qs, 1<<18)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		e, err := filter.UpdateWithin(b, p, rangeTo{beacon, z, sigma}, 1<<20, &w)
		if err != nil {
			t.Fatal(err)
		}
		_, m, v := b.Moments(p, &w)
		if math.Abs(m.E-mean.E) > c.moments*math.Sqrt(cov[0]) || math.Abs(m.N-mean.N) > c.moments*math.Sqrt(cov[2]) || math.Abs(v[0]/cov[0]-1) > c.moments || math.Abs(v[2]/cov[2]-1) > c.moments || math.Abs(e-logE) > c.ofE {
			t.Errorf("%s: mean %v, covariance %v, log evidence %v; polar integration %v, %v, %v (spacing %g, %d cells)", c.what, m, v, e, mean, cov, logE, b.Lattice.SpacingM, b.Cells())
		}
	}
}

// arc integrates a range with its sigma to a beacon, in a circular prior around
// the origin, over polar coordinates: the log evidence, mean and covariance.
func arc(beacon geo.Point, z, sigma, prior float64) (logE float64, mean geo.Point, cov [3]float64) {
	var sum float64
	const dr, da = 0.05, 0.002
	for r := z - 7*sigma; r < z+7*sigma; r += dr {
		for a := -math.Pi; a < math.Pi; a += da {
			s, c := math.Sincos(a)
			x, y := beacon.E+r*s, beacon.N+r*c
			f := math.Exp(-(x*x+y*y)/(2*prior*prior)-(r-z)*(r-z)/(2*sigma*sigma)) * r * dr * da / (2 * math.Pi * prior * prior) / (sigma * math.Sqrt(2*math.Pi))
			sum += f
			mean.E += f * x
			mean.N += f * y
			cov[0] += f * x * x
			cov[1] += f * x * y
			cov[2] += f * y * y
		}
	}
	mean.E, mean.N = mean.E/sum, mean.N/sum
	cov[0] = cov[0]/sum - mean.E*mean.E
	cov[1] = cov[1]/sum - mean.E*mean.N
	cov[2] = cov[2]/sum - mean.N*mean.N
	return math.Log(sum), mean, cov
}

// TestSurplusContracts: what a coarser lattice adds to the variance and owes
// is contracted by a measurement like the variance itself, so that moments
// after it are those of the Kalman filter within 1 %.
func TestSurplusContracts(t *testing.T) {
	p := plane.Open(geo.LonLat{}, 5000, 10)
	for _, sigma := range []float64{300, 60, 20, 10} {
		b, err := filter.Seed(p, filter.AtPoint{SigmaM: 40}, nil, 1<<18)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		step := filter.NewStep(2)
		step.Q[0], step.Q[1], step.Q[2] = 8000, 3000, 8000
		filter.Predict(b, p, step, &w)
		if !filter.Adapt(b, 1<<18, &w) || b.Tiles.Surplus[2] < 20 {
			t.Fatalf("spacing %g, surplus %v: this should owe variance", b.Lattice.SpacingM, b.Tiles.Surplus)
		}
		if _, err := filter.UpdateWithin(b, p, filtertest.Along{Z: 30, SigmaM: sigma}, 1<<18, &w); err != nil {
			t.Fatal(err)
		}
		_, m, v := b.Moments(p, &w)
		s := 9600 + sigma*sigma
		want := [3]float64{9600 - 3000*3000/s, 3000 - 3000*9600/s, 9600 - 9600*9600/s}
		for i := range want {
			// Of the standard deviations' product: east-east, east-north, north-north.
			if math.Abs(v[i]-want[i]) > 0.01*math.Sqrt(want[i/2*2]*want[(i+1)/2*2]) {
				t.Errorf("sigma %g: covariance %v, Kalman %v, surplus %v", sigma, v, want, b.Tiles.Surplus)
				break
			}
		}
		if math.Abs(m.N-30*9600/s) > 0.01*math.Sqrt(want[2]) || math.Abs(m.E-30*3000/s) > 0.01*math.Sqrt(want[0]) {
			t.Errorf("sigma %g: mean %v, Kalman %v, %v", sigma, m, 30*3000/s, 30*9600/s)
		}
	}
}
