package filter

import "leadline/engine/kernel"

// Weights at -3 … 3 finer cells of interpolation by cubics: a point keeps half
// its mass (refineMiddle) and those between two get -1/32, 9/32, 9/32, -1/32 of
// their neighbours' (refineFar, refineNear). Mean and variance are kept.
//
// Source: the four-point scheme of Deslauriers & Dubuc, Constr. Approx. 5
// (1989).
const (
	refineMiddle = 1. / 2
	refineNear   = 9. / 32
	refineFar    = -1. / 32
	refineReach  = 3
)

// A tile's finer cells, with those that its border leans over to.
const fineSide = 2*TileSide - 1 + 2*refineReach

// interpolate writes the masses of the cells that are kept (all, if keep is nil)
// over a lattice of half the spacing into ts.spare, with 0 for what would be
// below.
func (b *Belief) interpolate(ts *tileSpace, keep []bool) *Tiles {
	src, dst := &b.Tiles, &ts.spare
	ts.at = ts.at[:0]
	at := dst.At[:0]
	for i, t := range src.At {
		lo, hi, any := kept(src.tile(i), keep, i)
		if !any {
			continue
		}
		ts.at = append(ts.at, int32(i))
		c, r := 2*t.Col*TileSide, 2*t.Row*TileSide
		at = appendTiles(at, TileAt{c + 2*lo.Col - refineReach, r + 2*lo.Row - refineReach}, TileAt{c + 2*hi.Col + refineReach, r + 2*hi.Row + refineReach})
	}
	ts.empty(sortedTiles(at))
	// A tile's sums are made apart, with what the tiles before have left there.
	fine := resize(ts.fine, fineSide*fineSide)
	ts.fine = fine
	for _, i := range ts.at {
		corner := TileAt{2*src.At[i].Col*TileSide - refineReach, 2*src.At[i].Row*TileSide - refineReach}
		ts.window(dst, fine, corner, fineSide, fineSide, false)
		for x, v := range src.tile(int(i)) {
			if v != 0 && (keep == nil || keep[int(i)*tileCells+x]) {
				refineCell(fine[x/TileSide*2*fineSide+x%TileSide*2:], v)
			}
		}
		ts.window(dst, fine, corner, fineSide, fineSide, true)
	}
	for i, v := range dst.Mass {
		if !(v > 0) {
			dst.Mass[i] = 0
		}
	}
	return dst
}

// refineCell adds a cell's mass to the finer cells around it, of which the first
// is fine[0].
func refineCell(fine []float64, v float64) {
	row := func(o []float64, v float64) {
		o = o[:2*refineReach+1]
		far, near := float64(v*refineFar), float64(v*refineNear)
		o[0] += far
		o[2] += near
		o[3] += float64(v * refineMiddle)
		o[4] += near
		o[6] += far
	}
	far, near := float64(v*refineFar), float64(v*refineNear)
	row(fine, far)
	row(fine[2*fineSide:], near)
	row(fine[3*fineSide:], float64(v*refineMiddle))
	row(fine[4*fineSide:], near)
	row(fine[6*fineSide:], far)
}

// window copies a rectangle of cells of t, to which ts.index belongs, out of it or
// back into it. Tiles that there are none of hold 0.
func (ts *tileSpace) window(t *Tiles, cells []float64, corner TileAt, cols, rows int32, back bool) {
	last := TileAt{corner.Col + cols - 1, corner.Row + rows - 1}
	for tr := floorDiv(corner.Row, TileSide); tr <= floorDiv(last.Row, TileSide); tr++ {
		r0, r1 := max(corner.Row, tr*TileSide), min(last.Row+1, (tr+1)*TileSide)
		for tc := floorDiv(corner.Col, TileSide); tc <= floorDiv(last.Col, TileSide); tc++ {
			c0, c1 := max(corner.Col, tc*TileSide), min(last.Col+1, (tc+1)*TileSide)
			var tile []float64
			if j, ok := ts.index[TileAt{tc, tr}]; ok {
				tile = t.tile(int(j))
			}
			o := cells[(r0-corner.Row)*cols+c0-corner.Col:]
			if tile == nil {
				for r := range r1 - r0 {
					clear(o[r*cols:][:c1-c0])
				}
				continue
			}
			in := tile[(r0-tr*TileSide)*TileSide+c0-tc*TileSide:]
			if back {
				kernel.CopyBlock(in, o, int(c1-c0), int(r1-r0), TileSide, int(cols))
			} else {
				kernel.CopyBlock(o, in, int(c1-c0), int(r1-r0), int(cols), TileSide)
			}
		}
	}
}

// kept returns the first and last column and row with mass that is kept.
func kept(tile []float64, keep []bool, i int) (lo, hi TileAt, any bool) {
	if keep == nil {
		return occupied(tile)
	}
	lo, hi = TileAt{TileSide, TileSide}, TileAt{-1, -1}
	for x, k := range keep[i*tileCells : (i+1)*tileCells] {
		if k && tile[x] > 0 {
			c, r := int32(x%TileSide), int32(x/TileSide)
			lo.Col, hi.Col = min(lo.Col, c), max(hi.Col, c)
			lo.Row, hi.Row = min(lo.Row, r), max(hi.Row, r)
		}
	}
	return lo, hi, hi.Row >= 0
}
