package filter

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/geo"
)

// heap is a belief of round heaps on a lattice of a spacing, whose origin is anywhere.
func heap(rng *rand.Rand, spacing, sigma float64, at ...geo.Point) *Belief {
	b := &Belief{Map: "x", Dim: 2, Lattice: Lattice{geo.Point{E: 100 * rng.Float64(), N: 100 * rng.Float64()}, spacing}}
	seen := map[TileAt]bool{}
	for _, p := range at {
		c, r := int32(math.Round((p.E-b.Lattice.Origin.E)/spacing)), int32(math.Round((p.N-b.Lattice.Origin.N)/spacing))
		reach := int32(math.Ceil(6*sigma/spacing)) + 1
		for _, t := range appendTiles(nil, TileAt{c - reach, r - reach}, TileAt{c + reach, r + reach}) {
			seen[t] = true
		}
	}
	for t := range seen {
		b.Tiles.At = append(b.Tiles.At, t)
	}
	b.Tiles.At = sortedTiles(b.Tiles.At)
	b.Tiles.Mass = make([]float64, len(b.Tiles.At)*tileCells)
	total := 0.0
	for i, t := range b.Tiles.At {
		for x := range b.Tiles.tile(i) {
			c := b.Lattice.Centre(t.Col*TileSide+int32(x%TileSide), t.Row*TileSide+int32(x/TileSide))
			for _, p := range at {
				d := c.Sub(p)
				b.Tiles.tile(i)[x] += math.Exp(-(d.E*d.E + d.N*d.N) / (2 * sigma * sigma))
			}
			total += b.Tiles.tile(i)[x]
		}
	}
	for i := range b.Tiles.Mass {
		b.Tiles.Mass[i] /= total
	}
	return b
}

// moments of a belief on a plane, its surplus taken off: mean, and the three of the
// covariance.
func trueMoments(b *Belief) [5]float64 {
	if len(b.Quantities) == 0 {
		m := b.latticeMoments()
		s := b.Tiles.Surplus
		return [5]float64{m.mean.E, m.mean.N, m.ee - s[0], m.en - s[1], m.nn - s[2]}
	}
	var out [5]float64
	k := len(b.Quantities)
	for pass := range 2 {
		for i, key := range b.Key {
			col, row := Cell(key)
			c := b.Lattice.Centre(col, row)
			e, n, p := c.E+b.Mean[i*k], c.N+b.Mean[i*k+1], b.Cov[i*k*(k+1)/2:]
			if pass == 0 {
				out[0] += b.Mass[i] * e
				out[1] += b.Mass[i] * n
				continue
			}
			e, n = e-out[0], n-out[1]
			out[2] += b.Mass[i] * (p[0] + e*e)
			out[3] += b.Mass[i] * (p[1] + e*n)
			out[4] += b.Mass[i] * (p[2] + n*n)
		}
	}
	return out
}

// TestBlendPlane: a blend has the moments of the mixture, and as much near each of two
// places as there is to be; whichever lattice is the finer, wherever their origins lie,
// and however few cells there may be, on points and of Gaussians.
func TestBlendPlane(t *testing.T) {
	const seed, share = 8, 0.3
	rng := rand.New(rand.NewPCG(seed, 0))
	p, q := geo.Point{E: 40, N: -20}, geo.Point{E: 900, N: 700}
	for _, c := range []struct {
		h, other float64
		maxCells int
	}{{4, 4, 1e6}, {4, 3.1, 1e6}, {4, 13, 1e6}, {13, 2.9, 1e6}, {2, 17, 3000}, {17, 2, 3000}} {
		for _, gaussians := range []bool{false, true} {
			b, o := heap(rng, c.h, 3*c.h, p), heap(rng, c.other, 3*c.other, q)
			if gaussians {
				b, o = gaussianOnLattice(c.h, round(1, p.E, p.N, 3*c.h)), gaussianOnLattice(c.other, round(1, q.E, q.N, 3*c.other))
			}
			x, y := trueMoments(b), trueMoments(o)
			var want [5]float64
			dE, dN := y[0]-x[0], y[1]-x[1]
			for i, apart := range [5]float64{0, 0, dE * dE, dE * dN, dN * dN} {
				want[i] = (1-share)*x[i] + share*y[i] + share*(1-share)*apart
			}
			var w Workspace
			BlendPlane(b, o, share, c.maxCells, &w)
			got := trueMoments(b)
			for i := range want {
				// Masses below the floor go; of 1e6 m² they leave some 1e-6.
				if math.Abs(got[i]-want[i]) > 1e-6*(1+math.Abs(want[i])) {
					t.Errorf("seed %d, %+v, Gaussians %v: moment %d is %v, want %v", seed, c, gaussians, i, got[i], want[i])
				}
			}
			near, total := 0.0, 0.0
			add := func(at geo.Point, m float64) {
				if total += m; at.Sub(q).Norm() < 500 {
					near += m
				}
			}
			for i, key := range b.Key {
				add(b.Lattice.Centre(Cell(key)), b.Mass[i])
			}
			for i, m := range b.Tiles.Mass {
				cell := b.Tiles.cellAt(i)
				add(b.Lattice.Centre(cell[0], cell[1]), m)
			}
			if math.Abs(near-share) > 1e-6 || total > 1+1e-12 || total+b.Pruned < 1-1e-12 || b.Pruned > 1e-10 {
				t.Errorf("seed %d, %+v, Gaussians %v: %v near the other place, want %v; %v in all, %v pruned", seed, c, gaussians, near, share, total, b.Pruned)
			}
			if n := b.Cells(); n > c.maxCells {
				t.Errorf("seed %d, %+v, Gaussians %v: %d cells", seed, c, gaussians, n)
			}
		}
	}
}

