package filter_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/plane"
)

// planeWithScale is what a plane needs to hold Gaussians.
var planeWithScale = []filter.Quantity{{Name: filter.East}, {Name: filter.North}, {Name: filter.OdometerScale, PriorVar: 4e-4}}

// TestSpacingFollowsGaussians runs a belief of Gaussians on a plane from a
// start of 10 m through a long spread to some 300 m and back by measurements of
// 5 m, twice, and compares it with the Kalman filter: mean and covariance within
// 2 % of sigma, the log evidence within 0.03; the spacing between a quarter and
// nine tenths of the sharper axis' sigma, and never many Gaussians. With a
// fixed spacing it would hold half a million.
func TestSpacingFollowsGaussians(t *testing.T) {
	const seed, budget = 83, 20_000
	rng := rand.New(rand.NewPCG(seed, 0))
	p := plane.Open(geo.LonLat{}, 20000, 100)
	b, err := filter.Seed(p, filter.AtPoint{Point: geo.Point{E: 7, N: -3}, SigmaM: 10}, planeWithScale, budget)
	if err != nil {
		t.Fatal(err)
	}
	var w filter.Workspace
	ref := kalman{mat.NewVecDense(3, []float64{7, -3, 0}), mat.NewDense(3, 3, []float64{100, 0, 0, 0, 100, 0, 0, 0, 4e-4})}
	var logB, logK float64
	widest := 0.0
	for i := range 40 {
		step := filter.NewStep(3)
		fm, qm := mat.NewDense(3, 3, []float64{1, 0, 0, 0, 1, 0, 0, 0, 1}), mat.NewDense(3, 3, nil)
		step.Add[0], step.Add[1] = 20, 5
		for d, v := range []float64{20, 5} {
			step.SetF(d, 2, v)
			fm.Set(d, 2, v)
		}
		v := 4.0 // on the way
		if i%20 >= 10 && i%20 < 18 {
			v = 1e4 // silence
		}
		step.Q[0], step.Q[2] = v, 0.8*v
		qm.Set(0, 0, v)
		qm.Set(1, 1, 0.8*v)
		filter.Predict(b, p, step, &w)
		ref.predict(fm, qm, step.Add)
		if i%20 < 10 || i%20 >= 18 {
			z := []float64{ref.x.AtVec(0) + 5*rng.NormFloat64(), ref.x.AtVec(1) + 5*rng.NormFloat64()}
			h, r := []float64{1, 0.3, 0, -0.2, 1, 0}, []float64{25, 4, 30}
			z = []float64{z[0] + 0.3*z[1], z[1] - 0.2*z[0]}
			e, err := filter.UpdateWithin(b, p, linear{z, h, r, 3}, budget, &w)
			if err != nil {
				t.Fatal(err)
			}
			k := ref.update(z, mat.NewDense(2, 3, h), mat.NewDense(2, 2, []float64{25, 4, 4, 30}))
			logB, logK = logB+e, logK+k
			if math.Abs(e-k) > 0.03 {
				t.Errorf("seed %d, step %d: log evidence %.4f, Kalman %.4f", seed, i, e, k)
			}
		}
		for filter.Adapt(b, budget, &w) {
		}
		mean, cov := beliefMoments(b, p, &w)
		for d := range 3 {
			sigma := math.Sqrt(ref.p.At(d, d))
			if math.Abs(mean[d]-ref.x.AtVec(d)) > 0.02*sigma {
				t.Errorf("seed %d, step %d: %s is %v, Kalman %v, sigma %v", seed, i, planeWithScale[d].Name, mean[d], ref.x.AtVec(d), sigma)
			}
			for j := range d + 1 {
				if tol := 0.02 * sigma * math.Sqrt(ref.p.At(j, j)); math.Abs(cov.At(d, j)-ref.p.At(d, j)) > tol {
					t.Errorf("seed %d, step %d: covariance of %s and %s is %v, Kalman %v ± %v", seed, i, planeWithScale[d].Name, planeWithScale[j].Name, cov.At(d, j), ref.p.At(d, j), tol)
				}
			}
		}
		// The sharper axis: of the information, so correlation counts.
		det := ref.p.At(0, 0)*ref.p.At(1, 1) - ref.p.At(0, 1)*ref.p.At(1, 0)
		sharp := math.Sqrt(det / math.Max(ref.p.At(0, 0), ref.p.At(1, 1)))
		if x := b.Lattice.SpacingM / sharp; x < 0.25 || x > 0.9 {
			t.Errorf("step %d: a spacing of %.2f sigma", i, x)
		}
		if n := b.Cells(); n > 4000 {
			t.Errorf("step %d: %d Gaussians", i, n)
		}
		widest = math.Max(widest, sharp)
	}
	if widest < 200 {
		t.Errorf("the belief never got wider than %.0f m", widest)
	}
	t.Logf("log evidence %.4f, Kalman %.4f; widest %.0f m; at the end %d Gaussians, spacing %.2f m, pruned %.1e", logB, logK, widest, b.Cells(), b.Lattice.SpacingM, b.Pruned)
}

