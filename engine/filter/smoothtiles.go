package filter

import "slices"

// undoSpread takes a lattice back over one direction of a spread: γ(i) = α(i) Σ_n
// w(n) γ'(i+n)/β(i+n), the kernel being symmetric.
func (u *turn) undoSpread(h *Belief, s *smoother, ts *tileSpace) {
	s.ratio.At = append(s.ratio.At[:0], h.Tiles.At...)
	s.ratio.Mass = resize(s.ratio.Mass, len(h.Tiles.Mass))
	for i, at := range h.Tiles.At {
		ratio, later := s.ratio.tile(i), h.Tiles.tile(i)
		clear(ratio)
		j := u.then.find(at)
		if j < 0 {
			continue
		}
		for x, beta := range u.then.tile(j) {
			if beta > 0 {
				ratio[x] = later[x] / beta
			}
		}
	}
	ts.indexTiles(&s.ratio)
	out := Tiles{slices.Clone(u.tiles.At), make([]float64, len(u.tiles.Mass)), u.tiles.Surplus}
	for i, at := range out.At {
		tile := out.tile(i)
		ts.gather(tile, at, &s.ratio, 0, 0, u.spread.weight[0])
		for n := int32(1); n < int32(len(u.spread.weight)); n++ {
			ts.gather(tile, at, &s.ratio, n*u.spread.col, n*u.spread.row, u.spread.weight[n])
			ts.gather(tile, at, &s.ratio, -n*u.spread.col, -n*u.spread.row, u.spread.weight[n])
		}
		for x, alpha := range u.tiles.tile(i) {
			tile[x] *= alpha
		}
	}
	h.Tiles = u.whole(out)
}

// undoCoarsened shares out what is known of a cell among the four that it was
// made of, as they had it: exact, since nothing that came later tells them apart.
func (u *turn) undoCoarsened(h *Belief) {
	out := Tiles{slices.Clone(u.tiles.At), slices.Clone(u.tiles.Mass), u.tiles.Surplus}
	for i, at := range out.At {
		tile := out.tile(i)
		for x, alpha := range tile {
			if alpha == 0 {
				continue
			}
			col, row := floorDiv(at.Col*TileSide+int32(x%TileSide), 2), floorDiv(at.Row*TileSide+int32(x/TileSide), 2)
			tile[x] = 0
			if beta := u.then.cell(col, row); beta > 0 {
				tile[x] = alpha * h.Tiles.cell(col, row) / beta
			}
		}
	}
	h.Tiles = u.whole(out)
}

// undoBlended takes a lattice back over mass from elsewhere, in its own cells: what was
// there before has of what is known later of its cell as much as it had of the cell.
func (u *turn) undoBlended(h *Belief) {
	out := Tiles{slices.Clone(u.tiles.At), slices.Clone(u.tiles.Mass), u.tiles.Surplus}
	for i, at := range out.At {
		tile := out.tile(i)
		for x, alpha := range tile {
			if alpha == 0 {
				continue
			}
			tile[x] = 0
			col, row := at.Col*TileSide+int32(x%TileSide), at.Row*TileSide+int32(x/TileSide)
			if beta := u.then.cell(col, row); beta > 0 {
				tile[x] = alpha * h.Tiles.cell(col, row) / beta
			}
		}
	}
	h.Tiles = u.whole(out)
}

// undoRefined takes a lattice back over interpolation by cubics: γ(i) = α(i) Σ_f
// A(f, i) γ'(f)/β(f), A being the weights of interpolate, of which some are
// negative: what would be below 0 is 0.
func (u *turn) undoRefined(h *Belief) {
	out := Tiles{slices.Clone(u.tiles.At), make([]float64, len(u.tiles.Mass)), u.tiles.Surplus}
	weights := [2*refineReach + 1]float64{refineFar, 0, refineNear, refineMiddle, refineNear, 0, refineFar}
	for i, at := range out.At {
		tile := out.tile(i)
		for x, alpha := range u.tiles.tile(i) {
			if alpha == 0 {
				continue
			}
			col, row := 2*(at.Col*TileSide+int32(x%TileSide)), 2*(at.Row*TileSide+int32(x/TileSide))
			sum := 0.0
			for r, wr := range weights {
				for c, wc := range weights {
					if wr == 0 || wc == 0 {
						continue
					}
					fc, fr := col+int32(c)-refineReach, row+int32(r)-refineReach
					if beta := u.then.cell(fc, fr); beta > 0 {
						sum += float64(float64(wr*wc) * (h.Tiles.cell(fc, fr) / beta))
					}
				}
			}
			tile[x] = alpha * max(sum, 0)
		}
	}
	h.Tiles = u.whole(out)
}

// parents are the cells of twice the spacing beside a cell, all as near.
func parents(col, row int32) (near [4][2]int32, n int) {
	for r := floorDiv(row, 2); r <= floorDiv(row+1, 2); r++ {
		for c := floorDiv(col, 2); c <= floorDiv(col+1, 2); c++ {
			near[n] = [2]int32{c, r}
			n++
		}
	}
	return near, n
}

// whole makes masses sum to 1: those before, where nothing is left.
func (u *turn) whole(t Tiles) Tiles {
	total := sum(t.Mass)
	if !(total > 0) {
		return Tiles{t.At, slices.Clone(u.tiles.Mass), t.Surplus}
	}
	for i := range t.Mass {
		t.Mass[i] /= total
	}
	return t
}

// cell is the mass of a cell, 0 where there is no tile.
func (t *Tiles) cell(col, row int32) float64 {
	i := t.find(TileAt{floorDiv(col, TileSide), floorDiv(row, TileSide)})
	if i < 0 {
		return 0
	}
	return t.tile(i)[within(col, row)]
}

// cellAt is the column and row of the cell whose mass is at an index.
func (t *Tiles) cellAt(i int) [2]int32 {
	at, x := t.At[i/tileCells], i%tileCells
	return [2]int32{at.Col*TileSide + int32(x%TileSide), at.Row*TileSide + int32(x/TileSide)}
}

// within is the index of a cell within its tile.
func within(col, row int32) int {
	return int((row-floorDiv(row, TileSide)*TileSide)*TileSide + col - floorDiv(col, TileSide)*TileSide)
}
