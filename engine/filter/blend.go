package filter

// Blend makes a belief on lines the mixture of itself and a share of another
// one over the same cells and quantities.
func Blend(b, other *Belief, share float64, space LineSpace, w *Workspace) {
	if b.Map != other.Map || b.Level != other.Level || len(b.Quantities) != len(other.Quantities) || b.Map != space.Fingerprint() {
		panic("filter: a blend of beliefs over different cells")
	}
	k := len(b.Quantities)
	u := w.turn(b, regrouped)
	mv := mover{dim: 1}
	mv.follow(u)
	w.out.reset()
	var g gaussian
	add := func(from *Gaussians, part float64) {
		for i, key := range from.Key {
			from.load(&g, i, k)
			g.mass *= part
			w.out.push(key, k, &g)
			mv.index, mv.from[0] = -1, g.mean[0]
			if from == &b.Gaussians {
				mv.index = int32(i)
			}
			mv.note(g.mean[:])
		}
	}
	add(&b.Gaussians, 1-share)
	add(&other.Gaussians, share)
	b.Pruned += share * other.Pruned
	b.LeftMap += share * other.LeftMap
	into := w.intoFor(u, len(w.out.Key))
	w.merger.merge(&b.Gaussians, &w.out, k, angularMask(b.Quantities), perCell(1), into)
	w.end(u, b, &w.out, into, mv.source, mv.offset)
	b.thin(w)
}
