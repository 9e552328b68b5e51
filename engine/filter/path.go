package filter

import (
	"math"
	"slices"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// Best is for each entry of a belief (a Gaussian, or a cell of a lattice's tiles)
// the log probability of the likeliest sequence of entries that ends there, with
// all that was measured until then, up to a constant.
type Best []float64

// BestOf is that of a belief that has just begun: the log of its masses.
func (b *Belief) BestOf() Best { return logs(b.masses()) }

func logs(mass []float64) Best {
	out := make(Best, len(mass))
	for i, m := range mass {
		out[i] = math.Inf(-1)
		if m > 0 {
			out[i] = kernel.Log(m)
		}
	}
	return out
}

// Best follows a tape forward: first is of its beginning. The last of what it
// returns is of end, the belief at its end; the n-th is of what there was before
// turn n.
//
// It is the Viterbi algorithm (Forney, Proc. IEEE 61, 1973) over the entries, of
// which each is sent to others with the shares that Predict gave it.
func (t *Tape) Best(first Best, end *Belief) []Best {
	all := make([]Best, 0, len(t.turns)+1)
	best := first
	was := t.start
	for n := range t.turns {
		u := &t.turns[n]
		best = weighed(best, &was, u.before.Mass, &u.tiles)
		all = append(all, best)
		best = u.follow(best)
		was = u.left()
	}
	return append(all, weighed(best, &was, end.Mass, &end.Tiles))
}

// weighed adds what the measurements since said: by how much the masses changed.
func weighed(best Best, was *Tiles, mass []float64, tiles *Tiles) Best {
	if len(mass) > 0 {
		out := make(Best, len(mass))
		for i, m := range mass {
			out[i] = best[i] + logRatio(m, was.Mass[i])
		}
		return out
	}
	out := make(Best, len(tiles.Mass))
	for i := range out {
		out[i] = math.Inf(-1)
	}
	for i, at := range tiles.At {
		j := was.find(at)
		if j < 0 {
			continue
		}
		for x, m := range tiles.tile(i) {
			out[i*tileCells+x] = best[j*tileCells+x] + logRatio(m, was.Mass[j*tileCells+x])
		}
	}
	return out
}

func logRatio(a, b float64) float64 {
	switch {
	case a > 0 && a == b:
		return 0
	case a > 0 && b > 0:
		return kernel.Log(a / b)
	}
	return math.Inf(-1)
}

// left is what a turn left, before it was weighed.
func (u *turn) left() Tiles {
	switch u.kind {
	case moved, regrouped:
		return Tiles{Mass: u.after.Mass}
	case thinned:
		m := make([]float64, len(u.kept))
		for i, j := range u.kept {
			m[i] = u.before.Mass[j]
		}
		return Tiles{Mass: m}
	case given:
		return Tiles{Mass: u.after.Mass}
	case shifted:
		return u.tiles
	}
	return u.then
}

// follow takes the best before a turn to that after it.
func (u *turn) follow(best Best) Best {
	switch u.kind {
	case moved, regrouped:
		out := make(Best, len(u.after.Mass))
		for t := range out {
			out[t] = math.Inf(-1)
		}
		anywhere := slices.Max(best)
		for j, t := range u.target {
			out[t] = math.Max(out[t], u.sent(best, j, anywhere))
		}
		return out
	case thinned:
		out := make(Best, len(u.kept))
		for i, j := range u.kept {
			out[i] = best[j]
		}
		return out
	case given:
		out := logs(u.after.Mass)
		anywhere := slices.Max(best)
		for i := range out {
			out[i] += anywhere
		}
		return out
	case shifted:
		return best
	}
	out := make(Best, len(u.then.Mass))
	if u.kind == spreadOut {
		u.followSpread(out, best)
		return out
	}
	anywhere := math.Inf(-1)
	if u.kind == blended {
		anywhere = slices.Max(best)
	}
	for i, at := range u.then.At {
		for x, m := range u.then.tile(i) {
			out[i*tileCells+x] = math.Inf(-1)
			if m > 0 {
				_, out[i*tileCells+x] = u.bestCell(best, at.Col*TileSide+int32(x%TileSide), at.Row*TileSide+int32(x/TileSide))
			}
			if u.kind == blended {
				out[i*tileCells+x] = math.Max(out[i*tileCells+x], anywhere+u.blendedIn(at.Col*TileSide+int32(x%TileSide), at.Row*TileSide+int32(x/TileSide)))
			}
		}
	}
	return out
}

// blendedIn is the log of the mass that a cell got from elsewhere.
func (u *turn) blendedIn(col, row int32) float64 {
	return kernel.Log(max(u.then.cell(col, row)-(1-u.share)*u.tiles.cell(col, row), 0))
}

// followSpread is follow for a direction of a spread, tile by tile.
func (u *turn) followSpread(out, best Best) {
	for i := range out {
		out[i] = math.Inf(-1)
	}
	for n := range int32(len(u.spread.weight)) {
		more := kernel.Log(u.spread.weight[n])
		for i, at := range u.then.At {
			tile := out[i*tileCells : (i+1)*tileCells]
			u.greatest(tile, at, best, n*u.spread.col, n*u.spread.row, more)
			if n > 0 {
				u.greatest(tile, at, best, -n*u.spread.col, -n*u.spread.row, more)
			}
		}
	}
}

// greatest raises the cells of a tile to what those at (col+dc, row+dr) have, and
// more.
func (u *turn) greatest(out []float64, at TileAt, best Best, dc, dr int32, more float64) {
	col, row := at.Col*TileSide+dc, at.Row*TileSide+dr
	tc, tr := floorDiv(col, TileSide), floorDiv(row, TileSide)
	oc, or := col-tc*TileSide, row-tr*TileSide
	for half := range int32(2) {
		r0, r1 := half*(TileSide-or), TileSide-or+half*or
		for side := range int32(2) {
			c0, c1 := side*(TileSide-oc), TileSide-oc+side*oc
			if r0 >= r1 || c0 >= c1 {
				continue
			}
			i := u.tiles.find(TileAt{tc + side, tr + half})
			if i < 0 {
				continue
			}
			for r := r0; r < r1; r++ {
				from := best[i*tileCells+int((r+or)%TileSide*TileSide+(c0+oc)%TileSide):]
				for x, v := range from[:c1-c0] {
					if o := int(r*TileSide+c0) + x; v+more > out[o] {
						out[o] = v + more
					}
				}
			}
		}
	}
}

// sent is the best of a piece: what comes from elsewhere may have been anywhere.
func (u *turn) sent(best Best, j int, anywhere float64) float64 {
	if s := u.source[j]; s >= 0 {
		return best[s] + logRatio(u.piece.Mass[j], u.before.Mass[s])
	}
	return anywhere + kernel.Log(u.piece.Mass[j])
}

// bestCell is the cell from which a turn of a lattice brings the likeliest path to
// one, and its log.
func (u *turn) bestCell(best Best, col, row int32) (from [2]int32, log float64) {
	log = math.Inf(-1)
	try := func(c, r int32, more float64) {
		i := u.tiles.find(TileAt{floorDiv(c, TileSide), floorDiv(r, TileSide)})
		if i < 0 {
			return
		}
		if v := best[i*tileCells+within(c, r)] + more; v > log {
			from, log = [2]int32{c, r}, v
		}
	}
	switch u.kind {
	case spreadOut:
		try(col, row, kernel.Log(u.spread.weight[0]))
		for n := int32(1); n < int32(len(u.spread.weight)); n++ {
			more := kernel.Log(u.spread.weight[n])
			try(col+n*u.spread.col, row+n*u.spread.row, more)
			try(col-n*u.spread.col, row-n*u.spread.row, more)
		}
	case refined:
		near, n := parents(col, row)
		for _, c := range near[:n] {
			try(c[0], c[1], 0)
		}
	case coarsened:
		for r := range int32(2) {
			for c := range int32(2) {
				try(2*col+c, 2*row+r, 0)
			}
		}
	case blended:
		try(col, row, kernel.Log(1-u.share))
	}
	return from, log
}

// Spot is a place on the most probable path: an entry of a belief, and where in
// it the quantities are.
type Spot struct {
	Entry    int // of a lattice: of its tiles' masses
	Mean     [MaxK]float64
	col, row int32
}

// End is where the most probable path ends, given the best at a belief.
func (b *Belief) End(best Best) Spot {
	s := Spot{Entry: 0}
	for i, v := range best {
		if v > best[s.Entry] {
			s.Entry = i
		}
	}
	if k := len(b.Quantities); k > 0 {
		copy(s.Mean[:k], b.Mean[s.Entry*k:(s.Entry+1)*k])
		return s
	}
	s.of(&b.Tiles)
	return s
}

func (s *Spot) of(t *Tiles) {
	cell := t.cellAt(s.Entry)
	s.col, s.row = cell[0], cell[1]
}

// Trace follows the most probable path back over a tape, from a spot at its end
// to the one at its beginning, which it returns; see is given each, as Smooth
// gives what is known. all is what Best returned. Within the entries it passes,
// which are Gaussian, a path is the mean of the quantities before a step given
// those after it.
func (t *Tape) Trace(all []Best, spot Spot, b *Belief, see func(turns int, s Spot)) Spot {
	for n := len(t.turns); ; n-- {
		if see != nil {
			see(n, spot)
		}
		if n == 0 {
			return spot
		}
		spot = t.turns[n-1].back(all[n-1], spot, len(b.Quantities), b.Dim, angularMask(b.Quantities))
	}
}

// back is where a path was before a turn.
func (u *turn) back(best Best, spot Spot, k, dim int, angular uint) Spot {
	switch u.kind {
	case moved, regrouped:
		anywhere := slices.Max(best)
		from, log := -1, math.Inf(-1)
		for j, t := range u.target {
			if int(t) != spot.Entry {
				continue
			}
			if v := u.sent(best, j, anywhere); from < 0 || v > log {
				from, log = j, v
			}
		}
		if u.source[from] < 0 {
			return u.jump(best, k)
		}
		i := int(u.source[from])
		g := gaussian{mean: spot.Mean}
		for d := range dim {
			g.mean[d] += u.offset[from*dim+d]
		}
		var b backward
		b.begin(u, k)
		b.of(u, i, dim)
		b.step(&g, angular)
		for d := dim; d < k; d++ {
			if angular>>uint(d)&1 != 0 {
				g.mean[d] = geo.WrapPi(g.mean[d])
			}
		}
		return Spot{Entry: i, Mean: g.mean}
	case thinned:
		spot.Entry = int(u.kept[spot.Entry])
	case given:
		return u.jump(best, k)
	case shifted:
		return spot.at(&u.tiles)
	default:
		from, log := u.bestCell(best, spot.col, spot.row)
		if u.kind == blended && slices.Max(best)+u.blendedIn(spot.col, spot.row) > log {
			i := u.jump(best, 0).Entry
			from = u.tiles.cellAt(i)
		}
		spot.col, spot.row = from[0], from[1]
		return spot.at(&u.tiles)
	}
	return spot
}

// jump is where the best path was before what comes from anywhere.
func (u *turn) jump(best Best, k int) Spot {
	s := Spot{}
	for i, v := range best {
		if v > best[s.Entry] {
			s.Entry = i
		}
	}
	copy(s.Mean[:k], u.before.Mean[s.Entry*k:(s.Entry+1)*k])
	return s
}

// Alone is a belief that is at the spot alone, of what is known at the same turn.
func (s *Spot) Alone(h *Belief) *Belief {
	b := &Belief{Map: h.Map, Level: h.Level, Lattice: h.Lattice, Dim: h.Dim, Quantities: h.Quantities}
	k := len(h.Quantities)
	if k == 0 {
		b.Tiles = Tiles{At: []TileAt{{floorDiv(s.col, TileSide), floorDiv(s.row, TileSide)}}, Mass: make([]float64, tileCells)}
		b.Tiles.Mass[within(s.col, s.row)] = 1
		return b
	}
	b.Gaussians = Gaussians{[]uint64{h.Key[s.Entry]}, []float64{1}, slices.Clone(s.Mean[:k]), make([]float64, k*(k+1)/2)}
	return b
}

// at finds a spot's cell among tiles.
func (s Spot) at(t *Tiles) Spot {
	s.Entry = t.find(TileAt{floorDiv(s.col, TileSide), floorDiv(s.row, TileSide)})*tileCells + within(s.col, s.row)
	return s
}
