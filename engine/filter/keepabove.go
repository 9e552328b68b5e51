package filter

import "math"

// surelyAbove is beyond how many standard deviations a Gaussian counts as being on one
// side: 2e-4 of it is not.
const surelyAbove = 3.5

// KeepAbove keeps a quantity that is no angle from falling below a bound, in place: each
// Gaussian takes the moments of its part above it, and keeps its mass. So a random walk
// is reflected. What lies below altogether is brought to the bound.
//
// Source: the moments of a truncated normal distribution, see between; as a constraint
// on a Kalman filter, Simon & Simon, Int. J. Syst. Sci. 41 (2010).
func KeepAbove(b *Belief, name string, bound float64) {
	d, k := Index(b.Quantities, name), len(b.Quantities)
	if d < b.Dim {
		return
	}
	var g, above gaussian
	var whole cutting
	p := k * (k + 1) / 2
	for i := range b.Key {
		mean, variance := b.Mean[i*k+d], b.Cov[i*p+Packed(d, d)]
		if mean-bound > surelyAbove*math.Sqrt(variance) || !(variance > 0) {
			continue
		}
		b.load(&g, i, k)
		whole.begin(&g, k, d)
		// Far below, the share is 0: what is left are the last digits of a tail.
		z := math.Min((bound-mean)/whole.sigma, 6)
		c := between(edgeAt(z), edge{z: math.Inf(1)})
		whole.piece(&above, k, c)
		above.mass = g.mass
		b.store(&above, i, k)
	}
}
