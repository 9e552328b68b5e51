package wire

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"leadline/engine/geo"
)

// edge is one of a ring, in degrees of the globe laid flat: from a to b, and how far
// it reaches.
type edge struct {
	west, east, south, north float64
	a, b                     geo.Point
	ring, at                 int // from rings[ring].points[at]
}

// simple refuses rings that cross themselves or each other: what is inside them is
// not one thing (RFC 7946 takes its polygons from OGC 06-103r4, where rings are
// simple). Rings may touch. Edges are taken in order of their west ends, so that
// most outlines cost little more than their length.
func simple(rings [][]geo.LonLat) error {
	var edges []edge
	first := rings[0][0]
	flat := func(p geo.LonLat) geo.Point {
		return geo.Point{E: math.Remainder(degrees(p.Lon)-degrees(first.Lon), 360), N: degrees(p.Lat)}
	}
	for r, ring := range rings {
		for i, p := range ring {
			a, b := flat(p), flat(ring[(i+1)%len(ring)])
			edges = append(edges, edge{min(a.E, b.E), max(a.E, b.E), min(a.N, b.N), max(a.N, b.N), a, b, r, i})
		}
	}
	slices.SortStableFunc(edges, func(x, y edge) int { return cmp.Compare(x.west, y.west) })
	for i := range edges {
		x := &edges[i]
		for j := i + 1; j < len(edges) && edges[j].west < x.east; j++ {
			if y := &edges[j]; y.south < x.north && x.south < y.north && cross(x, y) {
				return fmt.Errorf("the outline crosses itself: the edge from rings[%d].points[%d] and that from rings[%d].points[%d]; give the corners in their order around the area", x.ring, x.at, y.ring, y.at)
			}
		}
	}
	return nil
}

// cross says whether edges cross at a point inside both.
func cross(x, y *edge) bool {
	side := func(e *edge, p geo.Point) float64 {
		d, q := e.b.Sub(e.a), p.Sub(e.a)
		return float64(d.E*q.N) - float64(d.N*q.E)
	}
	return side(x, y.a)*side(x, y.b) < 0 && side(y, x.a)*side(y, x.b) < 0
}
