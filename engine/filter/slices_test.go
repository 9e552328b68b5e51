package filter_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/plane"
)

// velocityAxes are the axes of a plane with velocities, of which a normal prior of
// sigma m/s is known about mean.
func velocityAxes(mean geo.Point, sigma float64) []filter.Quantity {
	return []filter.Quantity{
		{Name: filter.East},
		{Name: filter.North},
		{Name: filter.VelocityEast, PriorMean: mean.E, PriorVar: sigma * sigma, Axis: true},
		{Name: filter.VelocityNorth, PriorMean: mean.N, PriorVar: sigma * sigma, Axis: true},
	}
}

// coasting is the step of a velocity that white acceleration of density q (m²/s³)
// changes, over dt.
func coasting(dt, q float64) filter.Step {
	s := filter.NewStep(4)
	for a := range 2 {
		s.SetF(a, 2+a, dt)
		s.Q[filter.Packed(a, a)] = q * dt * dt * dt / 3
		s.Q[filter.Packed(2+a, a)] = q * dt * dt / 2
		s.Q[filter.Packed(2+a, 2+a)] = q * dt
	}
	return s
}

// place measures both coordinates.
type place struct {
	e, n, sigmaM float64
}

func (place) Wants() filter.Wants   { return filter.WantPosition }
func (place) Rows() int             { return 2 }
func (p place) Noise() filter.Noise { return filter.Gaussian(p.sigmaM) }
func (p place) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, _ []float64) {
	k := max(len(qs), 2)
	for i := range at.East {
		t.Residual[2*i], t.Residual[2*i+1] = p.e-at.East[i], p.n-at.North[i]
		t.Row[2*i*k], t.Row[(2*i+1)*k+1] = 1, 1
	}
}

func dense(step filter.Step) (f, q *mat.Dense) {
	f, q = mat.NewDense(4, 4, nil), mat.NewDense(4, 4, nil)
	for i := range 4 {
		for j := range 4 {
			if f.Set(i, j, 0); i == j {
				f.Set(i, j, 1)
			}
			if step.F != nil {
				f.Set(i, j, step.F[i*4+j])
			}
			q.Set(i, j, step.Q[filter.Packed(max(i, j), min(i, j))])
		}
	}
	return f, q
}

// TestKalmanWithVelocityAxes: positions measured now and then, steps of several
// lengths, a displacement between with noise that is correlated, a velocity measured:
// mean and covariance of all four are the Kalman filter's within 1 % of sigma, and so
// is the evidence, while the spacing of every axis changes on the way.
func TestKalmanWithVelocityAxes(t *testing.T) {
	const seed, maxCells = 3, 1 << 21
	rng := rand.New(rand.NewPCG(seed, 0))
	p := plane.Open(geo.LonLat{}, 5000, 1000)
	b, err := filter.Seed(p, filter.AtPoint{SigmaM: 60}, velocityAxes(geo.Point{E: 5, N: -3}, 8), maxCells)
	if err != nil {
		t.Fatal(err)
	}
	k := kalman{mat.NewVecDense(4, []float64{0, 0, 5, -3}), mat.NewDense(4, 4, []float64{3600, 0, 0, 0, 0, 3600, 0, 0, 0, 0, 64, 0, 0, 0, 0, 64})}
	h, r := mat.NewDense(2, 4, []float64{1, 0, 0, 0, 0, 1, 0, 0}), mat.NewDense(2, 2, []float64{400, 0, 0, 400})
	x := [4]float64{20, -30, 7, 4}
	var w filter.Workspace
	first := b.Slices
	steps := 12
	if longTests() {
		steps = 60
	}
	for i := range steps {
		dt := []float64{1, 2, 0.5, 0.1, 4}[i%5]
		step := coasting(dt, 0.5)
		if i%7 == 3 {
			step.Add[0], step.Add[1] = 11, -4
			step.Q[filter.Packed(1, 0)] = 3
			step.Q[filter.Packed(0, 0)] += 9
			step.Q[filter.Packed(1, 1)] += 4
		}
		filter.Predict(b, p, step, &w)
		f, q := dense(step)
		k.predict(f, q, step.Add)
		for a := range 2 {
			x[a] += dt*x[2+a] + step.Add[a]
			x[2+a] += math.Sqrt(0.5*dt) * rng.NormFloat64()
		}
		compareState(t, "predicted", i, b, p, &w, &k)
		weigh := func(l any, z []float64, h, r *mat.Dense) {
			got, err := filter.UpdateWithin(b, p, l, maxCells, &w)
			if err != nil {
				t.Fatal(err)
			}
			if want := k.update(z, h, r); math.Abs(got-want) > 0.01 {
				t.Errorf("seed %d, step %d: evidence %.4f, Kalman %.4f", seed, i, got, want)
			}
			compareState(t, "weighed", i, b, p, &w, &k)
		}
		if i%3 != 0 {
			z := []float64{x[0] + 20*rng.NormFloat64(), x[1] + 20*rng.NormFloat64()}
			weigh(place{z[0], z[1], 20}, z, h, r)
		}
		if i%8 == 5 {
			z := []float64{x[2] + 2*rng.NormFloat64(), x[3] + 2*rng.NormFloat64()}
			weigh(going{z[0], z[1], 2}, z, mat.NewDense(2, 4, []float64{0, 0, 1, 0, 0, 0, 0, 1}), mat.NewDense(2, 2, []float64{4, 0, 0, 4}))
		}
		filter.Adapt(b, maxCells, &w)
		compareState(t, "adapted", i, b, p, &w, &k)
	}
	if s := &b.Slices; s.SpacingM[0] > first.SpacingM[0]/4 || s.SpacingMPS[0] > first.SpacingMPS[0]/4 {
		t.Errorf("spacings went from %v m, %v m/s to %v, %v: the test does not see them change", first.SpacingM, first.SpacingMPS, s.SpacingM, s.SpacingMPS)
	}
	if b.Pruned > 1e-8 {
		t.Errorf("pruned %v", b.Pruned)
	}
}

