package filter

import (
	"cmp"
	"math"
	"slices"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

const tileCells = TileSide * TileSide

// cellFloor is the mass of a lattice cell below which it is set to zero, and
// counted: a hundredth of Floor, since a lattice has many cells a tail.
const cellFloor = Floor / 100

// tileSpace is the memory for working on tiles.
type tileSpace struct {
	spare Tiles
	index map[TileAt]int32
	taps  taps
	// density is of Gaussians, see width.
	density []float64
	// at is of interpolate, fine a tile with what is around it; first is the lattice that UpdateWithin
	// began with.
	at    []int32
	fine  []float64
	first Tiles
	// marked is of sorted.
	marked []bool
}

// tile returns the masses of tile i.
func (t *Tiles) tile(i int) []float64 { return t.Mass[i*tileCells : (i+1)*tileCells] }

// find returns the index of a tile, or -1.
func (t *Tiles) find(at TileAt) int {
	i, ok := slices.BinarySearchFunc(t.At, at, compareTiles)
	if !ok {
		return -1
	}
	return i
}

func compareTiles(a, b TileAt) int {
	if a.Row != b.Row {
		return cmp.Compare(a.Row, b.Row)
	}
	return cmp.Compare(a.Col, b.Col)
}

// floorDiv is a/n rounded down.
func floorDiv(a, n int32) int32 {
	q := a / n
	if a%n < 0 {
		q--
	}
	return q
}

// predictTiles moves the origin and spreads the masses.
func (b *Belief) predictTiles(step Step, w *Workspace) {
	if step.Local != nil {
		panic("filter: position-dependent motion needs a belief with quantities")
	}
	turn := w.turn(b, shifted)
	b.Lattice.Origin = b.Lattice.Origin.Add(geo.Point{E: step.Add[0], N: step.Add[1]})
	s := &b.Tiles.Surplus
	q := [3]float64{step.Q[0] - s[0], step.Q[1] - s[1], step.Q[2] - s[2]}
	// Where the lattice is already wider than it should be, owe the less.
	p := spreadable(q)
	b.Tight = math.Max(0, b.Tight-math.Min(p[0], p[2]))
	*s = [3]float64{p[0] - q[0], p[1] - q[1], p[2] - q[2]}
	h2 := b.Lattice.SpacingM * b.Lattice.SpacingM
	u, lambda, n := directions(p[0]/h2, p[1]/h2, p[2]/h2)
	for i := range n {
		w.tiles.taps.col, w.tiles.taps.row = u[i][0], u[i][1]
		w.tiles.taps.weight = discreteNormal(w.tiles.taps.weight, lambda[i])
		if i > 0 {
			turn = w.turn(b, spreadOut)
		}
		b.spread(&w.tiles)
		if turn != nil {
			turn.kind, turn.spread = spreadOut, w.tiles.taps
			turn.spread.weight = slices.Clone(turn.spread.weight)
			w.endTiles(turn, b)
		}
	}
}

// spread convolves the masses with ts.taps.
func (b *Belief) spread(ts *tileSpace) {
	src, dst := &b.Tiles, &ts.spare
	reach := int32(len(ts.taps.weight) - 1)
	ts.dilate(src)
	dst.Mass = resize(dst.Mass, len(dst.At)*tileCells)
	kept := 0
	for _, at := range dst.At {
		out := dst.tile(kept)
		if ts.spreadTile(out, at, src) {
			kept = b.keepTile(dst, at, kept)
			continue
		}
		clear(out)
		ts.gather(out, at, src, 0, 0, ts.taps.weight[0])
		for n := int32(1); n <= reach; n++ {
			weight := ts.taps.weight[n]
			ts.gather(out, at, src, n*ts.taps.col, n*ts.taps.row, weight)
			ts.gather(out, at, src, -n*ts.taps.col, -n*ts.taps.row, weight)
		}
		kept = b.keepTile(dst, at, kept)
	}
	dst.At, dst.Mass = dst.At[:kept], dst.Mass[:kept*tileCells]
	dst.Surplus = src.Surplus
	b.Tiles, ts.spare = *dst, *src
}

// keepTile makes tile j of t the one at a place, if there is mass in it, and returns
// how many there are then. What is faint is zeroed and counted.
func (b *Belief) keepTile(t *Tiles, at TileAt, j int) int {
	if !b.dropFaint(t.tile(j)) {
		return j
	}
	t.At[j] = at
	return j + 1
}

// dropFaint zeroes cells below cellFloor and counts what goes; it reports whether some
// are left.
func (b *Belief) dropFaint(tile []float64) bool {
	some, dropped := kernel.DropBelow(tile, cellFloor)
	b.Pruned += dropped
	return some
}

// spreadTile writes what the masses of src make of a tile, over copied rows of the
// cells that reach it. It reports false where these are too many.
func (ts *tileSpace) spreadTile(out []float64, at TileAt, src *Tiles) bool {
	reach, col, row := int32(len(ts.taps.weight)-1), ts.taps.col, ts.taps.row
	beside, above := reach*abs32(col), reach*abs32(row)
	cols, rows := TileSide+2*beside, TileSide+2*above
	if cols > mostCopied/rows {
		return false
	}
	ts.fine = resize(ts.fine, int(cols*rows))
	ts.window(src, ts.fine, TileAt{at.Col*TileSide - beside, at.Row*TileSide - above}, cols, rows, false)
	first, stride := int(above*cols+beside), int(row*cols+col)
	kernel.SpreadRows(out, ts.fine, first, stride, TileSide, int(cols), ts.taps.weight)
	return true
}

// mostCopied is how many cells spreadTile copies for a tile at most: beyond, which
// is long directions alone, it costs more than to gather tap by tap.
const mostCopied = 16 * tileCells

// gather adds weight times the masses at (col-dc, row-dr) to the tile at.
func (ts *tileSpace) gather(out []float64, at TileAt, src *Tiles, dc, dr int32, weight float64) {
	col0 := at.Col*TileSide - dc
	row0 := at.Row*TileSide - dr
	tc, tr := floorDiv(col0, TileSide), floorDiv(row0, TileSide)
	oc, or := int(col0-tc*TileSide), int(row0-tr*TileSide)
	for half := range int32(2) { // the rows lie in up to two tiles
		r0, r1 := 0, TileSide-or // rows of out
		if half == 1 {
			r0, r1 = TileSide-or, TileSide
		}
		if r0 >= r1 {
			continue
		}
		for side := range int32(2) {
			c0, c1 := 0, TileSide-oc
			if side == 1 {
				c0, c1 = TileSide-oc, TileSide
			}
			if c0 >= c1 {
				continue
			}
			j, ok := ts.index[TileAt{tc + side, tr + half}]
			if !ok {
				continue
			}
			from := src.tile(int(j))
			for r := r0; r < r1; r++ {
				sr := (r + or) % TileSide
				sc := (c0 + oc) % TileSide
				a := from[sr*TileSide+sc : sr*TileSide+sc+c1-c0]
				o := out[r*TileSide+c0 : r*TileSide+c1]
				for x, v := range a {
					o[x] += float64(weight * v)
				}
			}
		}
	}
}

// dilate sets ts.spare.At to the tiles that mass of src can reach with
// ts.taps, and ts.index to the tiles of src.
func (ts *tileSpace) dilate(src *Tiles) {
	reach := int32(len(ts.taps.weight) - 1)
	// Along an axis the reach is all tiles between; along another direction
	// only those that a tap falls on.
	by, dc, dr := reach, ts.taps.col, ts.taps.row
	if abs32(dc)+abs32(dr) == 1 {
		by, dc, dr = 0, reach*abs32(dc), reach*abs32(dr)
	}
	if ts.index == nil {
		ts.index = map[TileAt]int32{}
	}
	clear(ts.index)
	at := ts.spare.At[:0]
	for i, t := range src.At {
		ts.index[t] = int32(i)
		lo, hi, any := occupied(src.tile(i))
		if !any {
			continue
		}
		cover := func(lo, hi TileAt) {
			for r := floorDiv(lo.Row, TileSide); r <= floorDiv(hi.Row, TileSide); r++ {
				for c := floorDiv(lo.Col, TileSide); c <= floorDiv(hi.Col, TileSide); c++ {
					at = append(at, TileAt{t.Col + c, t.Row + r})
				}
			}
		}
		if by == 0 {
			cover(TileAt{lo.Col - dc, lo.Row - dr}, TileAt{hi.Col + dc, hi.Row + dr})
		}
		for n := -by; n <= by && by > 0; n++ {
			cover(TileAt{lo.Col + n*dc, lo.Row + n*dr}, TileAt{hi.Col + n*dc, hi.Row + n*dr})
		}
	}
	ts.spare.At = ts.sorted(at)
}

// appendTiles appends the tiles between two cells.
func appendTiles(at []TileAt, lo, hi TileAt) []TileAt {
	for r := floorDiv(lo.Row, TileSide); r <= floorDiv(hi.Row, TileSide); r++ {
		for c := floorDiv(lo.Col, TileSide); c <= floorDiv(hi.Col, TileSide); c++ {
			at = append(at, TileAt{c, r})
		}
	}
	return at
}

// sortedTiles sorts tiles and drops doubles, in place.
func sortedTiles(at []TileAt) []TileAt {
	slices.SortFunc(at, compareTiles)
	return slices.Compact(at)
}

// sorted is sortedTiles, by marking them where they lie in the box around all, if that
// is small beside them.
func (ts *tileSpace) sorted(at []TileAt) []TileAt {
	if len(at) == 0 {
		return at
	}
	lo, hi := at[0], at[0]
	for _, t := range at {
		lo = TileAt{min(lo.Col, t.Col), min(lo.Row, t.Row)}
		hi = TileAt{max(hi.Col, t.Col), max(hi.Row, t.Row)}
	}
	cols, rows := int64(hi.Col)-int64(lo.Col)+1, int64(hi.Row)-int64(lo.Row)+1
	if most := 4 * int64(len(at)); cols > most || rows > most || cols*rows > most {
		return sortedTiles(at)
	}
	ts.marked = resize(ts.marked, int(cols*rows))
	clear(ts.marked)
	for _, t := range at {
		ts.marked[int(t.Row-lo.Row)*int(cols)+int(t.Col-lo.Col)] = true
	}
	at = at[:0]
	for i, m := range ts.marked {
		if m {
			at = append(at, TileAt{lo.Col + int32(i%int(cols)), lo.Row + int32(i/int(cols))})
		}
	}
	return at
}

// occupied returns the first and last column and row with mass.
func occupied(tile []float64) (lo, hi TileAt, any bool) {
	if tile[0] > 0 && tile[tileCells-1] > 0 {
		return TileAt{}, TileAt{TileSide - 1, TileSide - 1}, true
	}
	lo, hi = TileAt{TileSide, TileSide}, TileAt{-1, -1}
	for r := range int32(TileSide) {
		row := tile[r*TileSide : (r+1)*TileSide]
		first, last := int32(0), int32(TileSide-1)
		for first < TileSide && !(row[first] > 0) {
			first++
		}
		if first == TileSide {
			continue
		}
		for !(row[last] > 0) {
			last--
		}
		lo.Col, hi.Col = min(lo.Col, first), max(hi.Col, last)
		lo.Row, hi.Row = min(lo.Row, r), r
	}
	return lo, hi, hi.Row >= 0
}

// dropTiles zeroes cells below cellFloor, removes empty tiles and counts what
// goes.
func (b *Belief) dropTiles() {
	t := &b.Tiles
	j := 0
	for i := range t.At {
		if !b.dropFaint(t.tile(i)) {
			continue
		}
		if i != j {
			t.At[j] = t.At[i]
			copy(t.tile(j), t.tile(i))
		}
		j++
	}
	t.At, t.Mass = t.At[:j], t.Mass[:j*tileCells]
}

func positive(v float64) bool { return v > 0 }

// dropEmptyTiles removes tiles without mass.
func (b *Belief) dropEmptyTiles() {
	t := &b.Tiles
	j := 0
	for i := range t.At {
		if !slices.ContainsFunc(t.tile(i), positive) {
			continue
		}
		if i != j {
			t.At[j] = t.At[i]
			copy(t.tile(j), t.tile(i))
		}
		j++
	}
	t.At, t.Mass = t.At[:j], t.Mass[:j*tileCells]
}

func abs32(a int32) int32 { return max(a, -a) }
