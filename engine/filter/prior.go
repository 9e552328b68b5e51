package filter

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// Prior is a density over positions, known up to a factor, that is negligible
// outside a box.
type Prior interface {
	// Box holds all of the prior that matters; an infinite box is the map.
	Box() geo.Box
	// Density writes the density at the points (at.East, at.North), ≥ 0.
	Density(dst []float64, at *Columns)
}

// AtPoint is a prior around a point: a circular Gaussian with standard
// deviation SigmaM along each axis.
type AtPoint struct {
	Point  geo.Point
	SigmaM float64
}

// seedSigmas is how far a point prior reaches: beyond it lies less than 1e-9.
const seedSigmas = 6.5

// Box implements Prior.
func (p AtPoint) Box() geo.Box {
	r := seedSigmas * p.SigmaM
	return geo.Box{Min: geo.Point{E: p.Point.E - r, N: p.Point.N - r}, Max: geo.Point{E: p.Point.E + r, N: p.Point.N + r}}
}

// Density implements Prior.
func (p AtPoint) Density(dst []float64, at *Columns) {
	for i := range dst {
		d := geo.Point{E: at.East[i], N: at.North[i]}.Sub(p.Point)
		q := (float64(d.E*d.E) + float64(d.N*d.N)) / (p.SigmaM * p.SigmaM)
		dst[i] = 0
		if q < seedSigmas*seedSigmas {
			dst[i] = kernel.Exp(-0.5 * q)
		}
	}
}

// Within is a uniform prior over a polygon: an exterior ring and holes, as
// frame points.
type Within struct{ Rings [][]geo.Point }

// Box implements Prior.
func (p Within) Box() geo.Box {
	b := geo.EmptyBox()
	for _, ring := range p.Rings {
		for _, q := range ring {
			b = b.Extend(q)
		}
	}
	return b
}

// Density implements Prior.
func (p Within) Density(dst []float64, at *Columns) {
	for i := range dst {
		dst[i] = 0
		if geo.Inside(geo.Point{E: at.East[i], N: at.North[i]}, p.Rings) {
			dst[i] = 1
		}
	}
}

// leastExtent is the standard deviation of a prior along the direction in which
// that is least, m; +Inf of the whole map.
func leastExtent(p Prior) float64 {
	switch p := p.(type) {
	case AtPoint:
		return p.SigmaM
	case Within:
		c := p.covariance()
		if v := narrow(c[:]); v > 0 {
			return math.Sqrt(v)
		}
	}
	return math.Inf(1)
}

// covariance is that of a point drawn from the polygon, EE, EN, NN: by Green's
// theorem over its edges, which is exact. Rings after the first are holes,
// whichever way round they go.
func (p Within) covariance() [3]float64 {
	origin := p.Box().Min // so that far-off frames cost no digits
	var area float64
	var first [2]float64
	var second [3]float64
	for i, ring := range p.Rings {
		var a float64
		var m [2]float64
		var s [3]float64
		for j := range ring {
			u, v := ring[j].Sub(origin), ring[(j+1)%len(ring)].Sub(origin)
			cross := float64(u.E*v.N) - float64(v.E*u.N)
			a += cross / 2
			m[0] += float64(cross * (u.E + v.E) / 6)
			m[1] += float64(cross * (u.N + v.N) / 6)
			s[0] += float64(cross * (float64(u.E*u.E) + float64(u.E*v.E) + float64(v.E*v.E)) / 12)
			s[1] += float64(cross * (float64(u.E*v.N) + float64(2*u.E*u.N) + float64(2*v.E*v.N) + float64(v.E*u.N)) / 24)
			s[2] += float64(cross * (float64(u.N*u.N) + float64(u.N*v.N) + float64(v.N*v.N)) / 12)
		}
		sign := 1.0
		if (a < 0) != (i > 0) {
			sign = -1
		}
		area += float64(sign * a)
		for j := range m {
			first[j] += float64(sign * m[j])
		}
		for j := range s {
			second[j] += float64(sign * s[j])
		}
	}
	if !(area > 0) {
		return [3]float64{}
	}
	e, n := first[0]/area, first[1]/area
	return [3]float64{second[0]/area - float64(e*e), second[1]/area - float64(e*n), second[2]/area - float64(n*n)}
}

// Anywhere is a uniform prior over the whole map.
type Anywhere struct{}

// Box implements Prior.
func (Anywhere) Box() geo.Box {
	inf := math.Inf(1)
	return geo.Box{Min: geo.Point{E: -inf, N: -inf}, Max: geo.Point{E: inf, N: inf}}
}

// Density implements Prior.
func (Anywhere) Density(dst []float64, _ *Columns) {
	for i := range dst {
		dst[i] = 1
	}
}
