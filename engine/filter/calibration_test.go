package filter_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/plane"
)

// binomialBand returns the counts that a Binomial(n, p) variable lies between
// with probability at least 1-alpha.
func binomialBand(n int, p, alpha float64) (low, high int) {
	d := distuv.Binomial{N: float64(n), P: p}
	for low = 0; d.CDF(float64(low)) < alpha/2; low++ {
	}
	for high = n; 1-d.CDF(float64(high-1)) < alpha/2; high-- {
	}
	return low, high
}

// uniformRanks fails unless the ranks 0…l of n runs are uniform: each rank's
// count within the 99 % binomial band for all ranks at once (alpha shared
// among them), as in Talts et al. 2018, "Validating Bayesian inference
// algorithms with simulation-based calibration".
func uniformRanks(t *testing.T, what string, seed uint64, counts []int) {
	t.Helper()
	n := 0
	for _, c := range counts {
		n += c
	}
	low, high := binomialBand(n, 1/float64(len(counts)), 0.01/float64(len(counts)))
	t.Logf("%s: ranks %v of %d runs, band [%d, %d]", what, counts, n, low, high)
	for r, c := range counts {
		if c < low || c > high {
			t.Errorf("seed %d, %s: rank %d came up %d times in %d runs, the 99 %% band is [%d, %d]; all: %v", seed, what, r, c, n, low, high, counts)
		}
	}
}

// rank counts the draws below the truth.
func rank(truth float64, draws []float64) (r int) {
	for _, d := range draws {
		if d < truth {
			r++
		}
	}
	return r
}

// drawIndex draws an entry with probability proportional to its mass.
func drawIndex(rng *rand.Rand, mass []float64) int {
	u := rng.Float64() * sumFloats(mass)
	for i, m := range mass {
		if u -= m; u < 0 {
			return i
		}
	}
	return len(mass) - 1
}

// TestRanksOnARoad: simulation-based calibration on a road with a junction.
// The test draws start, odometer scale, motion noise, branch and measurements
// from the model itself, by its own few lines; the truth's rank among nine
// draws of the posterior must be uniform, for the way from the start and for
// the scale.
func TestRanksOnARoad(t *testing.T) {
	const seed, runs, draws = 71, 400, 9
	rng := rand.New(rand.NewPCG(seed, 0))
	g := filtertest.NewGraph(1, []float64{120, 200, 200}, [][]filtertest.Link{{{To: 1, Weight: 0.3}, {To: 2, Weight: 0.7}}, nil, nil})
	qs := []filter.Quantity{{Name: filter.Along}, {Name: filter.OdometerScale, PriorVar: 0.01}}
	where := make([]int, draws+1)
	scales := make([]int, draws+1)
	for range runs {
		x, scale := 60+7*rng.NormFloat64(), 0.1*rng.NormFloat64()
		branch := int32(1)
		if rng.Float64() < 0.7 {
			branch = 2
		}
		b, err := filter.Seed(g, onChart{onLine{60, 7}}, qs, 1<<12)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		for k := range 8 {
			const d, q, sigma = 12, 4, 9
			x += d*(1+scale) + math.Sqrt(q)*rng.NormFloat64()
			step := filter.NewStep(2)
			step.Add[0], step.Q[0] = d, q
			step.SetF(0, 1, d)
			filter.Predict(b, g, step, &w)
			if k%2 == 1 {
				z := reading(x, branch) + sigma*rng.NormFloat64()
				if _, err := filter.Update(b, g, fromJunction{z, sigma}, &w); err != nil {
					t.Fatalf("seed %d: %v", seed, err)
				}
			}
		}
		var c filter.Cloud
		b.Read(&c, g, &w)
		var xs, ss [draws]float64
		for i := range draws {
			j := drawIndex(rng, c.Mass)
			v0, v1, v2 := b.Cov[3*j], b.Cov[3*j+1], b.Cov[3*j+2]
			l0 := math.Sqrt(v0)
			n0, n1 := rng.NormFloat64(), rng.NormFloat64()
			at := c.AlongM[j] + l0*n0
			if c.Chart[j] > 0 {
				at += 120
			}
			// Streets apart by more than they are long, for the rank.
			xs[i] = at + 1000*math.Max(0, float64(c.Chart[j])-1)
			ss[i] = b.Mean[2*j+1] + v1/l0*n0 + math.Sqrt(math.Max(0, v2-v1*v1/v0))*n1
		}
		truth := x
		if x > 120 && branch == 2 {
			truth += 1000
		}
		where[rank(truth, xs[:])]++
		scales[rank(scale, ss[:])]++
	}
	uniformRanks(t, "position", seed, where)
	uniformRanks(t, "scale", seed, scales)
}

