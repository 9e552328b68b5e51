package filter_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/plane"
)

func mass(b *filter.Belief) (sum float64) {
	return sumFloats(b.Mass) + sumFloats(b.Tiles.Mass)
}

// TestMassIsAccountedFor: after every prediction, mass, pruned and left make
// 1, on a network with a trap and on planes with and without quantities.
func TestMassIsAccountedFor(t *testing.T) {
	const seed = 51
	rng := rand.New(rand.NewPCG(seed, 0))
	g := fork()
	p := plane.Open(geo.LonLat{}, 500, 5)
	scale := filter.Quantity{Name: filter.OdometerScale, PriorVar: 1e-4}
	for name, c := range map[string]struct {
		space filter.Space
		prior filter.Prior
		qs    []filter.Quantity
	}{
		"lines":            {g, filter.Anywhere{}, []filter.Quantity{{Name: filter.Along}, scale}},
		"lattice":          {p, filter.AtPoint{SigmaM: 12}, nil},
		"plane with scale": {p, filter.AtPoint{SigmaM: 12}, []filter.Quantity{{Name: filter.East}, {Name: filter.North}, scale}},
	} {
		b, err := filter.Seed(c.space, c.prior, c.qs, 1<<16)
		if err != nil {
			t.Fatal(err)
		}
		b.Pruned = 0 // the seed was normalised after its own
		var w filter.Workspace
		for i := range 20 {
			step := filter.NewStep(max(b.K(), b.Dim))
			for d := range b.Dim {
				step.Add[d] = 3 * rng.NormFloat64()
				step.Q[filter.Packed(d, d)] = 2 * rng.Float64()
			}
			filter.Predict(b, c.space, step, &w)
			filter.Adapt(b, 1<<16, &w)
			if m := mass(b) + b.Pruned + b.LeftMap; math.Abs(m-1) > 1e-12 {
				t.Fatalf("seed %d, %s, step %d: mass %v + pruned %v + left %v = 1%+.2g", seed, name, i, mass(b), b.Pruned, b.LeftMap, m-1)
			}
		}
		if name == "lines" && b.LeftMap == 0 {
			t.Error("nothing left the map, though one street is a trap")
		}
	}
}

// TestRelevelKeepsMoments: going to coarser cells and back keeps mass, mean
// and variance, and a coarse belief predicts the same moments as a fine one.
func TestRelevelKeepsMoments(t *testing.T) {
	g := line(800, 1)
	b, err := filter.Seed(g, onLine{300, 6}, []filter.Quantity{{Name: filter.Along}, {Name: filter.OdometerScale, PriorVar: 1e-4}}, 1<<16)
	if err != nil {
		t.Fatal(err)
	}
	var w filter.Workspace
	b.Pruned = 0 // the seed was normalised after its own
	fine := b.Clone()
	check := func(what string, a, b *filter.Belief) {
		t.Helper()
		// Pruned tails (1e-12 each) lie at most 60 m away: 3600/36 variances.
		tol := 1e-12 + 100*(a.Pruned+b.Pruned)
		ma, xa, va := a.Moments(g, &w)
		mb, xb, vb := b.Moments(g, &w)
		if math.Abs(ma-mb) > tol || math.Abs(xa.N-xb.N) > tol || math.Abs(va[2]/vb[2]-1) > tol {
			t.Errorf("%s: mass %v, mean %v, variance %v; before %v, %v, %v", what, ma, xa.N, va[2], mb, xb.N, vb[2])
		}
	}
	for _, level := range []int{1, 3, 0, 2} {
		cells := b.Cells()
		filter.Relevel(b, g, level, &w)
		if b.Level != level || level > 0 && level < 3 && b.Cells() == cells {
			t.Errorf("level %d with %d cells, before %d", b.Level, b.Cells(), cells)
		}
		check("releveled", b, fine)
		for _, x := range []*filter.Belief{b, fine} {
			step := filter.NewStep(2)
			step.Add[0], step.Q[0] = 7, 0.5
			step.SetF(0, 1, 7)
			filter.Predict(x, g, step, &w)
		}
		check("predicted", b, fine)
	}
}

