package filter

import (
	"math"

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

// advance sets g to the Gaussian of F x + add + w, w ~ N(0, q); f nil is the
// identity. only is the one row in which F differs from the identity, or -1 if
// there are several.
func (g *gaussian) advance(k int, f, add, q []float64, only int) {
	switch {
	case f == nil:
	case only >= 0:
		g.advanceRow(k, f[only*k:only*k+k], only)
	default:
		g.advanceAll(k, f)
	}
	for i := range k {
		g.mean[i] += add[i]
	}
	for i, v := range q {
		g.cov[i] += v
	}
}

// advanceRow replaces quantity d by row·x: the covariances of d alone change.
func (g *gaussian) advanceRow(k int, row []float64, d int) {
	var c [MaxK]float64 // C rowᵀ
	mean, v := 0.0, 0.0
	for j, f := range row {
		if f == 0 {
			continue
		}
		mean += float64(f * g.mean[j])
		for i := range k {
			c[i] += float64(f * g.at(i, j))
		}
	}
	for j, f := range row {
		v += float64(f * c[j])
	}
	g.mean[d] = mean
	for i := range k {
		if i < d {
			g.cov[Packed(d, i)] = c[i]
		} else {
			g.cov[Packed(i, d)] = c[i]
		}
	}
	g.cov[Packed(d, d)] = v
}

func (g *gaussian) advanceAll(k int, f []float64) {
	var fc [MaxK][MaxK]float64
	var mean [MaxK]float64
	for i := range k {
		row := f[i*k : i*k+k]
		sum := 0.0
		for j, v := range row {
			sum += float64(v * g.mean[j])
		}
		mean[i] = sum
		for j := range k {
			s := 0.0
			for l, v := range row {
				if v != 0 {
					s += float64(v * g.at(l, j))
				}
			}
			fc[i][j] = s
		}
	}
	for i := range k {
		for j := 0; j <= i; j++ {
			s := 0.0
			for l, v := range f[j*k : j*k+k] {
				if v != 0 {
					s += float64(fc[i][l] * v)
				}
			}
			g.cov[Packed(i, j)] = s
		}
	}
	g.mean = mean
}

// onlyRow returns the one row in which a k×k matrix differs from the identity,
// -1 if there are several.
func onlyRow(k int, f []float64) int {
	only := -1
	for i, v := range f {
		row, want := i/k, 0.0
		if row == i%k {
			want = 1
		}
		if v != want && row != only {
			if only >= 0 {
				return -1
			}
			only = row
		}
	}
	return max(only, 0)
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
	return cut{share, mean, math.Max(v, 0)}
}

// truncate returns g restricted to a cut of quantity d: mass, mean and
// covariance of the truncated distribution, by regression on d.
func (g *gaussian) truncate(k, d int, c cut) gaussian {
	r := *g
	r.mass = g.mass * c.share
	vd := g.cov[Packed(d, d)]
	sd := math.Sqrt(vd)
	shift := float64(sd * c.mean)
	var gain [MaxK]float64
	for i := range k {
		gain[i] = g.at(i, d) / vd
		r.mean[i] += float64(gain[i] * shift)
	}
	less := float64(vd * (1 - c.variance))
	for i := range k {
		for j := 0; j <= i; j++ {
			r.cov[Packed(i, j)] -= float64(float64(gain[i]*gain[j]) * less)
		}
	}
	return r
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
	share := h.mass / w
	var d [MaxK]float64
	for i := range k {
		d[i] = h.mean[i] - g.mean[i]
		if angular>>uint(i)&1 != 0 {
			d[i] = geo.WrapPi(d[i])
		}
		g.mean[i] += float64(share * d[i])
	}
	cross := float64(share * (1 - share))
	n := 0
	for i := range k {
		for j := 0; j <= i; j++ {
			g.cov[n] += float64(share*(h.cov[n]-g.cov[n])) + float64(cross*float64(d[i]*d[j]))
			n++
		}
	}
	g.mass = w
}

// push appends a Gaussian to the columns.
func (c *Gaussians) push(key uint64, k int, g *gaussian) {
	c.Key = append(c.Key, key)
	c.Mass = append(c.Mass, g.mass)
	c.Mean = append(c.Mean, g.mean[:k]...)
	c.Cov = append(c.Cov, g.cov[:k*(k+1)/2]...)
}

// reset empties the columns and keeps their memory.
func (c *Gaussians) reset() {
	c.Key, c.Mass, c.Mean, c.Cov = c.Key[:0], c.Mass[:0], c.Mean[:0], c.Cov[:0]
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