// outlying measures the position with a chance of being anywhere in 10 km.
type outlying struct {
	at    geo.Point
	sigma float64
}

func (outlying) Wants() filter.Wants { return filter.WantPosition }
func (outlying) Rows() int           { return 2 }

func (o outlying) Noise() filter.Noise {
	v := o.sigma * o.sigma
	return filter.Noise{Parts: []filter.NoisePart{{Weight: 0.98, Cov: [3]float64{v, 0, v}}}, FlatWeight: 0.02, FlatDensity: 1e-8}
}

func (o outlying) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, _ []float64) {
	k := len(qs)
	for i := range at.East {
		t.Residual[2*i], t.Residual[2*i+1] = o.at.E-at.East[i], o.at.N-at.North[i]
		t.Row[2*i*k], t.Row[(2*i+1)*k+1] = 1, 1
	}
}

// TestSharpMeasurementOfGaussians: a belief of 267 m takes a position of 5 m
// that may be an outlier, wherever in a cell of 100 m the truth lies: evidence
// within 0.05 of the closed form, the mean of what is near within 1 % of sigma
// and its variance within 5 % (a Gaussian that the outlier leaves in part is one
// Gaussian by moments), and the rest, far away, with the closed form's mass
// within a quarter.
func TestSharpMeasurementOfGaussians(t *testing.T) {
	p := plane.Open(geo.LonLat{}, 20000, 100)
	const prior, sigma = 267.0, 5.0
	for _, z := range []geo.Point{{}, {E: 50, N: 50}, {E: 30, N: -20}, {E: 150, N: 411}, {E: -333, N: 90}} {
		b, err := filter.Seed(p, filter.AtPoint{SigmaM: prior}, planeWithScale, 200_000)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		e, err := filter.UpdateWithin(b, p, outlying{z, sigma}, 200_000, &w)
		if err != nil {
			t.Fatal(err)
		}
		const v, r = prior * prior, sigma * sigma
		peak := 0.98 / (2 * math.Pi * (v + r)) * math.Exp(-0.5*(z.E*z.E+z.N*z.N)/(v+r))
		want := math.Log(peak + 0.02*1e-8)
		if math.Abs(e-want) > 0.05 {
			t.Errorf("%v: log evidence %.4f, want %.4f", z, e, want)
		}
		var c filter.Cloud
		b.Read(&c, p, &w)
		const gain = v / (v + r)
		var near, rest float64
		var mean geo.Point
		var second float64
		for i, m := range c.Mass {
			d := geo.Point{E: c.East[i], N: c.North[i]}.Sub(z)
			if d.Norm() > 8*sigma {
				rest += m
				continue
			}
			near += m
			d = geo.Point{E: c.East[i] - gain*z.E, N: c.North[i] - gain*z.N}
			mean = mean.Add(geo.Point{E: m * d.E, N: m * d.N})
			second += m * (d.E*d.E + d.N*d.N + c.VarEE[i] + c.VarNN[i])
		}
		if mean.Norm()/near > 0.01*sigma || math.Abs(second/near/(2*gain*r)-1) > 0.05 {
			t.Errorf("%v: near it a mean off by %v and a variance of %.3f; want %.3f", z, mean, second/near, 2*gain*r)
		}
		if share := 0.02 * 1e-8 / (peak + 0.02*1e-8); math.Abs(rest/share-1) > 0.25 {
			t.Errorf("%v: %.3g is left elsewhere, want %.3g", z, rest, share)
		}
		if n, h := b.Cells(), b.Lattice.SpacingM; n > 5000 || h > 0.9*sigma {
			t.Errorf("%v: %d Gaussians at a spacing of %g m", z, n, h)
		}
	}
}

// TestContradictionAfterRefining: a measurement that turns out impossible only
// when the belief has been refined for it changes no bit.
func TestContradictionAfterRefining(t *testing.T) {
	p := plane.Open(geo.LonLat{}, 20000, 100)
	b, err := filter.Seed(p, filter.AtPoint{SigmaM: 100}, planeWithScale, 1<<18)
	if err != nil {
		t.Fatal(err)
	}
	before := b.Clone()
	var w filter.Workspace
	if _, err := filter.UpdateWithin(b, p, &once{}, 1<<18, &w); !errors.Is(err, filter.ErrContradiction) || !reflect.DeepEqual(b, before) {
		t.Errorf("%v, or the belief changed", err)
	}
}

