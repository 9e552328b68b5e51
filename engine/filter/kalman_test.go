package filter_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/plane"
)

// kalman is the Kalman filter over gonum's matrices: the reference.
type kalman struct {
	x *mat.VecDense
	p *mat.Dense
}

// predict is x = F x + u, P = F P Fᵀ + Q.
func (k *kalman) predict(f, q *mat.Dense, u []float64) {
	var x mat.VecDense
	x.MulVec(f, k.x)
	x.AddVec(&x, mat.NewVecDense(len(u), u))
	var fp, p mat.Dense
	fp.Mul(f, k.p)
	p.Mul(&fp, f.T())
	p.Add(&p, q)
	k.x, k.p = &x, &p
}

// update takes z = H x + v, v ~ N(0, R), and returns ln p(z).
func (k *kalman) update(z []float64, h, r *mat.Dense) float64 {
	var hp, s, inv, gain, ir, kh, kp mat.Dense
	hp.Mul(h, k.p)
	s.Mul(&hp, h.T())
	s.Add(&s, r)
	if err := inv.Inverse(&s); err != nil {
		panic(err)
	}
	gain.Mul(hp.T(), &inv)
	var res, hx, dx mat.VecDense
	hx.MulVec(h, k.x)
	res.SubVec(mat.NewVecDense(len(z), z), &hx)
	ir.Mul(&inv, &res)
	q := mat.Dot(&res, ir.ColView(0))
	dx.MulVec(&gain, &res)
	k.x.AddVec(k.x, &dx)
	kh.Mul(&gain, h)
	kp.Mul(&kh, k.p)
	k.p.Sub(k.p, &kp)
	return -0.5 * (q + math.Log(mat.Det(&s)) + float64(len(z))*math.Log(2*math.Pi))
}

// linear measures z = H x + v over all quantities, where the first Dim entries
// of x are north, or east and north, in the frame.
type linear struct {
	z, h, r []float64 // h is len(z)×k, r packed
	k       int
}

func (linear) Wants() filter.Wants { return filter.WantPosition }
func (l linear) Rows() int         { return len(l.z) }

func (l linear) Noise() filter.Noise {
	n := filter.Noise{Parts: []filter.NoisePart{{Weight: 1}}}
	copy(n.Parts[0].Cov[:], l.r)
	return n
}

func (l linear) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, mean []float64) {
	m, k, dim := len(l.z), max(len(qs), at.Dim), at.Dim
	for i := range at.North {
		for a := range m {
			g := 0.0
			for j := range k {
				var x float64
				switch {
				case j >= dim:
					x = mean[i*k+j]
				case dim == 2 && j == 0:
					x = at.East[i]
				default:
					x = at.North[i]
				}
				g += l.h[a*l.k+j] * x
				t.Row[(i*m+a)*k+j] = l.h[a*l.k+j]
			}
			t.Residual[i*m+a] = l.z[a] - g
		}
	}
}

// beliefMoments returns mean and covariance of all quantities, summed over
// the Gaussians, positions in the frame.
func beliefMoments(b *filter.Belief, space filter.Space, w *filter.Workspace) (mean []float64, cov *mat.Dense) {
	k := b.K()
	var c filter.Cloud
	b.Read(&c, space, w)
	mean, cov = make([]float64, k), mat.NewDense(k, k, nil)
	full := make([]float64, len(c.Mean))
	copy(full, c.Mean)
	total := 0.0
	for i, m := range c.Mass {
		if b.Dim == 2 {
			full[i*k], full[i*k+1] = c.East[i], c.North[i]
		} else {
			full[i*k] = c.North[i]
		}
		total += m
		for j := range k {
			mean[j] += m * full[i*k+j]
		}
	}
	for j := range k {
		mean[j] /= total
	}
	for i, m := range c.Mass {
		for a := range k {
			for d := range k {
				v := b.Cov[i*k*(k+1)/2+filter.Packed(max(a, d), min(a, d))]
				v += (full[i*k+a] - mean[a]) * (full[i*k+d] - mean[d])
				cov.Set(a, d, cov.At(a, d)+m*v/total)
			}
		}
	}
	return mean, cov
}

