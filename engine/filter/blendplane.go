package filter

import (
	"math"

	"leadline/engine/geo"
)

// BlendPlane makes a belief on a plane the mixture of itself and a share of another
// one over the same map and quantities, whose lattice may be any; other is used up. It
// panics where velocities are axes.
//
// Of Gaussians no moment changes. Of lattices the mass and the mean do not; what
// spreading the other's masses over the cells of this one's adds to the variance is
// kept as surplus, as in Adapt. The lattice is halved until it is as fine as the
// other's, as far as maxCells allows; otherwise as coarse as it must be.
func BlendPlane(b, other *Belief, share float64, maxCells int, w *Workspace) {
	if b.Map != other.Map || b.Dim != 2 || len(b.Quantities) != len(other.Quantities) || len(b.Axes)+len(other.Axes) > 0 {
		panic("filter: a blend of beliefs over different planes")
	}
	b.Tight = 0
	if len(b.Quantities) > 0 {
		b.blendGaussians(other, share, w)
	} else {
		b.blendTiles(other, share, maxCells, w)
	}
	b.Pruned += share * other.Pruned
	b.LeftMap += share * other.LeftMap
}

func (b *Belief) blendGaussians(other *Belief, share float64, w *Workspace) {
	k := len(b.Quantities)
	mv := mover{k: k, dim: 2, lattice: b.Lattice, out: &w.out, angular: angularMask(b.Quantities)}
	if other.Lattice.SpacingM > b.Lattice.SpacingM {
		mv.lattice = other.Lattice
	}
	u := w.turn(b, regrouped)
	// Each is cut as by regrid: where it is not faint beside its own densest.
	send := func(from *Belief, part float64) {
		density, most := from.densities(nil, from.Mass, k, from.Lattice.SpacingM)
		mv.faint = cutShare * most
		var g gaussian
		for i, key := range from.Key {
			from.load(&g, i, k)
			g.mass *= part
			if mv.index = -1; from == b {
				mv.index = int32(i)
			}
			mv.plane(from.Lattice, key, &g, density[i] < mv.faint)
		}
	}
	for {
		mv.follow(u)
		w.out.reset()
		mv.pruned, mv.cuts = 0, 0
		send(b, 1-share)
		send(other, share)
		if mv.cuts <= maxPieces {
			break
		}
		mv.lattice = mv.lattice.coarser()
	}
	b.Lattice = mv.lattice
	b.Pruned += mv.pruned
	into := w.intoFor(u, len(w.out.Key))
	w.merger.merge(&b.Gaussians, &w.out, k, mv.angular, perCell(2), into)
	w.end(u, b, &w.out, into, mv.source, mv.offset)
	b.thin(w)
}

func (b *Belief) blendTiles(other *Belief, share float64, maxCells int, w *Workspace) {
	ts := &w.tiles
	for 4*b.occupiedCells()+other.occupiedCells() <= maxCells && other.Lattice.SpacingM < b.Lattice.SpacingM/math.Sqrt2 {
		u := w.turn(b, refined)
		b.refine(ts)
		w.endTiles(u, b)
	}
	// Cells wider than those that they are spread over would leave a comb.
	for other.Lattice.SpacingM > b.Lattice.SpacingM {
		if b.occupiedCells()+4*other.occupiedCells() <= maxCells {
			other.refine(ts)
			continue
		}
		u := w.turn(b, coarsened)
		b.coarsen(ts)
		w.endTiles(u, b)
	}
	u := w.turn(b, blended)
	before, added := b.latticeMoments(), other.latticeMoments()
	for d := range 3 { // the variances that the beliefs have by themselves
		*before.variance(d) -= b.Tiles.Surplus[d]
		*added.variance(d) -= other.Tiles.Surplus[d]
	}
	l, h := b.Lattice, b.Lattice.SpacingM
	cellOf := func(p geo.Point) (col, row int32, x, y float64) {
		e, n := (p.E-l.Origin.E)/h, (p.N-l.Origin.N)/h
		fe, fn := math.Floor(e+0.5), math.Floor(n+0.5)
		return int32(fe), int32(fn), e - fe, n - fn
	}
	at := append(ts.spare.At[:0], b.Tiles.At...)
	for _, t := range other.Tiles.At {
		c0, r0, _, _ := cellOf(other.Lattice.Centre(t.Col*TileSide, t.Row*TileSide))
		c1, r1, _, _ := cellOf(other.Lattice.Centre(t.Col*TileSide+TileSide-1, t.Row*TileSide+TileSide-1))
		at = appendTiles(at, TileAt{c0 - 1, r0 - 1}, TileAt{c1 + 1, r1 + 1})
	}
	ts.empty(sortedTiles(at))
	for i, t := range b.Tiles.At {
		dst := ts.spare.tile(int(ts.index[t]))
		for x, m := range b.Tiles.tile(i) {
			dst[x] = (1 - share) * m
		}
	}
	for i, t := range other.Tiles.At {
		for x, m := range other.Tiles.tile(i) {
			if m > 0 {
				col, row, dx, dy := cellOf(other.Lattice.Centre(t.Col*TileSide+int32(x%TileSide), t.Row*TileSide+int32(x/TileSide)))
				ts.shareOut(col, row, spline(dx), spline(dy), share*m)
			}
		}
	}
	apart := added.mean.Sub(before.mean)
	whole := latticeMoments{mean: before.mean.Add(geo.Point{E: share * apart.E, N: share * apart.N})}
	for d, cross := range [3]float64{apart.E * apart.E, apart.E * apart.N, apart.N * apart.N} {
		*whole.variance(d) = (1-share)**before.variance(d) + share**added.variance(d) + float64(share*(1-share))*cross
	}
	b.Tiles.Surplus = [3]float64{}
	b.swap(ts, l, whole)
	if u != nil {
		u.share = share
	}
	w.endTiles(u, b)
}

// variance is ee, en or nn.
func (m *latticeMoments) variance(d int) *float64 {
	return [3]*float64{&m.ee, &m.en, &m.nn}[d]
}