// once is sharp when asked first, and impossible from then on.
type once struct{ asked bool }

func (*once) Wants() filter.Wants { return filter.WantPosition }

func (o *once) LogLikelihood(dst []float64, at *filter.Columns) {
	for i := range dst {
		if o.asked {
			dst[i] = math.Inf(-1)
		} else {
			dst[i] -= 0.5 * (at.East[i]*at.East[i] + at.North[i]*at.North[i])
		}
	}
	o.asked = true
}

// TestWideHeading: after a turn that nobody measured, a vehicle that goes 50 m
// is on an arc or a circle: moments of the wrapped normal distribution, mean
// d·e^{-s²/2} ahead and a second moment of d² in all (Mardia & Jupp, Directional
// Statistics, 2000, §3.5.7), within half a per cent.
func TestWideHeading(t *testing.T) {
	p := plane.Open(geo.LonLat{}, 20000, 100)
	for _, s := range []float64{0.1, 0.3, 0.6, 1, 2, 6} {
		qs := []filter.Quantity{{Name: filter.East}, {Name: filter.North}, {Name: filter.Heading, Angular: true, PriorMean: 2, PriorVar: 0.01}}
		b, err := filter.Seed(p, filter.AtPoint{SigmaM: 3}, qs, 200_000)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		turn := filter.NewStep(3)
		turn.Q[filter.Packed(2, 2)] = s*s - 0.01
		if s == 0.1 {
			turn.Q[filter.Packed(2, 2)] = 0
		}
		filter.Predict(b, p, turn, &w)
		const d = 50
		ahead := filter.NewStep(3)
		ahead.Local = goAhead{d}
		filter.Predict(b, p, ahead, &w)
		for filter.Adapt(b, 200_000, &w) {
		}
		_, m, v := b.Moments(p, &w)
		sin, cos := math.Sincos(2)
		along, across := m.E*sin+m.N*cos, m.E*cos-m.N*sin
		want := d * math.Exp(-s*s/2)
		second := v[0] + v[2] + m.E*m.E + m.N*m.N - 18
		t.Logf("sigma %g: %d Gaussians at %g m, ahead %.2f of %.2f, second moment %.4f of d²", s, b.Cells(), b.Lattice.SpacingM, along, want, second/d/d)
		if math.Abs(along-want) > 0.005*d || math.Abs(across) > 0.005*d || math.Abs(second/d/d-1) > 0.005 {
			t.Errorf("sigma %g: ahead %.2f, across %.2f; want %.2f, 0; second moment %.4f of d²", s, along, across, want, second/d/d)
		}
		if b.Cells() > 12_000 {
			t.Errorf("sigma %g: %d Gaussians", s, b.Cells())
		}
	}
}

// goAhead moves along the heading, quantity 2.
type goAhead struct{ d float64 }

func (goAhead) Wants() filter.Wants { return 0 }

func (g goAhead) Local(add, f []float64, _ *filter.Columns, mean, cov []float64) {
	for i := 0; i*3 < len(mean); i++ {
		h := mean[3*i+2]
		s, c := math.Sincos(h)
		short := math.Exp(-cov[6*i+5] / 2)
		s, c = s*short, c*short
		copy(f[6*i:], []float64{1, 0, g.d * c, 0, 1, -g.d * s})
		add[2*i], add[2*i+1] = g.d*s-g.d*c*h, g.d*c+g.d*s*h // x' = F x + add
	}
}

// TestWideStepIsBounded: a step of a million metres' spread, correlated or not,
// over a fine belief makes a bounded number of pieces and keeps the moments.
func TestWideStepIsBounded(t *testing.T) {
	p := plane.Open(geo.LonLat{}, 20000, 100)
	for _, en := range []float64{0, 3e11} {
		b, err := filter.Seed(p, filter.AtPoint{SigmaM: 10}, planeWithScale, 200_000)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		step := filter.NewStep(3)
		step.Q[0], step.Q[1], step.Q[2] = 1e12, en, 4e11
		filter.Predict(b, p, step, &w)
		_, m, v := b.Moments(p, &w)
		if n := b.Cells(); n > 50_000 {
			t.Errorf("%d Gaussians at a spacing of %g", n, b.Lattice.SpacingM)
		}
		if m.Norm() > 1e-3 || math.Abs(v[0]/1e12-1) > 1e-6 || math.Abs(v[1]-en) > 1e6 || math.Abs(v[2]/4e11-1) > 1e-6 {
			t.Errorf("mean %v, covariance %v", m, v)
		}
	}
}
