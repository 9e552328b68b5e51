package filter_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/plane"
)

// foreseen is a measurement of one or two sums of the quantities, with any
// noise.
type foreseen struct {
	z     []float64
	row   []float64 // len(z) × k
	noise filter.Noise
	angle bool
}

func (foreseen) Wants() filter.Wants   { return filter.WantPosition }
func (l foreseen) Rows() int           { return len(l.z) }
func (l foreseen) Noise() filter.Noise { return l.noise }

func (l foreseen) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, mean []float64) {
	m := len(l.z)
	k := len(l.row) / m
	for i := range at.East {
		for a := range m {
			row := l.row[a*k : a*k+k]
			copy(t.Row[(i*m+a)*k:], row)
			r := l.z[a] - row[0]*at.East[i] - row[1]*at.North[i]
			for j := 2; j < k; j++ {
				r -= row[j] * mean[i*k+j]
			}
			if l.angle {
				r = geo.WrapPi(r)
			}
			t.Residual[i*m+a] = r
		}
	}
}

// foreseenAngle is one on a circle.
type foreseenAngle struct{ foreseen }

func (foreseenAngle) Circular() {}

func mixed(sigma float64) filter.Noise {
	v := sigma * sigma
	return filter.Noise{Parts: []filter.NoisePart{{Weight: 0.9, Cov: [3]float64{v, 0.3 * v, 2 * v}}, {Weight: 0.1, Cov: [3]float64{16 * v, 0, 9 * v}}}}
}

// evidenceAt is exp of the evidence of a measurement, with the belief as it was.
func evidenceAt(t *testing.T, b *filter.Belief, p *plane.Plane, l any) float64 {
	t.Helper()
	var w filter.Workspace
	e, err := filter.Update(b.Clone(), p, l, &w)
	if err != nil {
		t.Fatal(err)
	}
	return math.Exp(e)
}

// TestPredictiveIsTheIntegralOfEvidence compares the transform with the
// evidence that the same belief has for all smaller measurements, summed up: the
// evidence of Update is the density that a measurement was expected with. On
// Gaussians and on a lattice, in one component, in two, and on a circle.
func TestPredictiveIsTheIntegralOfEvidence(t *testing.T) {
	p := plane.Open(geo.LonLat{}, 20000, 100)
	var w filter.Workspace
	gaussians, err := filter.Seed(p, filter.AtPoint{Point: geo.Point{E: 7, N: -3}, SigmaM: 60}, planeWithScale, 20_000)
	if err != nil {
		t.Fatal(err)
	}
	lattice, err := filter.Seed(p, filter.AtPoint{Point: geo.Point{E: 7, N: -3}, SigmaM: 60}, nil, 20_000)
	if err != nil {
		t.Fatal(err)
	}
	// Two places, unevenly: weighed by a measurement of the square of east.
	for _, b := range []*filter.Belief{gaussians, lattice} {
		if _, err := filter.Update(b, p, twoPlaces{}, &w); err != nil {
			t.Fatal(err)
		}
	}
	for _, c := range []struct {
		name string
		b    *filter.Belief
		row  []float64
	}{
		{"Gaussians", gaussians, []float64{0.8, 0.5, 200}},
		{"lattice", lattice, []float64{0.8, 0.5}},
	} {
		for _, z := range []float64{-120, 4, 55} {
			l := foreseen{z: []float64{z}, row: c.row, noise: mixed(9)}
			got := foretold(t, c.b, p, l)
			want, all := 0.0, 0.0
			const h = 3.0
			for x := -450 + math.Mod(z, h); x < 450; x += h {
				l.z = []float64{x + h/2} // midpoints; smooth over 9 m
				e := h * evidenceAt(t, c.b, p, l)
				all += e
				if x+h/2 < z {
					want += e
				}
			}
			if math.Abs(all-1) > 1e-6 {
				t.Errorf("%s: the evidence sums to %v", c.name, all)
			}
			if got.Rows != 1 || math.Abs(got.Below[0]-want) > 2e-4 || math.Abs(got.Below[0]+got.Above[0]-1) > 1e-12 {
				t.Errorf("%s, z = %v: %+v, the evidence below is %v", c.name, z, got, want)
			}
		}
		k := len(c.row)
		rows := make([]float64, 2*k)
		copy(rows, c.row)
		rows[k], rows[k+1] = -0.4, 1
		for _, z := range [][]float64{{-60, 20}, {80, 8}} {
			l := foreseen{z: z, row: rows, noise: mixed(20)}
			got := foretold(t, c.b, p, l)
			want, all := 0.0, 0.0
			const h = 4.0
			for y := -500 + math.Mod(z[1], h); y < 500; y += h {
				l.z = []float64{z[0], y + h/2}
				e := evidenceAt(t, c.b, p, l)
				all += e
				if y+h/2 < z[1] {
					want += e
				}
			}
			if got.Rows != 2 || math.Abs(got.Below[1]-want/all) > 2e-4 {
				t.Errorf("%s, z = %v: %+v, the evidence below, given the first, is %v", c.name, z, got, want/all)
			}
		}
	}
}

