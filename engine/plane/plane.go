// Package plane is the plane as a space: a metric frame with a height field
// under it, or with none.
package plane

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// Plane is a filter.PlaneSpace. It is immutable and may be shared.
type Plane struct {
	fingerprint string
	frame       geo.Frame
	field       geo.Field
	bounds      geo.Box
	detailM     float64
}

var _ filter.PlaneSpace = (*Plane)(nil)

// Over makes the plane of a height field. detailM is the distance over which
// the heights change, usually the raster's own spacing.
func Over(field geo.Field, fingerprint string, detailM float64) *Plane {
	if !(detailM > 0) {
		panic("plane: the detail must be positive")
	}
	return &Plane{fingerprint, field.Frame(), field, field.Bounds(), detailM}
}

// Open makes a plane without heights around an origin: halfM metres to each
// side, at most 200 km, where the frame's scale error reaches 5e-4.
func Open(origin geo.LonLat, halfM, detailM float64) *Plane {
	if !(halfM > 0 && halfM <= 200e3) || !(detailM > 0) {
		panic("plane: the half width must be in (0, 200 km] and the detail positive")
	}
	return &Plane{
		fingerprint: "open plane",
		frame:       geo.NewFrame(origin),
		bounds:      geo.Box{Min: geo.Point{E: -halfM, N: -halfM}, Max: geo.Point{E: halfM, N: halfM}},
		detailM:     detailM,
	}
}

// Fingerprint implements filter.Space.
func (p *Plane) Fingerprint() string { return p.fingerprint }

// Frame implements filter.Space.
func (p *Plane) Frame() geo.Frame { return p.frame }

// Bounds implements filter.PlaneSpace.
func (p *Plane) Bounds() geo.Box { return p.bounds }

// DetailM implements filter.PlaneSpace.
func (p *Plane) DetailM() float64 { return p.detailM }

// HasHeights reports whether there is a height field.
func (p *Plane) HasHeights() bool { return p.field != nil }

// Sample implements filter.PlaneSpace. Without a field every height is
// unknown.
func (p *Plane) Sample(dst *filter.Columns) {
	if dst.Wants&filter.WantHeight == 0 {
		return
	}
	if p.field == nil {
		for i := range dst.Height {
			dst.Height[i] = math.NaN()
			dst.SlopeE[i], dst.SlopeN[i], dst.HeightVar[i] = 0, 0, 0
		}
		return
	}
	p.field.Sample(geo.Heights{HeightM: dst.Height, SlopeE: dst.SlopeE, SlopeN: dst.SlopeN, VarianceM2: dst.HeightVar}, dst.East, dst.North)
}