func longTests() bool { return os.Getenv("LEADLINE_LONG") == "1" }

// going measures the velocity.
type going struct{ e, n, sigmaMPS float64 }

func (g going) LogVelocity(e, n float64, least [2]float64) float64 {
	log := 0.0
	for a, d := range [2]float64{g.e - e, g.n - n} {
		v := math.Max(g.sigmaMPS*g.sigmaMPS, least[a])
		log -= 0.5 * (math.Log(2*math.Pi*v) + d*d/v)
	}
	return log
}

// TestVelocityAxesAtAnyRate: what five seconds do to mean and covariance is what the
// model says, in one step and in five hundred, for cells of any size.
func TestVelocityAxesAtAnyRate(t *testing.T) {
	const q = 0.3
	for _, detail := range []float64{5, 20} {
		for _, hz := range []int{1, 10, 100} {
			p := plane.Open(geo.LonLat{}, 5000, detail)
			b, err := filter.Seed(p, filter.AtPoint{SigmaM: 30}, velocityAxes(geo.Point{E: 5, N: -3}, 4), 1<<20)
			if err != nil {
				t.Fatal(err)
			}
			var w filter.Workspace
			k := kalman{mat.NewVecDense(4, nil), mat.NewDense(4, 4, nil)}
			start, _ := b.State(p, &w)
			for d := range 4 {
				k.x.SetVec(d, start.Mean[d])
				for e := range 4 {
					k.p.Set(d, e, start.Cov[filter.Packed(max(d, e), min(d, e))])
				}
			}
			for range 5 * hz {
				filter.Predict(b, p, coasting(1/float64(hz), q), &w)
			}
			f, noise := dense(coasting(5, q))
			k.predict(f, noise, make([]float64, 4))
			m, _ := b.State(p, &w)
			for d := range 4 {
				sigma := math.Sqrt(k.p.At(d, d))
				if math.Abs(m.Mean[d]-k.x.AtVec(d)) > 1e-6*sigma {
					t.Errorf("%d Hz, detail %v m: mean of %d is %v, want %v", hz, detail, d, m.Mean[d], k.x.AtVec(d))
				}
				for e := range d + 1 {
					if off := m.Cov[filter.Packed(d, e)] - k.p.At(d, e); math.Abs(off) > 1e-6*sigma*math.Sqrt(k.p.At(e, e)) {
						t.Errorf("%d Hz, detail %v m: covariance of %d and %d is %v, want %v", hz, detail, d, e, m.Cov[filter.Packed(d, e)], k.p.At(d, e))
					}
				}
			}
		}
	}
}

// downs are heights that change both ways.
type downs struct{ cliffs }

func (downs) at(e, n float64) (height, slopeE, slopeN float64) {
	return 30*math.Sin(e/90) + 20*math.Cos((n+0.4*e)/70), 30./90*math.Cos(e/90) - 20*0.4/70*math.Sin((n+0.4*e)/70), -20. / 70 * math.Sin((n+0.4*e)/70)
}

func (d downs) Sample(dst geo.Heights, east, north []float64) {
	for i, e := range east {
		h, sE, sN := d.at(e, north[i])
		dst.HeightM[i] = h
		if dst.SlopeE != nil {
			dst.SlopeE[i], dst.SlopeN[i] = sE, sN
		}
		if dst.VarianceM2 != nil {
			dst.VarianceM2[i] = 0
		}
	}
}

