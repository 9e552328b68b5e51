package filter

import (
	"math"

	"leadline/engine/kernel"
)

// updateTiles weighs the lattice's cells.
func (b *Belief) updateTiles(space PlaneSpace, l any, w *Workspace) (float64, error) {
	left := b.weighTiles(space, l, false, w)
	_, logEvidence, err := w.outcomeOf(left, b.Tiles.Mass, cellFloor)
	if err == nil {
		b.weighed(w)
	}
	return logEvidence, err
}

// left is what a likelihood leaves of a lattice's cells: products with densities in
// w.scratch, or else logs of likelihoods in w.logs.
type left struct {
	products    bool
	sum, before float64 // of the products and of the masses
}

// leastSum is the least sum of products that is taken: what has underflowed is then 1e-158
// of all, at most. Below it a likelihood is taken by its logs.
const leastSum = 1e-150

// weighTiles takes a likelihood at every cell: as products with its densities where the
// noise is simple, which is less than half the work of logs. blunt asks for w.blunt.
func (b *Belief) weighTiles(space PlaneSpace, l any, blunt bool, w *Workspace) left {
	ev := newEvaluation(l, b.Lattice.SpacingM)
	p := w.asked()
	t := &b.Tiles
	w.blunt = w.blunt[:0]
	if blunt && ev.linear {
		w.blunt = resize(w.blunt, len(t.Mass))
	}
	if ev.linear && ev.nw.simple() {
		w.scratch = resize(w.scratch, len(t.Mass))
		of := ev.likely()
		all := left{products: true}
		b.atCells(space, l, &ev, p, w, func(tile int, cells []uint16, whole bool) {
			dst := w.scratch[tile*tileCells : (tile+1)*tileCells]
			if len(cells) == 0 {
				clear(dst)
				return
			}
			w.linearize(&ev)
			sum, before := w.product(dst, t.tile(tile), cells, whole, &of)
			all.sum += sum
			all.before += before
		})
		if !(all.sum <= math.MaxFloat64) {
			panic("filter: a likelihood returned NaN or +Inf")
		}
		if all.sum >= leastSum {
			return all
		}
	}
	b.logTiles(space, l, &ev, p, w)
	return left{}
}

// logTiles writes the log likelihood of every cell into w.logs.
func (b *Belief) logTiles(space PlaneSpace, l any, ev *evaluation, p *Predictive, w *Workspace) {
	w.logs = resize(w.logs, len(b.Tiles.Mass))
	clear(w.logs)
	b.atCells(space, l, ev, p, w, func(tile int, cells []uint16, _ bool) {
		if len(cells) == 0 {
			return
		}
		w.logsOf(ev)
		logs := w.logs[tile*tileCells : (tile+1)*tileCells]
		for j, x := range cells {
			logs[x] = w.cellLogs[j]
		}
	})
}

// atCells has use take the cells with mass at the places of w.at: all those of a tile,
// which may be none, or, where all of them have some, whole rows. It is to set w.terms where
// the likelihood is linear and there are cells. It writes w.blunt unless that is empty, and
// p unless it is nil.
func (b *Belief) atCells(space PlaneSpace, l any, ev *evaluation, p *Predictive, w *Workspace, use func(tile int, cells []uint16, whole bool)) {
	t := &b.Tiles
	turned, _ := l.(Turned)
	w.predictions.reset()
	w.predictions.least = true
	for i := range t.At {
		tile := t.tile(i)
		east, north := b.Lattice.axes(t.At[i])
		cells := everyCell[:]
		some, whole := cellsAtOnce, kernel.Dense(tile)
		if !whole {
			cells = w.withMass(tile)
			if some = len(cells); some == 0 {
				use(i, nil, false)
			}
		}
		if len(w.blunt) > 0 {
			clear(w.blunt[i*tileCells : (i+1)*tileCells])
		}
		for len(cells) > 0 {
			now := cells[:min(some, len(cells))]
			cells = cells[len(now):]
			w.locateCells(ev.wants, &east, &north, now)
			space.Sample(&w.at)
			use(i, now, whole)
			if !ev.linear {
				continue
			}
			if len(w.blunt) > 0 {
				ev.nw.bluntAll(w.blunt[i*tileCells:(i+1)*tileCells], now, &w.terms, ev.least)
			}
			if p != nil {
				for j, x := range now {
					m := ev.nw.m
					w.predictions.add(tile[x], &w.terms, j, m, w.terms.ofPosition(j, m, ev.least), &w.at, turned)
				}
			}
		}
	}
	if p != nil && ev.linear {
		_, circular := l.(Circular)
		w.predictions.into(p, &ev.noise, ev.nw.m, circular)
	}
}