// reading is what fromJunction sees from x metres along a branch.
func reading(x float64, branch int32) float64 {
	if x > 120 && branch == 2 {
		return 120 + (x-120)*0.6
	}
	return x
}

// fromJunction reads the distance along; the second street runs off at an
// angle, so that it counts for 0.6 there.
type fromJunction struct{ z, sigma float64 }

func (fromJunction) Wants() filter.Wants   { return filter.WantPosition }
func (fromJunction) Rows() int             { return 1 }
func (f fromJunction) Noise() filter.Noise { return filter.Gaussian(f.sigma) }

func (f fromJunction) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, _ []float64) {
	for i, n := range at.North {
		switch at.East[i] {
		case 0:
			t.Residual[i], t.Row[i*len(qs)] = f.z-n, 1
		case 1:
			t.Residual[i], t.Row[i*len(qs)] = f.z-120-n, 1
		default:
			t.Residual[i], t.Row[i*len(qs)] = f.z-120-0.6*n, 0.6
		}
	}
}

// onChart is a prior on chart 0 alone.
type onChart struct{ onLine }

func (p onChart) Density(dst []float64, at *filter.Columns) {
	p.onLine.Density(dst, at)
	for i, e := range at.East {
		if e != 0 {
			dst[i] = 0
		}
	}
}

// rangeTo is a range to a beacon.
type rangeTo struct {
	at       geo.Point
	z, sigma float64
}

func (rangeTo) Wants() filter.Wants   { return filter.WantPosition }
func (rangeTo) Rows() int             { return 1 }
func (r rangeTo) Noise() filter.Noise { return filter.Gaussian(r.sigma) }

func (r rangeTo) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, _ []float64) {
	k := max(len(qs), at.Dim)
	for i := range at.East {
		e, n := at.East[i]-r.at.E, at.North[i]-r.at.N
		d := math.Hypot(e, n)
		t.Residual[i] = r.z - d
		if d > 0 {
			at.Row(t.Row[i*k:], i, e/d, n/d)
		}
	}
}

// TestRanksOnAPlane: the same on a lattice, with ranges whose posteriors are
// arcs: ranks of east, of north, and of the distance from the first beacon.
func TestRanksOnAPlane(t *testing.T) {
	const seed, runs, draws = 72, 200, 9
	rng := rand.New(rand.NewPCG(seed, 0))
	p := plane.Open(geo.LonLat{}, 1000, 5) // a range sigma of 12 m, 0.4 of it
	beacons := []geo.Point{{E: -60, N: 10}, {E: -90, N: -20}}
	names := []string{"east", "north", "range"}
	var counts [3][draws + 1]int
	stats := func(q geo.Point) [3]float64 { return [3]float64{q.E, q.N, q.Sub(beacons[0]).Norm()} }
	for range runs {
		const sigma0, sigma = 50, 12
		x := geo.Point{E: sigma0 * rng.NormFloat64(), N: sigma0 * rng.NormFloat64()}
		b, err := filter.Seed(p, filter.AtPoint{SigmaM: sigma0}, nil, 1<<16)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		for k := range 3 {
			// Correlated motion noise: 8² along (1, 1)/√2, 3² across.
			a, c := 8*rng.NormFloat64(), 3*rng.NormFloat64()
			u := geo.Point{E: 10, N: -4}
			x = x.Add(u).Add(geo.Point{E: (a - c) / math.Sqrt2, N: (a + c) / math.Sqrt2})
			step := filter.NewStep(2)
			step.Add[0], step.Add[1] = u.E, u.N
			step.Q[0], step.Q[1], step.Q[2] = (64+9)/2., (64-9)/2., (64+9)/2.
			filter.Predict(b, p, step, &w)
			beacon := beacons[k%2]
			z := x.Sub(beacon).Norm() + sigma*rng.NormFloat64()
			if _, err := filter.Update(b, p, rangeTo{beacon, z, sigma}, &w); err != nil {
				t.Fatalf("seed %d: %v", seed, err)
			}
			filter.Adapt(b, 1<<16, &w)
		}
		var c filter.Cloud
		b.Read(&c, p, &w)
		var drawn [3][draws]float64
		h := b.Lattice.SpacingM
		for i := range draws {
			j := drawIndex(rng, c.Mass)
			q := geo.Point{E: c.East[j] + h*(rng.Float64()-0.5), N: c.North[j] + h*(rng.Float64()-0.5)}
			for s, v := range stats(q) {
				drawn[s][i] = v
			}
		}
		for s, v := range stats(x) {
			counts[s][rank(v, drawn[s][:])]++
		}
	}
	for s := range counts {
		uniformRanks(t, names[s], seed, counts[s][:])
	}
}
