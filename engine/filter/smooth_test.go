package filter_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/plane"
)

// smoothed runs the Rauch-Tung-Striebel smoother over gonum's matrices: filtered
// are the moments after each step's measurement, predicted those before it.
func smoothed(filtered, predicted []kalman, fs []*mat.Dense) []kalman {
	out := make([]kalman, len(filtered))
	last := len(filtered) - 1
	out[last] = filtered[last]
	for s := last - 1; s >= 0; s-- {
		var pf, inv, g, d, gd, dp, gdg, p mat.Dense
		pf.Mul(filtered[s].p, fs[s+1].T())
		if err := inv.Inverse(predicted[s+1].p); err != nil {
			panic(err)
		}
		g.Mul(&pf, &inv)
		d.Sub(out[s+1].x, predicted[s+1].x)
		gd.Mul(&g, &d)
		x := mat.NewVecDense(filtered[s].x.Len(), nil)
		x.AddVec(filtered[s].x, gd.ColView(0))
		dp.Sub(out[s+1].p, predicted[s+1].p)
		gdg.Mul(&g, &dp)
		p.Mul(&gdg, g.T())
		p.Add(&p, filtered[s].p)
		out[s] = kalman{x, &p}
	}
	return out
}

func (k kalman) clone() kalman { return kalman{mat.VecDenseCopyOf(k.x), mat.DenseCopyOf(k.p)} }

// TestSmoothAgainstKalman runs linear-Gaussian models backward, over lines and
// planes, with nuisances and without, at several rates, beside the smoother of
// Rauch, Tung and Striebel over the whole, at every time: on lines, means within
// 1 % of its sigma and variances within 2 %; on planes, where cells are up to
// 0.8 of a sigma, 2 % and 3 %.
func TestSmoothAgainstKalman(t *testing.T) {
	open := plane.Open(geo.LonLat{}, 3000, 100)
	for _, c := range []struct {
		name  string
		space filter.Space
		prior filter.Prior
		qs    []filter.Quantity
		start []float64
		p0    []float64
		h     []float64 // of the measurement, after each second
		r     []float64
	}{
		{"line", line(3000, 1), onLine{500, 6}, along, []float64{500}, []float64{36}, []float64{1}, []float64{25}},
		{
			"line with scale", line(3000, 1),
			onLine{500, 6},
			[]filter.Quantity{{Name: filter.Along}, {Name: filter.OdometerScale, PriorVar: 4e-4}},
			[]float64{500},
			[]float64{36, 4e-4},
			[]float64{1, 0},
			[]float64{25},
		},
		{
			"plane with heading", planeOfDetail(open, 3),
			filter.AtPoint{Point: geo.Point{E: 100, N: -50}, SigmaM: 8},
			[]filter.Quantity{{Name: filter.East}, {Name: filter.North}, {Name: filter.Heading, PriorVar: 1e-3}},
			[]float64{100, -50},
			[]float64{64, 64, 1e-3},
			[]float64{1, 0, 0, 0, 1, 0},
			[]float64{64, 0, 64},
		},
		{
			"lattice", planeOfDetail(open, 1.5),
			filter.AtPoint{Point: geo.Point{E: 100, N: -50}, SigmaM: 6},
			nil,
			[]float64{100, -50},
			[]float64{36, 36},
			[]float64{1, 0, 0, 1},
			[]float64{36, 4, 25},
		},
	} {
		rates, tolMean, tolVar := []int{1, 10}, 0.02, 0.03
		if len(c.start) == 1 {
			rates, tolMean, tolVar = []int{1, 10, 100}, 0.01, 0.02
		}
		for _, rate := range rates {
			t.Run(fmt.Sprintf("%s/rate=%d", c.name, rate), func(t *testing.T) {
				const seed, seconds = 71, 12
				rng := rand.New(rand.NewPCG(seed, 0))
				b, err := filter.Seed(c.space, c.prior, c.qs, 1<<20)
				if err != nil {
					t.Fatal(err)
				}
				dim := len(c.start)
				k, m := max(len(c.qs), dim), len(c.h)/max(len(c.qs), dim)
				ref := kalman{mat.NewVecDense(k, nil), mat.NewDense(k, k, nil)}
				truth := make([]float64, k)
				for i := range k {
					if i < dim {
						ref.x.SetVec(i, c.start[i])
					}
					ref.p.Set(i, i, c.p0[i])
					truth[i] = ref.x.AtVec(i) + math.Sqrt(c.p0[i])*rng.NormFloat64()
				}
				hm, rm := mat.NewDense(m, k, c.h), mat.NewDense(m, m, nil)
				for i := range m {
					for j := range m {
						rm.Set(i, j, c.r[filter.Packed(max(i, j), min(i, j))])
					}
				}
				var w filter.Workspace
				var tape filter.Tape
				w.Record(&tape, b)
				marks := map[int]int{0: 0}
				filtered, predicted, fs := []kalman{ref.clone()}, []kalman{ref.clone()}, []*mat.Dense{nil}
				dt := 1 / float64(rate)
				for s := 1; s <= seconds*rate; s++ {
					step := filter.NewStep(k)
					fm, qm := mat.NewDense(k, k, nil), mat.NewDense(k, k, nil)
					for i := range k {
						fm.Set(i, i, 1)
					}
					set := func(i, j int, v float64) { step.SetF(i, j, v); fm.Set(i, j, v) }
					noise := func(i int, v float64) { step.Q[filter.Packed(i, i)] = v * dt; qm.Set(i, i, v*dt) }
					step.Add[0] = 13 * dt
					for i := range dim {
						noise(i, 2)
					}
					switch {
					case k == 2 && dim == 1:
						set(0, 1, 13*dt)
						noise(1, 1e-6)
					case k == 3: // east, and so the heading turns north
						set(1, 2, -13*dt)
						noise(2, 1e-5)
					}
					filter.Predict(b, c.space, step, &w)
					filter.Adapt(b, 1<<20, &w)
					ref.predict(fm, qm, step.Add)
					predicted = append(predicted, ref.clone())
					fs = append(fs, fm)
					next := append([]float64(nil), truth...)
					for i := range k {
						next[i] = step.Add[i] + math.Sqrt(qm.At(i, i))*rng.NormFloat64()
						for j := range k {
							next[i] += fm.At(i, j) * truth[j]
						}
					}
					truth = next
					if s%rate == 0 && s/rate%3 != 2 {
						z := make([]float64, m)
						for i := range m {
							z[i] = math.Sqrt(rm.At(i, i)) * rng.NormFloat64()
							for j := range k {
								z[i] += c.h[i*k+j] * truth[j]
							}
						}
						if _, err := filter.UpdateWithin(b, c.space, linear{z, c.h, c.r, k}, 1<<20, &w); err != nil {
							t.Fatal(err)
						}
						ref.update(z, hm, rm)
					}
					filtered = append(filtered, ref.clone())
					marks[tape.Turns()] = s
				}
				want := smoothed(filtered, predicted, fs)
				worst, worstVar := 0.0, 0.0
				tape.Smooth(b.Clone(), &w, func(turns int, h *filter.Belief) {
					s, ok := marks[turns]
					if !ok {
						return
					}
					var mean []float64
					var variance []float64
					if len(c.qs) == 0 {
						_, at, v := h.Moments(c.space, &w)
						mean, variance = []float64{at.E, at.N}, []float64{v[0], v[2]}
					} else {
						var cov *mat.Dense
						mean, cov = beliefMoments(h, c.space, &w)
						for i := range k {
							variance = append(variance, cov.At(i, i))
						}
					}
					for i := range k {
						v := want[s].p.At(i, i)
						worst = math.Max(worst, math.Abs(mean[i]-want[s].x.AtVec(i))/math.Sqrt(v))
						worstVar = math.Max(worstVar, math.Abs(variance[i]/v-1))
					}
				})
				if worst > tolMean || worstVar > tolVar {
					t.Errorf("seed %d: means within %.4f sigma, variances within %.4f of the smoother's", seed, worst, worstVar)
				}
			})
		}
	}
}

