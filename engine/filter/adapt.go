package filter

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// ScaleM returns the length over which a lattice belief changes: the standard
// deviation of a Gaussian with the same Fisher information along its sharper
// axis,
//
//	J = Σ 4 (√p(i+1) - √p(i))² / h²,   scale = 1/√max(J east, J north).
//
// For modes far apart J is the mean over the modes, so that the scale is that
// of the modes and not of the distance between them.
func (b *Belief) ScaleM() float64 { return b.Lattice.SpacingM * b.Tiles.scale() }

// scale is ScaleM in cells. The masses must sum to 1.
func (t *Tiles) scale() float64 {
	je, jn := t.roughness()
	return 1 / (2 * math.Sqrt(math.Max(je, jn)))
}

// roughness returns Σ (√p(i+1) - √p(i))² along either axis.
func (t *Tiles) roughness() (je, jn float64) {
	// The tile's roots, with those of the next column and row.
	const side = TileSide + 1
	var root [side * side]float64
	for i, at := range t.At {
		tile := t.tile(i)
		var east, north []float64
		if j := t.find(TileAt{at.Col + 1, at.Row}); j >= 0 {
			east = t.tile(j)
		}
		if j := t.find(TileAt{at.Col, at.Row + 1}); j >= 0 {
			north = t.tile(j)
		}
		kernel.Roots(root[:], tile, TileSide, side)
		for r := range TileSide {
			root[r*side+TileSide] = 0
			if east != nil {
				root[r*side+TileSide] = math.Sqrt(east[r*TileSide])
			}
		}
		clear(root[TileSide*side:])
		if north != nil {
			kernel.Roots(root[TileSide*side:], north[:TileSide], TileSide, side)
		}
		de, dn := kernel.Steps(root[:], TileSide, TileSide, side)
		je += de
		jn += dn
	}
	return je, jn
}

// Spacing is at most fineScale of the belief's scale where the budget allows;
// it doubles when twice the spacing would still be below coarseScale, unless
// that would make measurements blunt (Tight). The gap between the two keeps it
// from swinging.
const (
	fineScale   = 0.4
	coarseScale = 0.3
)

// Adapt halves or doubles the spacing of a belief on a plane so that it
// follows the belief's own width, within a budget of cells or Gaussians,
// keeping mass and mean. Gaussians keep the variance as well; what a change of
// spacing adds to that of a lattice is kept as the tiles' surplus and taken
// back from the next spread. It does nothing to beliefs on lines. It reports
// whether anything changed.
func Adapt(b *Belief, maxCells int, w *Workspace) bool {
	if len(b.Axes) > 0 {
		return b.adaptSlices(maxCells, w)
	}
	if b.Dim == 2 && len(b.Quantities) > 0 && len(b.Key) > 0 {
		return b.adaptGaussians(maxCells, w)
	}
	if len(b.Quantities) > 0 || len(b.Tiles.At) == 0 {
		return false
	}
	scale := b.ScaleM()
	h := b.Lattice.SpacingM
	switch {
	case h > fineScale*scale && 4*b.occupiedCells() <= maxCells:
		u := w.turn(b, refined)
		b.refine(&w.tiles)
		w.endTiles(u, b)
		return true
	case 2*h < coarseScale*scale && b.Tight == 0 || b.occupiedCells() > maxCells:
		u := w.turn(b, coarsened)
		b.coarsen(&w.tiles)
		w.endTiles(u, b)
		return true
	}
	return false
}

func (b *Belief) occupiedCells() int { return kernel.Count(b.Tiles.Mass) }

// Cells returns how many cells or Gaussians carry mass.
func (b *Belief) Cells() int {
	if len(b.Axes) > 0 {
		return b.Slices.cells()
	}
	if len(b.Quantities) > 0 {
		return len(b.Key)
	}
	return b.occupiedCells()
}

// refine doubles the resolution. Where a belief has an edge, interpolation
// would go below zero: such cells are empty and the others share their mass;
// what that does to the mean and the variance is made up for as by coarsen.
func (b *Belief) refine(ts *tileSpace) {
	before := b.latticeMoments()
	dst := b.interpolate(ts, nil)
	kept := 0.0
	for _, v := range dst.Mass {
		kept += v
	}
	scale := before.mass / kept
	for i := range dst.Mass {
		dst.Mass[i] *= scale
	}
	b.swap(ts, Lattice{b.Lattice.Origin, b.Lattice.SpacingM / 2}, before)
}

