package filter

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/geo"
)

// placed returns a belief's Gaussians with their positions in the frame, from
// an origin near them.
func placed(b *Belief, origin geo.Point) *Gaussians {
	k := b.K()
	c := Gaussians{Key: b.Key, Mass: b.Mass, Cov: b.Cov, Mean: append([]float64(nil), b.Mean...)}
	for i, key := range b.Key {
		at := b.Lattice.Centre(Cell(key)).Sub(origin)
		c.Mean[i*k] += at.E
		c.Mean[i*k+1] += at.N
	}
	return &c
}

// TestRegridKeepsMoments: on other lattices, finer and coarser, mass, mean and
// covariance over all quantities are what they were, to rounding and what is
// pruned.
func TestRegridKeepsMoments(t *testing.T) {
	const seed = 81
	rng := rand.New(rand.NewPCG(seed, 0))
	for _, k := range []int{2, 3, 5} {
		b := &Belief{Map: "x", Dim: 2, Lattice: Lattice{geo.Point{E: 1000.3, N: -77}, 4}, Quantities: make([]Quantity, k)}
		for range 200 {
			g := randomGaussian(rng, k)
			g.mass /= 100
			b.push(CellKey(rng.Int32N(20)-10, rng.Int32N(20)-10), k, &g)
		}
		var w Workspace
		origin := b.Lattice.Origin
		want := rawMoments(placed(b, origin), k)
		h := b.Lattice.SpacingM
		for _, l := range []func(Lattice) Lattice{Lattice.finer, Lattice.finer, Lattice.finer, Lattice.coarser, Lattice.coarser, Lattice.coarser, Lattice.coarser, Lattice.coarser} {
			b.regrid(l(b.Lattice), b.Mass, &w)
			got := rawMoments(placed(b, origin), k)
			for i := range want {
				// Moments up to some 1e3; crumbs of 1e-12 at up to 100 m.
				if math.Abs(got[i]-want[i]) > 1e-9*(1+math.Abs(want[i]))+1e4*b.Pruned {
					t.Fatalf("seed %d, %d quantities, spacing %g: moment %d is %v, before %v (pruned %g)", seed, k, b.Lattice.SpacingM, i, got[i], want[i], b.Pruned)
				}
			}
		}
		if b.Lattice.SpacingM != 4*h {
			t.Errorf("the spacing is %g", b.Lattice.SpacingM)
		}
	}
}

// gaussianOnLattice is a belief over east and north that is N(mean, sigma²),
// or a sum of them, cut at a spacing.
func gaussianOnLattice(spacing float64, parts ...gaussian) *Belief {
	b := &Belief{Map: "x", Dim: 2, Lattice: Lattice{geo.Point{}, 1e6}, Quantities: make([]Quantity, 2)}
	for _, g := range parts {
		b.push(CellKey(0, 0), 2, &g)
	}
	var w Workspace
	b.regrid(Lattice{geo.Point{}, spacing}, b.Mass, &w)
	return b
}

func round(mass, e, n, sigma float64) (g gaussian) {
	g.mass, g.mean[0], g.mean[1] = mass, e, n
	g.cov[0], g.cov[2] = sigma*sigma, sigma*sigma
	return g
}

// TestCuttingIsSmooth compares the density of a cut Gaussian with its own,
// within two sigma: to 2 % up to cells of half a sigma, and to 12 % where cells
// are 0.8 sigma.
func TestCuttingIsSmooth(t *testing.T) {
	for _, c := range []struct{ h, tol float64 }{{0.25, 0.02}, {0.5, 0.02}, {0.8, 0.12}} {
		b := gaussianOnLattice(c.h, round(1, 0.13, -0.21, 1))
		p := placed(b, geo.Point{})
		worst := 0.0
		for x := -2.0; x <= 2; x += 0.11 {
			got := 0.0
			for i, m := range p.Mass {
				e, n := x-p.Mean[2*i], x-p.Mean[2*i+1]
				got += m * math.Exp(-0.5*(e*e/p.Cov[3*i]+n*n/p.Cov[3*i+2])) / math.Sqrt(p.Cov[3*i]*p.Cov[3*i+2])
			}
			want := math.Exp(-0.5 * ((x-0.13)*(x-0.13) + (x+0.21)*(x+0.21)))
			worst = math.Max(worst, math.Abs(got/want-1))
		}
		t.Logf("cells of %g sigma: %d Gaussians, density off by at most %.4f", c.h, len(b.Key), worst)
		if worst > c.tol {
			t.Errorf("cells of %g sigma: the density is off by %.3f", c.h, worst)
		}
	}
}