// foreseenTurned has its two rows along axes that turn from place to place.
type foreseenTurned struct{ foreseen }

func (foreseenTurned) Axes(at *filter.Columns, i int) (first, second geo.Point) {
	sin, cos := math.Sincos(at.East[i])
	return geo.Point{E: cos, N: sin}, geo.Point{E: sin, N: -cos} // a reflection, too
}

func (l foreseenTurned) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, mean []float64) {
	l.foreseen.Linearize(t, at, qs, mean)
	k := len(l.row) / 2
	for i := range at.East {
		a, b := l.Axes(at, i)
		turn := func(xs []float64, second int) {
			e, n := xs[0], xs[second]
			xs[0], xs[second] = a.E*e+a.N*n, b.E*e+b.N*n
		}
		turn(t.Residual[2*i:], 1)
		for j := range k {
			turn(t.Row[2*i*k+j:], k)
		}
	}
}

// TestPredictiveInTurnedAxes: the axes that a place uses change nothing.
func TestPredictiveInTurnedAxes(t *testing.T) {
	p := plane.Open(geo.LonLat{}, 20000, 100)
	for _, qs := range [][]filter.Quantity{nil, planeWithScale} {
		b, err := filter.Seed(p, filter.AtPoint{SigmaM: 40}, qs, 2000)
		if err != nil {
			t.Fatal(err)
		}
		k := max(len(qs), 2)
		l := foreseen{z: []float64{30, -50}, row: make([]float64, 2*k), noise: filter.Gaussian(20)}
		l.row[0], l.row[1], l.row[k], l.row[k+1] = 1, 0.5, -0.2, 1
		l.noise.Parts[0].Weight, l.noise.FlatWeight, l.noise.FlatDensity = 0.9, 0.1, 1e-5
		want, got := foretold(t, b, p, l), foretold(t, b, p, foreseenTurned{l})
		for row := range 2 {
			if got.Rows != 2 || math.Abs(got.Below[row]-want.Below[row]) > 1e-9 || math.Abs(got.Above[row]-want.Above[row]) > 1e-9 {
				t.Errorf("%d quantities: turned %+v, straight %+v", len(qs), got, want)
			}
		}
	}
}

// twoPlaces leaves of a belief what is near east 60 and, a quarter as much,
// east -40.
type twoPlaces struct{}

func (twoPlaces) Wants() filter.Wants { return filter.WantPosition }

func (twoPlaces) LogLikelihood(dst []float64, at *filter.Columns) {
	for i, e := range at.East {
		a, b := (e-60)/15, (e+40)/10
		dst[i] += math.Log(math.Exp(-a*a/2) + 0.25*math.Exp(-b*b/2))
	}
}

func foretold(t *testing.T, b *filter.Belief, p filter.Space, l any) filter.Predictive {
	t.Helper()
	var w filter.Workspace
	var got filter.Predictive
	plain := b.Clone()
	wantE, err := filter.Update(plain, p, l, &w)
	if err != nil {
		t.Fatal(err)
	}
	w.Foretell(&got)
	asked := b.Clone()
	e, err := filter.Update(asked, p, l, &w)
	if err != nil {
		t.Fatal(err)
	}
	if e != wantE || beliefSum(plain) != beliefSum(asked) {
		t.Error("the update is another one when it is foretold")
	}
	kept := got
	if _, err := filter.Update(asked, p, l, &w); err != nil || got != kept {
		t.Errorf("it was foretold twice (%v)", err)
	}
	return got
}

func beliefSum(b *filter.Belief) (sum float64) {
	for _, xs := range [][]float64{b.Mass, b.Mean, b.Cov, b.Tiles.Mass} {
		for i, x := range xs {
			sum += x * float64(i%101+1)
		}
	}
	return sum
}

