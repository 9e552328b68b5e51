package filter

// Blend makes a belief on lines the mixture of itself and a share of another
// one over the same cells and quantities.
func Blend(b, other *Belief, share float64, space LineSpace, w *Workspace) {
	if b.Map != other.Map || b.Level != other.Level || len(b.Quantities) != len(other.Quantities) || b.Map != space.Fingerprint() {
		panic("filter: a blend of beliefs over different cells")
	}
	k := len(b.Quantities)
	w.out.reset()
	var g gaussian
	add := func(from *Gaussians, part float64) {
		for i, key := range from.Key {
			from.load(&g, i, k)
			g.mass *= part
			w.out.push(key, k, &g)
		}
	}
	add(&b.Gaussians, 1-share)
	add(&other.Gaussians, share)
	b.Pruned += share * other.Pruned
	b.LeftMap += share * other.LeftMap
	w.merger.merge(&b.Gaussians, &w.out, k, angularMask(b.Quantities), perCell(1), nil)
	b.thin(nil)
}