// coarsen halves the resolution: four cells become one at their middle. The
// error in the mean moves the origin, that in the variance becomes surplus.
func (b *Belief) coarsen(ts *tileSpace) {
	before := b.latticeMoments()
	h := b.Lattice.SpacingM
	src := b.Tiles
	dst := &ts.spare
	ts.cover(src.At, func(t TileAt) (lo, hi TileAt) {
		c, r := floorDiv(t.Col*TileSide, 2), floorDiv(t.Row*TileSide, 2)
		return TileAt{c, r}, TileAt{c + TileSide/2 - 1, r + TileSide/2 - 1}
	})
	for i, at := range src.At {
		for x, v := range src.tile(i) {
			if v != 0 {
				col := at.Col*TileSide + int32(x%TileSide)
				row := at.Row*TileSide + int32(x/TileSide)
				dst.add(ts, floorDiv(col, 2), floorDiv(row, 2), v)
			}
		}
	}
	origin := b.Lattice.Origin.Add(geo.Point{E: h / 2, N: h / 2})
	b.swap(ts, Lattice{origin, 2 * h}, before)
}

// moments of the lattice's masses, unnormalised surplus included.
type latticeMoments struct {
	mass       float64
	mean       geo.Point
	ee, en, nn float64
}

func (b *Belief) latticeMoments() latticeMoments {
	m := b.Tiles.moments()
	if m.mass == 0 {
		return m
	}
	h := b.Lattice.SpacingM
	m.ee *= h * h / m.mass
	m.en *= h * h / m.mass
	m.nn *= h * h / m.mass
	m.mean = geo.Point{E: b.Lattice.Origin.E + h*m.mean.E, N: b.Lattice.Origin.N + h*m.mean.N}
	return m
}

// moments are those in cells, the second ones not yet divided by the mass: of each tile
// about its own mean, and put together in the order of the tiles (Chan, Golub & LeVeque,
// "Algorithms for computing the sample variance", Am. Stat. 37, 1983).
func (t *Tiles) moments() (m latticeMoments) {
	const middle = 0.5 * (TileSide - 1)
	for i, at := range t.At {
		of := kernel.BlockMoments(t.tile(i), TileSide)
		mass := of[0]
		if mass == 0 {
			continue
		}
		e, n := of[1]/mass, of[2]/mass
		whole := m.mass + mass
		dE := float64(at.Col*TileSide) + middle + e - m.mean.E
		dN := float64(at.Row*TileSide) + middle + n - m.mean.N
		share := mass / whole
		by := float64(m.mass * share)
		m.ee += of[3] - float64(of[1]*e) + float64(by*float64(dE*dE))
		m.en += of[4] - float64(of[1]*n) + float64(by*float64(dE*dN))
		m.nn += of[5] - float64(of[2]*n) + float64(by*float64(dN*dN))
		m.mean.E += float64(dE * share)
		m.mean.N += float64(dN * share)
		m.mass = whole
	}
	return m
}

// swap installs the new tiles over a new lattice, with the mean of before and
// the change of variance as surplus.
func (b *Belief) swap(ts *tileSpace, l Lattice, before latticeMoments) {
	surplus := b.Tiles.Surplus
	b.Tiles, ts.spare = ts.spare, b.Tiles
	b.Lattice = l
	b.dropTiles()
	after := b.latticeMoments()
	b.Lattice.Origin = b.Lattice.Origin.Add(before.mean.Sub(after.mean))
	b.Tiles.Surplus = [3]float64{
		surplus[0] + after.ee - before.ee,
		surplus[1] + after.en - before.en,
		surplus[2] + after.nn - before.nn,
	}
}

// cover sets ts.spare to empty tiles over the cells that span gives for each
// tile, and ts.index to them.
func (ts *tileSpace) cover(tiles []TileAt, span func(TileAt) (lo, hi TileAt)) {
	at := ts.spare.At[:0]
	for _, t := range tiles {
		lo, hi := span(t)
		at = appendTiles(at, lo, hi)
	}
	ts.empty(sortedTiles(at))
}

// empty sets ts.spare to empty tiles and ts.index to them.
func (ts *tileSpace) empty(at []TileAt) {
	ts.spare.At = at
	ts.indexTiles(&ts.spare)
	ts.spare.Mass = resize(ts.spare.Mass, len(ts.spare.At)*tileCells)
	clear(ts.spare.Mass)
}

// indexTiles sets ts.index to tiles.
func (ts *tileSpace) indexTiles(t *Tiles) {
	if ts.index == nil {
		ts.index = map[TileAt]int32{}
	}
	clear(ts.index)
	for i, at := range t.At {
		ts.index[at] = int32(i)
	}
}

// add adds mass to a cell; its tile must be in ts.index.
func (t *Tiles) add(ts *tileSpace, col, row int32, v float64) {
	tc, tr := floorDiv(col, TileSide), floorDiv(row, TileSide)
	i := int(ts.index[TileAt{tc, tr}])
	t.Mass[i*tileCells+int((row-tr*TileSide)*TileSide+col-tc*TileSide)] += v
}
