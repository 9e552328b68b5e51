package kernel

import "math"

// Beyond sums up, over needles, the parts of them outside a circle of squared radius
// r2: mass·min(excess·(Q((c-v)/σ) + Q((c+v)/σ)), 1) with c = √(r2 - w2) and Q by
// QuickUpper, and all of mass where c is not above 0. A needle is a normal distribution
// of mass along a line at the squared distance w2 from the circle's middle, v ≥ 0 from
// the foot of that, and is = 1/σ. Element i goes into sum i%4, and these are added at
// the end.
func Beyond(mass, w2, v, is []float64, r2, excess float64) float64 {
	n := len(mass)
	var sum [4]float64
	beyond(&sum, mass, w2[:n], v[:n], is[:n], r2, excess)
	return (sum[0] + sum[1]) + (sum[2] + sum[3])
}

// beyondPlain is Beyond in plain Go, from index i on.
func beyondPlain(sum *[4]float64, mass, w2, v, is []float64, r2, excess float64, i int) {
	for ; i < len(mass); i++ {
		m, c2 := mass[i], r2-w2[i]
		if c2 > 0 {
			c := math.Sqrt(c2)
			near := (c - v[i]) * is[i]
			if near >= QuickEnd {
				continue
			}
			p := QuickUpper(near)
			if far := (c + v[i]) * is[i]; far < QuickEnd {
				p += QuickUpper(far)
			}
			m *= math.Min(excess*p, 1)
		}
		sum[i%4] += m
	}
}
