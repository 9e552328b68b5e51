package wire

import (
	"fmt"

	"google.golang.org/protobuf/proto"

	"leadline/engine/geo"
	leadlinev1 "leadline/proto/leadline/v1"
)

// lonLat is a message with a position in it.
type lonLat interface {
	GetLon() float64
	GetLat() float64
}

func position(m lonLat, hasLon, hasLat bool) (geo.LonLat, error) {
	switch {
	case !hasLon:
		return geo.LonLat{}, fmt.Errorf("lon is missing: give degrees east")
	case !hasLat:
		return geo.LonLat{}, fmt.Errorf("lat is missing: give degrees north")
	}
	p := geo.FromDegrees(m.GetLon(), m.GetLat())
	return p, p.Check()
}

// Position converts a position, which must be on the globe.
func Position(m *leadlinev1.Position) (geo.LonLat, error) {
	if m == nil {
		return geo.LonLat{}, fmt.Errorf("missing: give lon and lat")
	}
	return position(m, m.Lon != nil, m.Lat != nil)
}

// FromPosition is the inverse of Position.
func FromPosition(p geo.LonLat) *leadlinev1.Position {
	return &leadlinev1.Position{Lon: proto.Float64(degrees(p.Lon)), Lat: proto.Float64(degrees(p.Lat))}
}

// Polygon converts an area: one ring at least, three points a ring, MaxPoints
// in all. They may cross, as in what was taken earlier: see Area.
func Polygon(m *leadlinev1.Polygon) ([][]geo.LonLat, error) {
	if len(m.GetRings()) == 0 {
		return nil, fmt.Errorf("no ring: give the outside as rings[0].points")
	}
	n := 0
	for _, r := range m.GetRings() {
		if n += len(r.GetPoints()); n > MaxPoints {
			return nil, fmt.Errorf("more than %d points: simplify the outline", MaxPoints)
		}
	}
	rings := make([][]geo.LonLat, len(m.GetRings()))
	for i, r := range m.GetRings() {
		pts := r.GetPoints()
		if len(pts) < 3 {
			return nil, fmt.Errorf("rings[%d] has %d points: at least 3", i, len(pts))
		}
		rings[i] = make([]geo.LonLat, len(pts))
		for j, p := range pts {
			var err error
			if rings[i][j], err = Position(p); err != nil {
				return nil, fmt.Errorf("rings[%d].points[%d]: %w", i, j, err)
			}
		}
	}
	return rings, nil
}

// Area is Polygon of one of which the probability inside is asked: its rings must not
// cross themselves or each other.
func Area(m *leadlinev1.Polygon) ([][]geo.LonLat, error) {
	rings, err := Polygon(m)
	if err != nil {
		return nil, err
	}
	return rings, simple(rings)
}

// FromPolygon is the inverse of Polygon.
func FromPolygon(rings [][]geo.LonLat) *leadlinev1.Polygon {
	m := &leadlinev1.Polygon{Rings: make([]*leadlinev1.Ring, len(rings))}
	for i, r := range rings {
		pts := make([]*leadlinev1.Position, len(r))
		for j, p := range r {
			pts[j] = FromPosition(p)
		}
		m.Rings[i] = &leadlinev1.Ring{Points: pts}
	}
	return m
}