// TestKalmanWithNuisances runs linear-Gaussian models with nuisances through
// beliefs on lines and on a plane, at three spacings, beside the joint Kalman
// filter over all quantities: means within 1 % of their sigma, variances
// within 1 %, and the summed log evidence within 1 % of a nat a step. The
// widest cells are 0.8 of the posterior's sigma: Gaussians that are cut at
// edges, moved and merged by moments are no longer Gaussian together, and at
// 1.6 sigma the mean is off by 7 % of sigma.
func TestKalmanWithNuisances(t *testing.T) {
	p := plane.Open(geo.LonLat{}, 3000, 100)
	for _, c := range []struct {
		name  string
		space func(part float64) filter.Space
		prior filter.Prior
		qs    []filter.Quantity
		start []float64 // mean of the position
		p0    []float64 // diagonal
		h     []float64
		r     []float64
	}{
		{
			"line, odometer scale", func(part float64) filter.Space { return line(3000, 4/part) },
			onLine{500, 20},
			[]filter.Quantity{{Name: filter.Along}, {Name: filter.OdometerScale, PriorVar: 4e-4}},
			[]float64{500},
			[]float64{400, 4e-4},
			[]float64{1, 0},
			[]float64{144},
		},
		{
			"plane, heading offset and scale", func(part float64) filter.Space { return planeOfDetail(p, 4/math.Sqrt(part)) },
			filter.AtPoint{Point: geo.Point{E: 100, N: -50}, SigmaM: 10},
			[]filter.Quantity{{Name: filter.East}, {Name: filter.North}, {Name: filter.Heading, PriorVar: 1e-3}, {Name: filter.OdometerScale, PriorVar: 4e-4}},
			[]float64{100, -50},
			[]float64{100, 100, 1e-3, 4e-4},
			[]float64{1, 0.3, 0, 0, -0.2, 1, 0, 0},
			[]float64{144, 20, 225},
		},
	} {
		for _, part := range []float64{1, 1.5, 2} {
			t.Run(fmt.Sprintf("%s/part=%g", c.name, part), func(t *testing.T) {
				const seed, steps = 31, 30
				rng := rand.New(rand.NewPCG(seed, 0))
				space := c.space(part)
				b, err := filter.Seed(space, c.prior, c.qs, 1<<20)
				if err != nil {
					t.Fatal(err)
				}
				k, dim, m := len(c.qs), len(c.start), len(c.h)/len(c.qs)
				ref := kalman{mat.NewVecDense(k, nil), mat.NewDense(k, k, nil)}
				for i, v := range c.start {
					ref.x.SetVec(i, v)
				}
				for i, v := range c.p0 {
					ref.p.Set(i, i, v)
				}
				truth := make([]float64, k)
				for i := range truth {
					truth[i] = ref.x.AtVec(i) + math.Sqrt(c.p0[i])*rng.NormFloat64()
				}
				rm := mat.NewDense(m, m, nil)
				for i := range m {
					for j := range m {
						rm.Set(i, j, c.r[filter.Packed(max(i, j), min(i, j))])
					}
				}
				hm := mat.NewDense(m, k, c.h)
				var w filter.Workspace
				var logB, logK float64
				for s := range steps {
					step := filter.NewStep(k)
					fm, qm := mat.NewDense(k, k, nil), mat.NewDense(k, k, nil)
					for i := range k {
						fm.Set(i, i, 1)
					}
					set := func(i, j int, v float64) { step.SetF(i, j, v); fm.Set(i, j, v) }
					noise := func(i int, v float64) { step.Q[filter.Packed(i, i)] = v; qm.Set(i, i, v) }
					if dim == 1 {
						step.Add[0] = 13
						set(0, 1, 13)
						noise(0, 4)
						noise(1, 1e-7)
					} else {
						sin, cos := math.Sincos(0.1 * float64(s))
						step.Add[0], step.Add[1] = 13*sin, 13*cos
						set(0, 2, 13*cos) // clockwise from north
						set(1, 2, -13*sin)
						set(0, 3, 13*sin)
						set(1, 3, 13*cos)
						noise(0, 4)
						noise(1, 3)
						noise(2, 1e-6)
						noise(3, 1e-7)
					}
					filter.Predict(b, space, step, &w)
					ref.predict(fm, qm, step.Add)
					next := mat.NewVecDense(k, nil)
					next.MulVec(fm, mat.NewVecDense(k, truth))
					for i := range truth {
						truth[i] = next.AtVec(i) + step.Add[i] + math.Sqrt(step.Q[filter.Packed(i, i)])*rng.NormFloat64()
					}
					z := make([]float64, m)
					for a := range m {
						z[a] = math.Sqrt(c.r[filter.Packed(a, a)]) * rng.NormFloat64()
						for j := range k {
							z[a] += c.h[a*k+j] * truth[j]
						}
					}
					e, err := filter.Update(b, space, linear{z, c.h, c.r, k}, &w)
					if err != nil {
						t.Fatal(err)
					}
					logB += e
					logK += ref.update(z, hm, rm)
				}
				mean, cov := beliefMoments(b, space, &w)
				for i := range k {
					sigma := math.Sqrt(ref.p.At(i, i))
					if math.Abs(mean[i]-ref.x.AtVec(i)) > 0.01*sigma {
						t.Errorf("seed %d: %s is %v, Kalman %v, sigma %v", seed, c.qs[i].Name, mean[i], ref.x.AtVec(i), sigma)
					}
					for j := range i + 1 {
						if tol := 0.01 * sigma * math.Sqrt(ref.p.At(j, j)); math.Abs(cov.At(i, j)-ref.p.At(i, j)) > tol {
							t.Errorf("seed %d: covariance of %s and %s is %v, Kalman %v ± %v", seed, c.qs[i].Name, c.qs[j].Name, cov.At(i, j), ref.p.At(i, j), tol)
						}
					}
				}
				if math.Abs(logB-logK) > 0.01*steps {
					t.Errorf("seed %d: log evidence %v, Kalman %v", seed, logB, logK)
				}
				t.Logf("%d Gaussians, log evidence %.4f, Kalman %.4f", b.Cells(), logB, logK)
			})
		}
	}
}

// planeOfDetail is a plane with another lattice spacing to start with.
func planeOfDetail(p *plane.Plane, detailM float64) filter.Space {
	b := p.Bounds()
	return plane.Open(p.Frame().Origin(), b.Max.E, detailM)
}
