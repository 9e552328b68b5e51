package filter

import (
	"math"
	"slices"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// MaxK is the largest number of quantities: small dense algebra on the stack
// is sized by it.
const MaxK = 8

const maxPacked = MaxK * (MaxK + 1) / 2

// gaussian is one Gaussian of a belief while it is being worked on.
type gaussian struct {
	mass float64
	mean [MaxK]float64
	cov  [maxPacked]float64 // packed
}

func (g *gaussian) at(i, j int) float64 {
	if i < j {
		i, j = j, i
	}
	return g.cov[Packed(i, j)]
}

// cut is what a Gaussian's quantity d looks like between two edges: the share
// of the mass there, and mean and variance in standard deviations.
type cut struct{ share, mean, variance float64 }

// edge is the standard normal at one edge: density, and the mass on the far
// side counted from the middle, so that small tails keep their digits.
type edge struct{ z, density, tail float64 }

func edgeAt(z float64) edge {
	return edge{z, kernel.NormalDensity(z), kernel.NormalUpper(math.Abs(z))}
}

// between returns the moments of a standard normal truncated to (a, b); ±Inf
// edges are given as edge{z: ±Inf}.
//
// Source: moments of the doubly truncated normal distribution (Johnson, Kotz
// & Balakrishnan, Continuous Univariate Distributions 1, §13.10.1).
func between(a, b edge) cut {
	var share float64
	switch {
	case a.z >= 0:
		share = a.tail - b.tail
	case b.z <= 0:
		share = b.tail - a.tail
	default:
		share = 1 - a.tail - b.tail
	}
	if !(share > 0) {
		return cut{}
	}
	mean := (a.density - b.density) / share
	az, bz := 0.0, 0.0
	if a.density > 0 {
		az = float64(a.z * a.density)
	}
	if b.density > 0 {
		bz = float64(b.z * b.density)
	}
	v := 1 + (az-bz)/share - float64(mean*mean)
	return cut{share, mean, max(v, 0)}
}

// cutting is a Gaussian that is cut along a quantity, with what all pieces share.
type cutting struct {
	whole    *gaussian
	variance float64
	sigma    float64
	gain     [MaxK]float64 // regression of the others on the quantity
}

func (c *cutting) begin(g *gaussian, k, d int) {
	c.whole = g
	c.variance = g.cov[Packed(d, d)]
	c.sigma = math.Sqrt(c.variance)
	for i := range k {
		c.gain[i] = g.at(i, d) / c.variance
	}
}

// piece writes the whole restricted to a cut into r: mass, mean and covariance of
// the truncated distribution.
func (c *cutting) piece(r *gaussian, k int, of cut) {
	g := c.whole
	r.mass = g.mass * of.share
	shift := float64(c.sigma * of.mean)
	less := float64(c.variance * (1 - of.variance))
	n := 0
	for i := range k {
		r.mean[i] = g.mean[i] + float64(c.gain[i]*shift)
		for j := 0; j <= i; j++ {
			r.cov[n] = g.cov[n] - float64(float64(c.gain[i]*c.gain[j])*less)
			n++
		}
	}
}

// shrink multiplies the standard deviation of quantity d by f and leaves the
// correlations.
func (g *gaussian) shrink(k, d int, f float64) {
	for i := range k {
		if i < d {
			g.cov[Packed(d, i)] *= f
		} else {
			g.cov[Packed(i, d)] *= f
		}
	}
	g.cov[Packed(d, d)] *= f
}

// absorb merges h into g by moments: mass, mean and covariance of the sum are
// kept. Angular quantities are averaged along the shorter arc.
func (g *gaussian) absorb(k int, h *gaussian, angular uint) {
	w := g.mass + h.mass
	if w == 0 {
		return
	}
	p := k * (k + 1) / 2
	absorb(g.mean[:k], g.cov[:p], h.mean[:k], h.cov[:p], h.mass/w, angular)
	g.mass = w
}

// absorb is gaussian.absorb of an entry of other columns into entry i.
func (c *Gaussians) absorb(i int, from *Gaussians, j, k int, angular uint) {
	w := c.Mass[i] + from.Mass[j]
	if w == 0 {
		return
	}
	p := k * (k + 1) / 2
	absorb(c.Mean[i*k:i*k+k], c.Cov[i*p:i*p+p], from.Mean[j*k:j*k+k], from.Cov[j*p:j*p+p], from.Mass[j]/w, angular)
	c.Mass[i] = w
}

// absorb merges mean and covariance of what has a share of both into those of the other.
func absorb(mean, cov, hMean, hCov []float64, share float64, angular uint) {
	var d [MaxK]float64
	for i, h := range hMean[:len(mean)] {
		d[i] = h - mean[i]
		if angular>>uint(i)&1 != 0 {
			d[i] = geo.WrapPi(d[i])
		}
		mean[i] += float64(share * d[i])
	}
	cross := float64(share * (1 - share))
	if len(mean) == 4 {
		absorbFour((*[10]float64)(cov), (*[10]float64)(hCov), share, cross, d[0], d[1], d[2], d[3])
		return
	}
	for i := range mean {
		row, hRow := cov[:i+1], hCov[:i+1]
		cov, hCov = cov[i+1:], hCov[i+1:]
		for j, v := range row {
			row[j] = v + (float64(share*(hRow[j]-v)) + float64(cross*float64(d[i]*d[j])))
		}
	}
}

// absorbFour merges covariances over four quantities, whose means differ by a to e.
func absorbFour(v, h *[10]float64, share, cross, a, b, d, e float64) {
	v[0] += float64(share*(h[0]-v[0])) + float64(cross*float64(a*a))
	v[1] += float64(share*(h[1]-v[1])) + float64(cross*float64(b*a))
	v[2] += float64(share*(h[2]-v[2])) + float64(cross*float64(b*b))
	v[3] += float64(share*(h[3]-v[3])) + float64(cross*float64(d*a))
	v[4] += float64(share*(h[4]-v[4])) + float64(cross*float64(d*b))
	v[5] += float64(share*(h[5]-v[5])) + float64(cross*float64(d*d))
	v[6] += float64(share*(h[6]-v[6])) + float64(cross*float64(e*a))
	v[7] += float64(share*(h[7]-v[7])) + float64(cross*float64(e*b))
	v[8] += float64(share*(h[8]-v[8])) + float64(cross*float64(e*d))
	v[9] += float64(share*(h[9]-v[9])) + float64(cross*float64(e*e))
}

// push appends a Gaussian to the columns.
func (c *Gaussians) push(key uint64, k int, g *gaussian) {
	c.add(key, g.mass, g.mean[:k], g.cov[:k*(k+1)/2])
}

// pushFrom appends entry i of other columns.
func (c *Gaussians) pushFrom(from *Gaussians, i, k int) {
	p := k * (k + 1) / 2
	c.add(from.Key[i], from.Mass[i], from.Mean[i*k:i*k+k], from.Cov[i*p:i*p+p])
}

// add appends a Gaussian; four quantities, as vehicles on roads have most often, without
// calls that copy.
func (c *Gaussians) add(key uint64, mass float64, mean, cov []float64) {
	c.Key = append(c.Key, key)
	c.Mass = append(c.Mass, mass)
	if len(mean) == 4 {
		v := (*[10]float64)(cov)
		c.Mean = append(c.Mean, mean[0], mean[1], mean[2], mean[3])
		c.Cov = append(c.Cov, v[0], v[1], v[2], v[3], v[4], v[5], v[6], v[7], v[8], v[9])
		return
	}
	c.Mean = append(c.Mean, mean...)
	c.Cov = append(c.Cov, cov...)
}

// store overwrites mean and covariance of entry i.
func (c *Gaussians) store(g *gaussian, i, k int) {
	p := k * (k + 1) / 2
	copy(c.Mean[i*k:i*k+k], g.mean[:k])
	copy(c.Cov[i*p:i*p+p], g.cov[:p])
}

// reset empties the columns and keeps their memory.
func (c *Gaussians) reset() {
	c.Key, c.Mass, c.Mean, c.Cov = c.Key[:0], c.Mass[:0], c.Mean[:0], c.Cov[:0]
}

// empty is reset with memory for n Gaussians over k quantities.
func (c *Gaussians) empty(n, k int) {
	c.reset()
	c.Key, c.Mass = slices.Grow(c.Key, n), slices.Grow(c.Mass, n)
	c.Mean, c.Cov = slices.Grow(c.Mean, n*k), slices.Grow(c.Cov, n*k*(k+1)/2)
}

// angularMask has bit i set if quantity i is angular.
func angularMask(qs []Quantity) (mask uint) {
	for i, q := range qs {
		if q.Angular {
			mask |= 1 << uint(i)
		}
	}
	return mask
}
