package sensor_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/engine/filter"
	"leadline/engine/sensor"
)

// joint is a Kalman filter over everything at once, on gonum's matrices. Its
// model is written down here in physical terms, as rates and rows, and shares
// nothing with suites, motions and likelihoods.
type joint struct {
	x *mat.VecDense
	p *mat.Dense
}

// flow carries it through a second of dx/dt = A x + u + noise of spectral density
// q, in a thousand small steps.
func (j *joint) flow(a *mat.Dense, u, q []float64) {
	const n = 1000
	k := len(u)
	f, add, noise := mat.NewDense(k, k, nil), mat.NewVecDense(k, nil), mat.NewDense(k, k, nil)
	f.Scale(1./n, a)
	for i := range k {
		f.Set(i, i, f.At(i, i)+1)
		add.SetVec(i, u[i]/n)
		noise.Set(i, i, q[i]/n)
	}
	for range n {
		var x mat.VecDense
		var fp, p mat.Dense
		x.MulVec(f, j.x)
		x.AddVec(&x, add)
		fp.Mul(f, j.p)
		p.Mul(&fp, f.T())
		p.Add(&p, noise)
		j.x, j.p = &x, &p
	}
}

// take takes one number z = h·x + c + v and returns ln p(z).
func (j *joint) take(z, c float64, h []float64, variance float64) float64 {
	row := mat.NewVecDense(len(h), h)
	var ph, gain mat.VecDense
	ph.MulVec(j.p, row)
	s := mat.Dot(row, &ph) + variance
	r := z - c - mat.Dot(row, j.x)
	gain.ScaleVec(1/s, &ph)
	var x mat.VecDense
	x.AddScaledVec(j.x, r, &gain)
	var p mat.Dense
	p.Outer(-1/s, &ph, &ph)
	p.Add(&p, j.p)
	j.x, j.p = &x, &p
	return -0.5 * (r*r/s + math.Log(2*math.Pi*s))
}

// scalar is one number that is measured: by a sensor or by a likelihood l, and
// as the Kalman filter takes it.
type scalar struct {
	sensor         string
	m              sensor.Measurement
	l              any
	z, c, variance float64
	row            []float64
}

// besideKalman runs a belief and the joint Kalman filter beside each other.
type besideKalman struct {
	suite        *sensor.Suite
	dim          int
	space        filter.Space
	prior        filter.Prior
	pose         sensor.Pose
	start, p0, q []float64
	second       func(i int) (motions []sensor.Measurement, names []string, a *mat.Dense, u []float64)
	measured     func(i int, x []float64, rng *rand.Rand) []scalar
}