// TestPredictiveOnACircle takes a heading that is known to 40°, so that the
// wrapped tails count, about directions near the cut of ±180°: the transform is
// the wrapped normal's from opposite its mean, by a sum over many turns.
func TestPredictiveOnACircle(t *testing.T) {
	p := plane.Open(geo.LonLat{}, 20000, 100)
	for _, mean := range []float64{0, 3, -3.1} {
		qs := []filter.Quantity{{Name: filter.East}, {Name: filter.North}, {Name: filter.Heading, Angular: true, PriorMean: mean, PriorVar: 0.49}}
		b, err := filter.Seed(p, filter.AtPoint{SigmaM: 10}, qs, 2000)
		if err != nil {
			t.Fatal(err)
		}
		const noise, flat = 0.2, 0.05
		s := math.Sqrt(0.49 + noise*noise)
		for _, off := range []float64{-3, -1, 0, 0.4, 2.5} {
			n := filter.Gaussian(noise)
			n.Parts[0].Weight, n.FlatWeight, n.FlatDensity = 1-flat, flat, 1/(2*math.Pi)
			l := foreseenAngle{foreseen{z: []float64{geo.WrapPi(mean + off)}, row: []float64{0, 0, 1}, noise: n, angle: true}}
			got := foretold(t, b, p, l)
			want := 0.0
			for turn := -9.0; turn <= 9; turn++ {
				phi := func(x float64) float64 { return 0.5 * math.Erfc(-x/s/math.Sqrt2) }
				want += (1 - flat) * (phi(off+2*math.Pi*turn) - phi(-math.Pi+2*math.Pi*turn))
			}
			want += flat * (off + math.Pi) / (2 * math.Pi)
			if got.Rows != 1 || math.Abs(got.Below[0]-want) > 1e-6 || math.Abs(got.Above[0]-(1-want)) > 1e-6 {
				t.Errorf("%v from a mean of %v: %+v, want %v", off, mean, got, want)
			}
		}
	}
}

// TestPredictiveIsUniform runs a matched world: a vehicle walks on a plane and
// is measured along a changing direction, with outliers; the transforms fill 20
// classes evenly and their scores have mean 0, variance 1 and no correlation
// from one to the next. Bounds of 4 standard errors, and chi-squared with 19
// degrees of freedom at 1e-4 (50.8, by gonum).
func TestPredictiveIsUniform(t *testing.T) {
	const seed, budget = 29, 2000
	rng := rand.New(rand.NewPCG(seed, 0))
	p := plane.Open(geo.LonLat{}, 200_000, 100)
	for _, qs := range [][]filter.Quantity{nil, planeWithScale} {
		n := 2000
		if len(qs) > 0 {
			n = 100 // a hundred times dearer
		}
		b, err := filter.Seed(p, filter.AtPoint{SigmaM: 30}, qs, budget)
		if err != nil {
			t.Fatal(err)
		}
		k := max(len(qs), 2)
		var w filter.Workspace
		at := [2]float64{30 * rng.NormFloat64(), 30 * rng.NormFloat64()}
		scale := 0.0
		if len(qs) > 2 {
			scale = math.Sqrt(qs[2].PriorVar) * rng.NormFloat64()
		}
		var classes [20]float64
		var sum, squares, product, last float64
		for i := range n {
			step := filter.NewStep(k)
			step.Add[0], step.Add[1] = 3*math.Sin(float64(i)/50), 3*math.Cos(float64(i)/50)
			step.Q[0], step.Q[2] = 16, 16
			for d := range 2 {
				if k > 2 {
					step.SetF(d, 2, step.Add[d])
				}
				at[d] += step.Add[d]*(1+scale) + 4*rng.NormFloat64()
			}
			filter.Predict(b, p, step, &w)
			sin, cos := math.Sincos(float64(i))
			noise := mixed(10)
			noise.Parts[0].Weight = 0.87
			noise.FlatWeight, noise.FlatDensity = 0.03, 1e-3
			z := at[0]*sin + at[1]*cos
			switch u := rng.Float64(); {
			case u < 0.87:
				z += 10 * rng.NormFloat64()
			case u < 0.97:
				z += 40 * rng.NormFloat64()
			default:
				z += 1000 * (rng.Float64() - 0.5)
			}
			row := make([]float64, k)
			row[0], row[1] = sin, cos
			var f filter.Predictive
			w.Foretell(&f)
			if _, err := filter.UpdateWithin(b, p, foreseen{z: []float64{z}, row: row, noise: noise}, budget, &w); err != nil {
				t.Fatal(err)
			}
			filter.Adapt(b, budget, &w)
			classes[min(int(20*f.Below[0]), 19)]++
			s := f.Score(0)
			sum, squares, product, last = sum+s, squares+s*s, product+s*last, s
		}
		chi2 := 0.0
		for _, c := range classes {
			want := float64(n) / 20
			chi2 += (c - want) * (c - want) / want
		}
		se := 4 / math.Sqrt(float64(n))
		mean, variance, corr := sum/float64(n), squares/float64(n), product/float64(n)
		t.Logf("seed %d, K = %d: chi² %.1f, mean %.3f, variance %.3f, correlation %.3f", seed, len(qs), chi2, mean, variance, corr)
		if chi2 > 50.8 || math.Abs(mean) > se || math.Abs(variance-1) > se*math.Sqrt2 || math.Abs(corr) > se {
			t.Errorf("seed %d, K = %d: chi² %.1f, mean %.3f, variance %.3f, correlation %.3f", seed, len(qs), chi2, mean, variance, corr)
		}
	}
}