// never is impossible everywhere, as a plain and as a linear likelihood.
type never struct{}

func (never) Wants() filter.Wants { return filter.WantPosition }
func (never) LogLikelihood(dst []float64, _ *filter.Columns) {
	for i := range dst {
		dst[i] = math.Inf(-1)
	}
}

type neverLinear struct{}

func (neverLinear) Wants() filter.Wants { return filter.WantPosition }
func (neverLinear) Rows() int           { return 1 }
func (neverLinear) Noise() filter.Noise { return filter.Gaussian(1) }
func (neverLinear) Linearize(t *filter.Terms, _ *filter.Columns, _ []filter.Quantity, _ []float64) {
	for i := range t.Flat {
		t.Flat[i] = math.Inf(-1)
	}
}

// TestContradictionChangesNothing: a measurement that is impossible
// everywhere is a named error and leaves every bit of the belief as it was;
// so does one whose distance underflows. The next good one still works.
func TestContradictionChangesNothing(t *testing.T) {
	g := line(200, 1)
	p := plane.Open(geo.LonLat{}, 500, 5)
	for name, c := range map[string]struct {
		space filter.Space
		prior filter.Prior
		qs    []filter.Quantity
	}{
		"lines":           {g, onLine{100, 4}, along},
		"lattice":         {p, filter.AtPoint{SigmaM: 12}, nil},
		"plane Gaussians": {p, filter.AtPoint{SigmaM: 12}, []filter.Quantity{{Name: filter.East}, {Name: filter.North}}},
	} {
		b, err := filter.Seed(c.space, c.prior, c.qs, 1<<16)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		step := filter.NewStep(max(b.K(), b.Dim))
		step.Add[0] = 1.7
		filter.Predict(b, c.space, step, &w)
		before := b.Clone()
		for _, l := range []any{never{}, neverLinear{}, filtertest.Along{Z: 1e200, SigmaM: 1e-3}} {
			e, err := filter.Update(b, c.space, l, &w)
			if !errors.Is(err, filter.ErrContradiction) || !math.IsInf(e, -1) {
				t.Errorf("%s, %T: evidence %v, error %v", name, l, e, err)
			}
			if !reflect.DeepEqual(b, before) {
				t.Errorf("%s, %T: the belief changed", name, l)
			}
		}
		if _, err := filter.Update(b, c.space, filtertest.Along{Z: 5, SigmaM: 100}, &w); err != nil || math.Abs(mass(b)-1) > 1e-12 {
			t.Errorf("%s: afterwards %v, mass %v", name, err, mass(b))
		}
	}
}

// TestEvidenceDoesNotDependOnRate: the same drive with its motion cut into 1,
// 10 or 100 steps between measurements gives the same log evidence.
func TestEvidenceDoesNotDependOnRate(t *testing.T) {
	const seed = 52
	zs := make([]float64, 20)
	rng := rand.New(rand.NewPCG(seed, 0))
	for i := range zs {
		zs[i] = 100 + 5*float64(i+1) + 3*rng.NormFloat64()
	}
	g := line(400, 1)
	var first float64
	for _, n := range []int{1, 10, 100} {
		b, err := filter.Seed(g, onLine{100, 4}, along, 1<<16)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		sum := 0.0
		for _, z := range zs {
			step := filter.NewStep(1)
			step.Add[0], step.Q[0] = 5/float64(n), 1/float64(n)
			for range n {
				filter.Predict(b, g, step, &w)
			}
			e, err := filter.Update(b, g, filtertest.Along{Z: z, SigmaM: 3}, &w)
			if err != nil {
				t.Fatal(err)
			}
			sum += e
		}
		if n == 1 {
			first = sum
		}
		// Cutting at cell edges distorts the shape by a few 1e-3 at most
		// (distribution error ≤ 0.03 at sigma 1/2 a cell, here 3 to 4 cells):
		// a thousandth a measurement.
		if math.Abs(sum-first) > 1e-3*float64(len(zs)) {
			t.Errorf("seed %d: log evidence %v in %d steps a measurement, %v in one", seed, sum, n, first)
		}
	}
}