func (r *besideKalman) run(t *testing.T) {
	const seed, seconds = 31, 30
	if err := r.suite.Validate(); err != nil {
		t.Fatal(err)
	}
	suite := r.suite.For(r.dim)
	qs := suite.Quantities(r.dim)
	k := len(qs)
	if k != filter.MaxK {
		t.Fatalf("%d quantities", k)
	}
	rng := rand.New(rand.NewPCG(seed, 0))
	b, err := filter.Seed(r.space, r.prior, qs, 1<<20)
	if err != nil {
		t.Fatal(err)
	}
	ref := joint{mat.NewVecDense(k, append([]float64(nil), r.start...)), mat.NewDense(k, k, nil)}
	truth := joint{mat.NewVecDense(k, nil), mat.NewDense(k, k, nil)}
	for i, v := range r.p0 {
		ref.p.Set(i, i, v)
		truth.x.SetVec(i, r.start[i]+math.Sqrt(v)*rng.NormFloat64())
	}
	var w filter.Workspace
	var logB, logK float64
	m := &sensor.Motion{Suite: suite}
	count := 0
	for i := range seconds {
		from, to := sensor.Time(i)*1e9, sensor.Time(i+1)*1e9
		motions, names, a, u := r.second(i)
		m.Reset(from, to)
		for j, v := range motions {
			switch d := v.(type) {
			case sensor.Travel:
				d.Since = from
				v = d
			case sensor.Turn:
				d.Since = from
				v = d
			case sensor.Displacement:
				d.Since = from
				v = d
			}
			m.Add(sensor.Event{Time: to, Sensor: names[j], Measurement: v}, from)
		}
		step, err := m.Step(qs, r.dim, r.space.Frame(), r.pose)
		if err != nil {
			t.Fatal(err)
		}
		filter.Predict(b, r.space, step, &w)
		ref.flow(a, u, r.q)
		truth.p.Zero()
		truth.flow(a, u, r.q)
		var chol mat.Cholesky
		sym := mat.NewSymDense(k, nil)
		for x := range k {
			for y := range k {
				sym.SetSym(x, y, truth.p.At(x, y))
			}
		}
		if !chol.Factorize(sym) {
			t.Fatal("the motion's covariance is not positive definite")
		}
		var l mat.TriDense
		chol.LTo(&l)
		for x := range k {
			n := rng.NormFloat64()
			for y := x; y < k; y++ {
				truth.x.SetVec(y, truth.x.AtVec(y)+l.At(y, x)*n)
			}
		}
		for _, s := range r.measured(i, truth.x.RawVector().Data, rng) {
			count++
			if s.l == nil {
				ctx := sensor.Context{Suite: suite, Frame: r.space.Frame(), Dim: r.dim, Quantities: qs, CellM: 2, SincePreviousS: 1, TravelledM: 13, Pose: r.pose}
				ls, err := sensor.Likelihoods(sensor.Event{Time: to, Sensor: s.sensor, Measurement: s.m}, ctx)
				if err != nil {
					t.Fatal(err)
				}
				s.l = ls[0]
			}
			e, err := filter.UpdateWithin(b, r.space, s.l, 1<<20, &w)
			if err != nil {
				t.Fatal(err)
			}
			logB += e
			logK += ref.take(s.z, s.c, s.row, s.variance)
		}
		for r.dim == 2 && filter.Adapt(b, 1<<20, &w) {
		}
	}
	mean, cov := allMoments(b, r.space, &w)
	for i, q := range qs {
		sigma := math.Sqrt(ref.p.At(i, i))
		t.Logf("%s: %.5g ± %.3g, Kalman %.5g ± %.3g, truth %.5g", q.Name, mean[i], math.Sqrt(cov.At(i, i)), ref.x.AtVec(i), sigma, truth.x.AtVec(i))
		if math.Abs(mean[i]-ref.x.AtVec(i)) > 0.01*sigma {
			t.Errorf("seed %d: %s is %v, Kalman %v, sigma %v", seed, q.Name, mean[i], ref.x.AtVec(i), sigma)
		}
		for j := range i + 1 {
			if tol := 0.01 * sigma * math.Sqrt(ref.p.At(j, j)); math.Abs(cov.At(i, j)-ref.p.At(i, j)) > tol {
				t.Errorf("seed %d: covariance of %s and %s is %v, Kalman %v ± %v", seed, q.Name, qs[j].Name, cov.At(i, j), ref.p.At(i, j), tol)
			}
		}
	}
	if math.Abs(logB-logK) > 0.01*float64(count) {
		t.Errorf("seed %d: log evidence %v, Kalman %v", seed, logB, logK)
	}
	t.Logf("%d Gaussians at the end, log evidence %.4f, Kalman %.4f", b.Cells(), logB, logK)
}

// allMoments are mean and covariance over all quantities, positions in the frame.
func allMoments(b *filter.Belief, space filter.Space, w *filter.Workspace) ([]float64, *mat.Dense) {
	k := b.K()
	var c filter.Cloud
	b.Read(&c, space, w)
	full := append([]float64(nil), c.Mean...)
	mean, cov := make([]float64, k), mat.NewDense(k, k, nil)
	for i, m := range c.Mass {
		if b.Dim == 2 {
			full[i*k], full[i*k+1] = c.East[i], c.North[i]
		} else {
			full[i*k] = c.AlongM[i]
		}
		for j := range k {
			mean[j] += m * full[i*k+j]
		}
	}
	p := k * (k + 1) / 2
	for i, m := range c.Mass {
		for x := range k {
			for y := range k {
				v := b.Cov[i*p+filter.Packed(max(x, y), min(x, y))] + (full[i*k+x]-mean[x])*(full[i*k+y]-mean[y])
				cov.Set(x, y, cov.At(x, y)+m*v)
			}
		}
	}
	return mean, cov
}