// TestVelocityAxesOverHeights: with a velocity that is known, a plane with velocity
// axes over a field of heights, by range and by bearing is a plane without.
func TestVelocityAxesOverHeights(t *testing.T) {
	p := plane.Over(downs{}, "downs", 20)
	prior := filter.AtPoint{Point: geo.Point{E: 120, N: -40}, SigmaM: 60}
	flat, err := filter.Seed(p, prior, nil, 1<<18)
	if err != nil {
		t.Fatal(err)
	}
	b, err := filter.Seed(p, prior, velocityAxes(geo.Point{E: 3, N: 2}, 0.01), 1<<20)
	if err != nil {
		t.Fatal(err)
	}
	var w, w2 filter.Workspace
	for i := range 6 {
		step := filter.NewStep(2)
		step.Add[0], step.Add[1] = 30, 20
		step.Q[0], step.Q[2] = 25, 25
		filter.Predict(flat, p, step, &w)
		same := coasting(10, 0)
		same.Q[filter.Packed(0, 0)], same.Q[filter.Packed(1, 1)] = 25, 25
		filter.Predict(b, p, same, &w2)
		z, _, _ := downs{}.at(150+30*float64(i), -30+20*float64(i))
		l := ground{z, 4}
		e1, err1 := filter.UpdateWithin(flat, p, l, 1<<18, &w)
		e2, err2 := filter.UpdateWithin(b, p, l, 1<<20, &w2)
		if err1 != nil || err2 != nil || math.Abs(e1-e2) > 0.02 {
			t.Errorf("%d: evidence %v and %v, %v %v", i, e1, e2, err1, err2)
		}
		filter.Adapt(flat, 1<<18, &w)
		filter.Adapt(b, 1<<20, &w2)
		_, m1, c1 := flat.Moments(p, &w)
		_, m2, c2 := b.Moments(p, &w2)
		if d := m2.Sub(m1); d.Norm() > 0.02*math.Sqrt(c1[0]+c1[2]) || math.Abs(c2[0]+c2[2]-c1[0]-c1[2]) > 0.03*(c1[0]+c1[2]) {
			t.Errorf("%d: mean %v and covariance %v, without velocities %v and %v", i, m2, c2, m1, c1)
		}
	}
}

// TestContradictionWithVelocityAxes: what is impossible everywhere changes no bit.
func TestContradictionWithVelocityAxes(t *testing.T) {
	p := plane.Open(geo.LonLat{}, 5000, 50)
	b, err := filter.Seed(p, filter.AtPoint{SigmaM: 60}, velocityAxes(geo.Point{}, 3), 1<<17)
	if err != nil {
		t.Fatal(err)
	}
	var w filter.Workspace
	filter.Predict(b, p, coasting(1, 0.5), &w)
	before := b.Clone()
	for _, l := range []any{nowhere{}, place{4e4, 0, 1}} {
		if _, err := filter.UpdateWithin(b, p, l, 1<<17, &w); !errors.Is(err, filter.ErrContradiction) {
			t.Errorf("%T: %v", l, err)
		}
		if _, err := filter.Update(b, p, l, &w); !errors.Is(err, filter.ErrContradiction) {
			t.Errorf("%T: %v", l, err)
		}
	}
	if !slices.Equal(b.Slices.Mass, before.Slices.Mass) || !slices.Equal(b.Slices.Rows, before.Slices.Rows) || b.Slices.Scale != before.Slices.Scale {
		t.Error("the belief has changed")
	}
}

// nowhere is impossible everywhere.
type nowhere struct{}

func (nowhere) Wants() filter.Wants { return filter.WantPosition }
func (nowhere) LogLikelihood(dst []float64, _ *filter.Columns) {
	for i := range dst {
		dst[i] = math.Inf(-1)
	}
}

func compareState(t *testing.T, what string, i int, b *filter.Belief, p *plane.Plane, w *filter.Workspace, k *kalman) {
	t.Helper()
	m, ok := b.State(p, w)
	if !ok || math.Abs(m.Mass-1) > 1e-9 {
		t.Fatalf("%s %d: mass %v, %v", what, i, m.Mass, ok)
	}
	for d := range 4 {
		sigma := math.Sqrt(k.p.At(d, d))
		if off := (m.Mean[d] - k.x.AtVec(d)) / sigma; math.Abs(off) > 0.01 {
			t.Errorf("%s %d: mean of %d is %.4f of a sigma off", what, i, d, off)
		}
		for e := range d + 1 {
			scale := sigma * math.Sqrt(k.p.At(e, e))
			if off := (m.Cov[filter.Packed(d, e)] - k.p.At(d, e)) / scale; math.Abs(off) > 0.02 {
				t.Errorf("%s %d: covariance of %d and %d is %.4f off", what, i, d, e, off)
			}
		}
	}
}