// waymark measures the distance along both branches of a fork, from which the
// second one is longer than the map of the first would have it.
type waymark struct{ z, sigma, longer float64 }

func (waymark) Wants() filter.Wants   { return filter.WantPosition }
func (waymark) Rows() int             { return 1 }
func (l waymark) Noise() filter.Noise { return filter.Gaussian(l.sigma) }

func (l waymark) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, _ []float64) {
	for i, n := range at.North {
		switch at.East[i] { // the chart
		case 1:
			n += stemM
		case 2:
			n += stemM + l.longer
		}
		t.Residual[i] = l.z - n
		at.Row(t.Row[i*len(qs):], i, 0, 1)
	}
}

const stemM = 60

// TestSmoothAtAFork: a vehicle passes a fork whose branches fit its measurements
// unequally well. At every time masses, means and variances are those of the
// mixture of two smoothers, one a branch, weighed by its prior and its evidence;
// and the most probable path takes the likelier branch, at its smoother's
// distances.
func TestSmoothAtAFork(t *testing.T) {
	const longer, q = 6, 0.5
	g := filtertest.NewGraph(1, []float64{stemM, 150, 150}, [][]filtertest.Link{{{To: 1, Weight: 0.6}, {To: 2, Weight: 0.4}}, nil, nil})
	b, err := filter.Seed(g, alongChart{0, 20, 4}, along, 1<<20)
	if err != nil {
		t.Fatal(err)
	}
	var w filter.Workspace
	var tape filter.Tape
	w.Record(&tape, b)
	first := b.Way()
	one := mat.NewDense(1, 1, []float64{1})
	branch := [2]kalman{}
	var filtered, predicted [2][]kalman
	evidence := [2]float64{math.Log(0.6), math.Log(0.4)}
	for i := range branch {
		branch[i] = kalman{mat.NewVecDense(1, []float64{20}), mat.NewDense(1, 1, []float64{16})}
		filtered[i], predicted[i] = []kalman{branch[i].clone()}, []kalman{branch[i].clone()}
	}
	fs := []*mat.Dense{nil}
	marks := map[int]int{0: 0}
	for s := 1; s <= 18; s++ {
		step := filter.NewStep(1)
		step.Add[0], step.Q[0] = 5, q
		filter.Predict(b, g, step, &w)
		var l any
		sigma, z := 3.0, 0.0
		switch s {
		case 4: // before the fork
			z = 41.5
		case 16:
			z = 103
		}
		l = waymark{z, sigma, longer}
		if z > 0 {
			if _, err := filter.Update(b, g, l, &w); err != nil {
				t.Fatal(err)
			}
		}
		for i := range branch {
			branch[i].predict(one, mat.NewDense(1, 1, []float64{q}), []float64{5})
			predicted[i] = append(predicted[i], branch[i].clone())
			if z > 0 {
				m := z
				if s == 16 && i == 1 {
					m -= longer
				}
				evidence[i] += branch[i].update([]float64{m}, one, mat.NewDense(1, 1, []float64{sigma * sigma}))
			}
			filtered[i] = append(filtered[i], branch[i].clone())
		}
		fs = append(fs, one)
		marks[tape.Turns()] = s
	}
	var want [2][]kalman
	for i := range want {
		want[i] = smoothed(filtered[i], predicted[i], fs)
	}
	p := 1 / (1 + math.Exp(evidence[1]-evidence[0]))
	distance := func(h *filter.Belief) (mean, variance float64, mass [3]float64) {
		var c filter.Cloud
		h.Read(&c, g, &w)
		square := 0.0
		for i, m := range c.Mass {
			x := c.North[i]
			if c.Chart[i] > 0 {
				x += stemM
			}
			mass[c.Chart[i]] += m
			mean += m * x
			square += m * (x*x + c.VarM2[i])
		}
		return mean, square - mean*mean, mass
	}
	tape.Smooth(b.Clone(), &w, func(turns int, h *filter.Belief) {
		s, ok := marks[turns]
		if !ok {
			return
		}
		mean, variance, mass := distance(h)
		m0, m1 := want[0][s].x.AtVec(0), want[1][s].x.AtVec(0)
		wantMean := p*m0 + (1-p)*m1
		wantVar := p*want[0][s].p.At(0, 0) + (1-p)*want[1][s].p.At(0, 0) + p*(1-p)*(m0-m1)*(m0-m1)
		if math.Abs(mean-wantMean) > 0.01*math.Sqrt(wantVar) || math.Abs(variance/wantVar-1) > 0.02 {
			t.Errorf("after %d s: mean %.3f, variance %.3f; the mixture has %.3f, %.3f", s, mean, variance, wantMean, wantVar)
		}
		if s >= 14 && math.Abs(mass[1]/(mass[1]+mass[2])-p) > 0.002 {
			t.Errorf("after %d s: the first branch has %.4f, want %.4f", s, mass[1]/(mass[1]+mass[2]), p)
		}
	})
	ways := tape.Ways(first)
	end := b.Clone()
	if got := ways[len(ways)-1].Restrict(end); math.Abs(got-p) > 0.002 {
		t.Errorf("the likelier way has %.4f, want %.4f", got, p)
	}
	tape.SmoothAlong(end, ways, &w, func(turns int, h *filter.Belief) {
		s, ok := marks[turns]
		if !ok {
			return
		}
		mean, variance, mass := distance(h)
		if mass[2] > 0 {
			t.Errorf("after %d s the path is on the unlikely branch", s)
		}
		m, v := want[0][s].x.AtVec(0), want[0][s].p.At(0, 0)
		if math.Abs(mean-m) > 0.05*math.Sqrt(v) || math.Abs(variance/v-1) > 0.1 {
			t.Errorf("after %d s the path is at %.3f m with variance %.3f, the smoother of its branch at %.3f with %.3f", s, mean, variance, m, v)
		}
	})
}

// alongChart is a Gaussian prior along one chart of a test graph.
type alongChart struct{ chart, north, sigmaM float64 }

func (p alongChart) Box() boxT { return filter.Anywhere{}.Box() }

func (p alongChart) Density(dst []float64, at *filter.Columns) {
	for i, n := range at.North {
		d := (n - p.north) / p.sigmaM
		dst[i] = 0
		if at.East[i] == p.chart {
			dst[i] = math.Exp(-0.5 * d * d)
		}
	}
}