// cellsAtOnce are as many cells of a tile that is full, whole rows, as stay in the first
// cache with all that is computed of them.
const cellsAtOnce = 8 * TileSide

// everyCell are all cells of a tile.
var everyCell = func() (cells [tileCells]uint16) {
	for x := range cells {
		cells[x] = uint16(x)
	}
	return cells
}()

// product writes masses of a tile's cells times densities into dst, and 0 for the others
// unless there are none.
func (w *Workspace) product(dst, tile []float64, cells []uint16, whole bool, of *kernel.Likely) (sum, before float64) {
	t, n := &w.terms, len(cells)
	if whole {
		from, to := cells[0], int(cells[n-1])+1
		return of.Weigh(dst[from:to], tile[from:to], t.Residual, t.Row, t.Extra, t.Flat, leastMass)
	}
	w.cellLogs = resize(w.cellLogs, n)
	for j, x := range cells {
		w.cellLogs[j] = tile[x]
	}
	sum, before = of.Weigh(w.cellLogs, w.cellLogs, t.Residual, t.Row, t.Extra, t.Flat, leastMass)
	clear(dst)
	for j, x := range cells {
		dst[x] = w.cellLogs[j]
	}
	return sum, before
}

// outcomeOf is outcome by what a likelihood left; w.faint says whether some cells of the outcome
// are below floor or some tiles empty.
func (w *Workspace) outcomeOf(l left, mass []float64, floor float64) (n int, logEvidence float64, err error) {
	if !l.products {
		w.faint = true
		return w.outcome(mass, floor)
	}
	w.faint = false
	scale := 1 / l.sum
	for i := 0; i < len(w.scratch); i += tileCells {
		some, enough := kernel.Scale(w.scratch[i:i+tileCells], scale, floor)
		n += enough
		w.faint = w.faint || some == 0 || enough < some
	}
	return n, kernel.Log(l.sum / l.before), nil
}

// weighed makes the outcome in w.scratch the cells' masses.
func (b *Belief) weighed(w *Workspace) {
	t := &b.Tiles
	owes := t.Surplus != [3]float64{}
	var prior latticeMoments
	if owes {
		prior = b.latticeMoments()
	}
	t.Mass, w.scratch = w.scratch, t.Mass
	before := b.Pruned
	if w.faint {
		b.dropTiles()
	}
	if lost := b.Pruned - before; lost > 0 {
		scale := 1 / (1 - lost)
		for i := range t.Mass {
			t.Mass[i] *= scale
		}
	}
	if owes {
		t.Surplus = contract(t.Surplus, prior, b.latticeMoments())
	}
}

// withMass returns the cells of a tile that have mass.
func (w *Workspace) withMass(tile []float64) []uint16 {
	w.cells = resize(w.cells, tileCells)
	n := 0
	for x, v := range tile {
		w.cells[n] = uint16(x)
		if v != 0 {
			n++
		}
	}
	return w.cells[:n]
}

// locateCells sets w.at to the centres of cells of a tile that has these axes.
func (w *Workspace) locateCells(wants Wants, east, north *[TileSide]float64, cells []uint16) {
	w.at.Resize(wants, 2, len(cells))
	if len(cells) == cellsAtOnce {
		if first := int(cells[0]); int(cells[cellsAtOnce-1])-first == cellsAtOnce-1 && first%TileSide == 0 {
			for r := range cellsAtOnce / TileSide {
				fill(w.at.North[r*TileSide:][:TileSide], north[first/TileSide+r])
				copy(w.at.East[r*TileSide:], east[:])
			}
			return
		}
	}
	for j, x := range cells {
		w.at.East[j], w.at.North[j] = east[x%TileSide], north[x/TileSide]
	}
}

// axes are the places of a tile's columns and rows.
func (l Lattice) axes(t TileAt) (east, north [TileSide]float64) {
	for c := range int32(TileSide) {
		centre := l.Centre(t.Col*TileSide+c, t.Row*TileSide+c)
		east[c], north[c] = centre.E, centre.N
	}
	return east, north
}