// TestWidthOfGaussians: the width of a Gaussian cut into cells is its sigma; of
// two far apart, that of each; a wide and faint rest does not count; where
// cells are wider than the belief it is at most 1.25 of them, so that they are
// halved.
func TestWidthOfGaussians(t *testing.T) {
	for _, c := range []struct {
		name      string
		h         float64
		parts     []gaussian
		low, high float64
	}{
		{"fine", 3, []gaussian{round(1, 0.1, 0.3, 10)}, 9.7, 10.3},
		{"at the coarse bound", 6, []gaussian{round(1, 1, 2, 10)}, 9.3, 10.7},
		{"at the fine bound", 8, []gaussian{round(1, 3, 2, 10)}, 9, 11},
		{"far apart", 3, []gaussian{round(0.5, 0, 0, 10), round(0.5, 3000, 0, 10)}, 9.5, 10.5},
		{"sharper one decides", 2, []gaussian{round(0.5, 0, 0, 5), round(0.5, 4000, 0, 40)}, 5, 8},
		{"faint rest", 2, []gaussian{round(0.99, 0, 0, 5), round(0.01, 0, 0, 150)}, 4.7, 5.4},
		{"narrow axis", 2, []gaussian{{mass: 1, cov: [maxPacked]float64{2500, 0, 36}}}, 5.6, 6.4},
		{"unresolved", 40, []gaussian{round(1, 7, -3, 2)}, 0, 4},
		{"unresolved at an edge", 40, []gaussian{round(1, 20, 19, 2)}, 0, 16},
	} {
		b := gaussianOnLattice(c.h, c.parts...)
		var w Workspace
		width, dense := w.tiles.width(&b.Gaussians, b.Mass, 2, c.h)
		t.Logf("%s: width %.3f, %d of %d Gaussians dense", c.name, width, dense, len(b.Key))
		if width < c.low || width > c.high {
			t.Errorf("%s: width %g, want %g to %g", c.name, width, c.low, c.high)
		}
	}
}

// TestFaintStaysWhole: the wide rest of a belief with a sharp peak is not cut as
// finely as the peak.
func TestFaintStaysWhole(t *testing.T) {
	b := gaussianOnLattice(64, round(0.9, 0, 0, 3), round(0.1, 0, 0, 400))
	rest := len(b.Key)
	var w Workspace
	for Adapt(b, 200_000, &w) {
	}
	// A peak of 3 m in cells of 1.8 to 2.4 m is some hundred and fifty.
	if h := b.Lattice.SpacingM; h > 2.5 || len(b.Key) > rest+400 {
		t.Errorf("spacing %g with %d Gaussians, %d before", h, len(b.Key), rest)
	}
	if n := Adapt(b, 200_000, &w); n {
		t.Error("the spacing swings")
	}
}

// TestAdaptWithinBudget: a budget is not exceeded by refining, and what exceeds
// it is coarsened, moments kept.
func TestAdaptWithinBudget(t *testing.T) {
	for _, budget := range []int{1, 20, 100, 1000} {
		t.Run(fmt.Sprint(budget), func(t *testing.T) {
			b := gaussianOnLattice(1, round(1, 0, 0, 5))
			before := rawMoments(placed(b, geo.Point{}), 2)
			var w Workspace
			for range 64 {
				if !Adapt(b, budget, &w) {
					break
				}
			}
			// Four cells about a corner may stay apart at any spacing.
			if n := len(b.Key); n > max(budget, 4) {
				t.Errorf("%d Gaussians", n)
			}
			if h := b.Lattice.SpacingM; h > maxSpacingM {
				t.Errorf("a spacing of %g m", h)
			}
			for i, m := range rawMoments(placed(b, geo.Point{}), 2) {
				if math.Abs(m-before[i]) > 1e-9 {
					t.Errorf("moment %d is %v, before %v", i, m, before[i])
				}
			}
		})
	}
}
