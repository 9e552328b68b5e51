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
