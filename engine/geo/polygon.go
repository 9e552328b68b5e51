package geo

// Inside reports whether a point lies inside a polygon: an odd number of ring
// edges crosses the ray to the east (even-odd rule, so that the rings after
// the first are holes). Rings may be closed or open.
func Inside(p Point, rings [][]Point) bool {
	in := false
	for _, ring := range rings {
		for i, a := range ring {
			b := ring[(i+1)%len(ring)]
			if (a.N > p.N) != (b.N > p.N) && p.E < a.E+(p.N-a.N)/(b.N-a.N)*(b.E-a.E) {
				in = !in
			}
		}
	}
	return in
}
