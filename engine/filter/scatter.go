package filter

import (
	"math"

	"leadline/engine/geo"
)

// Scatter gives up where a belief on lines is along them and says what is known
// of it after a motion of varM2 (m² an axis) that was not followed: somewhere on
// the lines, with a density that is the belief's, spread over the plane. That is
// no less than following the lines would give, along which one gets less far.
// Headings become those of the lines; other nuisances keep their mean and
// variance. All of it counts as restarted (b.Restarted). maxCells decides the
// level, as for Seed.
//
// The density is read from a lattice whose cells are a third of the spread.
func Scatter(b *Belief, space LineSpace, varM2 float64, maxCells int, w *Workspace) error {
	prior := b.scattered(space, varM2, w)
	qs := append([]Quantity(nil), b.Quantities...)
	for i := b.Dim; i < len(qs); i++ {
		if mean, v, ok := b.Moment(qs[i].Name); ok {
			qs[i].PriorMean, qs[i].PriorVar = mean, v
		}
	}
	fresh, err := Seed(space, prior, qs, maxCells)
	if err != nil {
		return err
	}
	u := w.turn(b, given)
	fresh.Quantities = b.Quantities
	fresh.Pruned += b.Pruned
	fresh.LeftMap = b.LeftMap
	fresh.Restarted = 1
	*b = *fresh
	u.gave(b)
	return nil
}

// scattered is the prior for Scatter: masses on a lattice.
func (b *Belief) scattered(space LineSpace, varM2 float64, w *Workspace) *latticePrior {
	var c Cloud
	b.Read(&c, space, w)
	h := math.Sqrt(varM2) / 3
	p := &latticePrior{lattice: Lattice{geo.Point{E: c.East[0], N: c.North[0]}, h}}
	cell := func(e, n float64) (col, row int32, x, y float64) {
		return nearestCell(CellKey(0, 0), e-p.lattice.Origin.E, n-p.lattice.Origin.N, h)
	}
	ts := &w.tiles
	at := ts.spare.At[:0]
	for i := range c.Mass {
		col, row, _, _ := cell(c.East[i], c.North[i])
		for r := floorDiv(row-1, TileSide); r <= floorDiv(row+1, TileSide); r++ {
			for c := floorDiv(col-1, TileSide); c <= floorDiv(col+1, TileSide); c++ {
				at = append(at, TileAt{c, r})
			}
		}
	}
	ts.empty(sortedTiles(at))
	var own [3]float64
	for i, m := range c.Mass {
		col, row, x, y := cell(c.East[i], c.North[i])
		ts.shareOut(col, row, spline(x), spline(y), m)
		own[0] += float64(m * c.VarEE[i])
		own[1] += float64(m * c.VarEN[i])
		own[2] += float64(m * c.VarNN[i])
	}
	plane := Belief{Dim: 2, Lattice: p.lattice, Tiles: Tiles{
		At: append([]TileAt(nil), ts.spare.At...), Mass: append([]float64(nil), ts.spare.Mass...),
	}}
	// Sharing out on the lattice and reading from it add h²/4 each.
	within := 2 * h * h / 4
	plane.predictTiles(Step{Add: make([]float64, 2), Q: []float64{own[0] + varM2 - within, own[1], own[2] + varM2 - within}}, w)
	p.tiles = plane.Tiles
	return p
}

// latticePrior is a density that is kept as masses on a lattice.
type latticePrior struct {
	lattice Lattice
	tiles   Tiles
}

var _ Prior = (*latticePrior)(nil)

// Box implements Prior.
func (p *latticePrior) Box() geo.Box {
	box := geo.EmptyBox()
	for _, t := range p.tiles.At {
		box = box.Extend(p.lattice.Centre(t.Col*TileSide-1, t.Row*TileSide-1))
		box = box.Extend(p.lattice.Centre((t.Col+1)*TileSide, (t.Row+1)*TileSide))
	}
	return box
}

// Density implements Prior: the quadratic B-spline through the masses.
func (p *latticePrior) Density(dst []float64, at *Columns) {
	h := p.lattice.SpacingM
	for i := range dst {
		col, row, x, y := nearestCell(CellKey(0, 0), at.East[i]-p.lattice.Origin.E, at.North[i]-p.lattice.Origin.N, h)
		wx, wy := spline(x), spline(y)
		dst[i] = 0
		last, tile := TileAt{}, []float64(nil)
		for r := range int32(3) {
			for c := range int32(3) {
				t := TileAt{floorDiv(col+c-1, TileSide), floorDiv(row+r-1, TileSide)}
				if tile == nil || t != last {
					j := p.tiles.find(t)
					if j < 0 {
						continue
					}
					last, tile = t, p.tiles.tile(j)
				}
				v := tile[(row+r-1-t.Row*TileSide)*TileSide+col+c-1-t.Col*TileSide]
				dst[i] += float64(v * float64(wx[c]*wy[r]))
			}
		}
	}
}
