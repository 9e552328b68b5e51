package filter

import "math"

// Relevel moves a belief on lines to cells of another level, in place. Each
// Gaussian keeps its position and goes to the cell where that is; those that
// meet merge by moments. A wide Gaussian on finer cells is cut by the next
// Predict.
func Relevel(b *Belief, space LineSpace, level int, w *Workspace) {
	if level == b.Level {
		return
	}
	k := len(b.Quantities)
	old, now := space.Lines(b.Level), space.Lines(level)
	u := w.turn(b, regrouped)
	mv := mover{dim: 1}
	mv.follow(u)
	w.out.reset()
	for i, key := range b.Key {
		chart, cell := LineCell(key)
		var g gaussian
		b.load(&g, i, k)
		pos := float64((float64(cell)+0.5)*old.WidthM[chart]) + g.mean[0]
		h := now.WidthM[chart]
		c := int32(math.Min(math.Max(pos/h, 0), float64(now.Cells[chart]-1)))
		mv.index, mv.from[0] = int32(i), g.mean[0]
		g.mean[0] = pos - float64((float64(c)+0.5)*h)
		w.out.push(LineKey(chart, c), k, &g)
		mv.note(g.mean[:])
	}
	b.Level = level
	into := w.intoFor(u, len(w.out.Key))
	w.merger.merge(&b.Gaussians, &w.out, k, angularMask(b.Quantities), perCell(b.Dim), into)
	w.end(u, b, &w.out, into, mv.source, mv.offset)
}
