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
	w.out.reset()
	for i, key := range b.Key {
		chart, cell := LineCell(key)
		var g gaussian
		b.load(&g, i, k)
		pos := float64((float64(cell)+0.5)*old.WidthM[chart]) + g.mean[0]
		h := now.WidthM[chart]
		c := int32(math.Min(math.Max(pos/h, 0), float64(now.Cells[chart]-1)))
		g.mean[0] = pos - float64((float64(c)+0.5)*h)
		w.out.push(LineKey(chart, c), k, &g)
	}
	b.Level = level
	w.merger.merge(&b.Gaussians, &w.out, k, angularMask(b.Quantities), perCell(b.Dim), nil)
}