// TestBlendBackward: run backward over a blend, a lattice has in each cell its own part of
// what is known later of it; and the most probable path that ends where the other belief
// alone was jumps there from the likeliest place.
func TestBlendBackward(t *testing.T) {
	const seed, share = 9, 0.25
	rng := rand.New(rand.NewPCG(seed, 0))
	p, q := geo.Point{}, geo.Point{E: 60}
	b, o := heap(rng, 5, 20, p), heap(rng, 5, 20, q)
	before := b.Clone()
	var w Workspace
	var tape Tape
	w.Record(&tape, b)
	BlendPlane(b, o, share, 1e6, &w)
	after := b.Clone()
	// What is measured later speaks for where the other one was.
	total := 0.0
	for i, at := range b.Tiles.At {
		for x := range b.Tiles.tile(i) {
			c := b.Lattice.Centre(at.Col*TileSide+int32(x%TileSide), at.Row*TileSide+int32(x/TileSide))
			b.Tiles.tile(i)[x] *= math.Exp((c.E - 30) / 10)
			total += b.Tiles.tile(i)[x]
		}
	}
	for i := range b.Tiles.Mass {
		b.Tiles.Mass[i] /= total
	}
	h := b.Clone()
	tape.Smooth(h, &w, nil)
	sum, all := 0.0, 0.0
	for i, at := range before.Tiles.At {
		for x, m := range before.Tiles.tile(i) {
			col, row := at.Col*TileSide+int32(x%TileSide), at.Row*TileSide+int32(x/TileSide)
			if beta := after.Tiles.cell(col, row); beta > 0 {
				all += m * b.Tiles.cell(col, row) / beta
			}
		}
	}
	for i, at := range before.Tiles.At {
		for x, m := range before.Tiles.tile(i) {
			col, row := at.Col*TileSide+int32(x%TileSide), at.Row*TileSide+int32(x/TileSide)
			got, want := h.Tiles.cell(col, row), 0.0
			if beta := after.Tiles.cell(col, row); beta > 0 {
				want = m * b.Tiles.cell(col, row) / beta / all
			}
			sum += got
			if math.Abs(got-want) > 1e-12 {
				t.Fatalf("seed %d: cell %d, %d: %v, want %v", seed, col, row, got, want)
			}
		}
	}
	if math.Abs(sum-1) > 1e-12 {
		t.Errorf("seed %d: %v in all", seed, sum)
	}
	bests := tape.Best(before.BestOf(), b)
	for name, end := range map[string]geo.Point{"where both were": {E: 30}, "where the other one was": {E: 160}} {
		spot := Spot{col: int32(math.Round((end.E - b.Lattice.Origin.E) / 5)), row: int32(math.Round((end.N - b.Lattice.Origin.N) / 5))}.at(&b.Tiles)
		begin := tape.Trace(bests, spot, b, nil)
		from := before.Lattice.Centre(begin.col, begin.row)
		if stays := from.Sub(b.Lattice.Centre(spot.col, spot.row)).Norm() < 1e-6; stays != (name == "where both were") || !stays && from.Sub(p).Norm() > 8 {
			t.Errorf("seed %d: the path that ends %s begins at %v", seed, name, from)
		}
	}
}
