package filter

// updateTiles weighs the lattice's cells.
func (b *Belief) updateTiles(space PlaneSpace, l any, w *Workspace) (float64, error) {
	b.logTiles(space, l, w)
	_, logEvidence, err := w.outcome(b.Tiles.Mass, cellFloor)
	if err == nil {
		b.weighed(w)
	}
	return logEvidence, err
}

// logTiles writes the log likelihood of every cell into w.logs.
func (b *Belief) logTiles(space PlaneSpace, l any, w *Workspace) {
	t := &b.Tiles
	w.logs = resize(w.logs, len(t.Mass))
	ev := newEvaluation(l, b.Lattice.SpacingM)
	w.blunt = w.blunt[:0]
	if ev.linear {
		w.blunt = resize(w.blunt, len(t.Mass))
	}
	p := w.asked()
	turned, _ := l.(Turned)
	w.predictions.reset()
	w.predictions.least = true
	for i := range t.At {
		logs := w.logs[i*tileCells : (i+1)*tileCells]
		clear(logs)
		tile := t.tile(i)
		w.locateCells(ev.wants, b.Lattice, t.At[i], tile)
		space.Sample(&w.at)
		w.logsOf(&ev)
		for j, x := range w.cells {
			logs[x] = w.cellLogs[j]
		}
		if !ev.linear {
			continue
		}
		blunt := w.blunt[i*tileCells : (i+1)*tileCells]
		ev.nw.bluntAll(blunt, w.cells, &w.terms, ev.least)
		if p != nil {
			for j, x := range w.cells {
				m := ev.nw.m
				w.predictions.add(tile[x], &w.terms, j, m, w.terms.ofPosition(j, m, ev.least), &w.at, turned)
			}
		}
	}
	if p != nil && ev.linear {
		_, circular := l.(Circular)
		w.predictions.into(p, &ev.noise, ev.nw.m, circular)
	}
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
	b.dropTiles()
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

// locateCells sets w.cells to the cells of a tile that have mass, and w.at to their
// centres.
func (w *Workspace) locateCells(wants Wants, l Lattice, t TileAt, tile []float64) {
	w.cells = resize(w.cells, tileCells)
	n := 0
	for x, v := range tile {
		w.cells[n] = uint16(x)
		if v != 0 {
			n++
		}
	}
	w.cells = w.cells[:n]
	east, north := l.axes(t)
	w.at.Resize(wants, 2, n)
	if n == tileCells {
		for r, y := range north {
			row := w.at.North[r*TileSide:][:TileSide]
			for c := range row {
				row[c] = y
			}
			copy(w.at.East[r*TileSide:], east[:])
		}
		return
	}
	for j, x := range w.cells {
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
