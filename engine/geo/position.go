package geo

import (
	"fmt"
	"math"
)

// LonLat is a geodetic position in radians: longitude east, latitude north.
// The datum is WGS 84 unless the context names another.
type LonLat struct{ Lon, Lat float64 }

// FromDegrees makes a position from degrees.
func FromDegrees(lonDeg, latDeg float64) LonLat { return LonLat{Rad(lonDeg), Rad(latDeg)} }

// Degrees returns longitude and latitude in degrees.
func (p LonLat) Degrees() (lonDeg, latDeg float64) { return Deg(p.Lon), Deg(p.Lat) }

// Check reports a position that is no place on the globe: a latitude beyond
// ±90° or a longitude beyond ±180°, NaN or infinite.
func (p LonLat) Check() error {
	lon, lat := p.Degrees()
	// The slack is one rounding of the degree conversion.
	if !(math.Abs(lat) <= 90+1e-12) || !(math.Abs(lon) <= 180+1e-12) {
		return fmt.Errorf("position lon %v, lat %v is not on the globe: longitude must be within ±180°, latitude within ±90° (are they swapped?)", lon, lat)
	}
	return nil
}

// Point is a position in a metric frame: metres along the frame's east and
// north.
type Point struct{ E, N float64 }

// Sub returns p - q.
func (p Point) Sub(q Point) Point { return Point{p.E - q.E, p.N - q.N} }

// Add returns p + q.
func (p Point) Add(q Point) Point { return Point{p.E + q.E, p.N + q.N} }

// Norm returns the length of p as a vector, in metres.
func (p Point) Norm() float64 { return math.Sqrt(float64(p.E*p.E) + float64(p.N*p.N)) }

// Box is an axis-parallel rectangle in a metric frame.
type Box struct{ Min, Max Point }

// EmptyBox contains nothing and grows by Extend.
func EmptyBox() Box {
	inf := math.Inf(1)
	return Box{Point{inf, inf}, Point{-inf, -inf}}
}

// Extend returns the smallest box that holds b and p.
func (b Box) Extend(p Point) Box {
	return Box{
		Point{math.Min(b.Min.E, p.E), math.Min(b.Min.N, p.N)},
		Point{math.Max(b.Max.E, p.E), math.Max(b.Max.N, p.N)},
	}
}

// Contains reports whether p lies in b, edges included.
func (b Box) Contains(p Point) bool {
	return p.E >= b.Min.E && p.E <= b.Max.E && p.N >= b.Min.N && p.N <= b.Max.N
}
