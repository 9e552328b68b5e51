package filter

// A measurement that the spacing makes less sharp than it is (leastSigma) does
// more than leave a belief wide where modes far apart compete: false ones live
// longer. The belief's scale does not see it, which is the mean over all its
// modes, and most of the mass may lie where a measurement says little. So such a
// belief is sharpened until fewer than bluntCells of its cells make a measurement
// blunt. Its modes are far apart when its standard deviation is apartScales times
// its scale.
const (
	bluntCells  = 0.01
	apartScales = 10
)

// blunts reports whether the cells make the measurement blunt whose outcome is
// t, and whether cells of twice the size would; cells and scale are those of t.
func (w *Workspace) blunts(t *Tiles, cells int, scale float64) (now, twice bool) {
	if len(w.blunt) == 0 {
		return false, false
	}
	if m := t.moments(); m.ee+m.nn < m.mass*square(apartScales*scale) {
		return false, false
	}
	here, there := 0, 0
	for i, q := range t.Mass {
		if q < cellFloor {
			continue
		}
		if w.blunt[i] > 1 {
			here++
		}
		if w.blunt[i] > 1./4 {
			there++
		}
	}
	most := bluntCells * float64(cells)
	return float64(here) > most, float64(there) > most
}

// keepCells is how far around what a measurement leaves the cells stay when a
// lattice is sharpened: those that interpolation reaches, with one to spare. Nearer
// the edge it would change the prior, by up to a tenth, and so the weight of modes
// that are a few cells across.
const keepCells = 3

// keepNear marks in w.keep the cells within keepCells of one to which the outcome
// in w.scratch leaves something, and counts what it leaves to the others.
func (b *Belief) keepNear(w *Workspace) {
	t := &b.Tiles
	w.tiles.indexTiles(t)
	w.keep = resize(w.keep, len(t.Mass))
	clear(w.keep)
	mark := func(tile int, rows, cols [2]int32) {
		for r := rows[0]; r <= rows[1]; r++ {
			row := w.keep[tile*tileCells+int(r)*TileSide:]
			for c := cols[0]; c <= cols[1]; c++ {
				row[c] = true
			}
		}
	}
	for i, at := range t.At {
		for x, q := range w.scratch[i*tileCells : (i+1)*tileCells] {
			if q < cellFloor {
				continue
			}
			c, r := int32(x%TileSide), int32(x/TileSide)
			for dr := int32(-1); dr <= 1; dr++ {
				rows := [2]int32{max(r-keepCells-dr*TileSide, 0), min(r+keepCells-dr*TileSide, TileSide-1)}
				for dc := int32(-1); dc <= 1; dc++ {
					cols := [2]int32{max(c-keepCells-dc*TileSide, 0), min(c+keepCells-dc*TileSide, TileSide-1)}
					if rows[0] > rows[1] || cols[0] > cols[1] {
						continue
					}
					if dr == 0 && dc == 0 {
						mark(i, rows, cols)
					} else if j, ok := w.tiles.index[TileAt{at.Col + dc, at.Row + dr}]; ok {
						mark(int(j), rows, cols)
					}
				}
			}
		}
	}
	for i, q := range w.scratch {
		if !w.keep[i] {
			b.Pruned += q
		}
	}
}
