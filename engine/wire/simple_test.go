package wire

import (
	"math"
	"strings"
	"testing"

	"leadline/engine/geo"
)

// TestCrossing has outlines that cross refused and named, and takes those that only touch.
func TestCrossing(t *testing.T) {
	ring := func(deg ...float64) (out []geo.LonLat) {
		for i := 0; i < len(deg); i += 2 {
			out = append(out, geo.FromDegrees(deg[i], deg[i+1]))
		}
		return out
	}
	star := func(n, step int) (out []geo.LonLat) {
		for i := range n {
			d := geo.Direction(2 * math.Pi * float64(i*step%n) / float64(n))
			out = append(out, geo.FromDegrees(5+0.1*d.E, 52+0.1*d.N))
		}
		return out
	}
	box := ring(5, 52, 5.1, 52, 5.1, 52.1, 5, 52.1, 5, 52)
	for name, c := range map[string]struct {
		rings [][]geo.LonLat
		edges string // that are named
	}{
		"a box":                       {[][]geo.LonLat{box}, ""},
		"clockwise and open":          {[][]geo.LonLat{ring(5, 52, 5, 52.1, 5.1, 52.1, 5.1, 52)}, ""},
		"a bow":                       {[][]geo.LonLat{ring(5.0130, 52.0050, 5.016, 52.0075, 5.016, 52.0050, 5.0130, 52.0075, 5.0130, 52.0050)}, "rings[0].points[0] and that from rings[0].points[2]"},
		"an open bow":                 {[][]geo.LonLat{ring(0, 0, 1, 1, 1, 0, 0, 1)}, "rings[0].points[0] and that from rings[0].points[2]"},
		"a bow over the antimeridian": {[][]geo.LonLat{ring(179.9, 0, -179.9, 0.1, -179.9, 0, 179.9, 0.1)}, "rings[0].points[0] and that from rings[0].points[2]"},
		"a box over the antimeridian": {[][]geo.LonLat{ring(179.9, 0, -179.9, 0, -179.9, 0.1, 179.9, 0.1)}, ""},
		"a star of five":              {[][]geo.LonLat{star(5, 2)}, "the edge from rings[0]"},
		"10 000 corners":              {[][]geo.LonLat{star(10_000, 1)}, ""},
		"a hole":                      {[][]geo.LonLat{box, ring(5.02, 52.02, 5.02, 52.05, 5.05, 52.02)}, ""},
		"a hole that touches":         {[][]geo.LonLat{box, ring(5, 52.05, 5.02, 52.06, 5.02, 52.04)}, ""},
		"a hole that crosses":         {[][]geo.LonLat{box, ring(4.99, 52.05, 5.02, 52.06, 5.02, 52.04)}, "rings[1]"},
		"touching itself":             {[][]geo.LonLat{ring(0, 0, 2, 0, 2, 2, 1, 0, 0, 2)}, ""},
	} {
		if _, err := Polygon(FromPolygon(c.rings)); err != nil { // a journal or a drive file may hold it
			t.Errorf("%s, as part of what was taken: %v", name, err)
		}
		rings, err := Area(FromPolygon(c.rings))
		switch {
		case c.edges == "" && err != nil:
			t.Errorf("%s: %v", name, err)
		case c.edges == "" && len(rings) != len(c.rings):
			t.Errorf("%s: %d rings", name, len(rings))
		case c.edges != "" && (err == nil || !strings.Contains(err.Error(), c.edges)):
			t.Errorf("%s: %v", name, err)
		}
	}
}

// BenchmarkCrossing is the outline that takes longest: a comb with long teeth, each of
// which is as far east as all others.
func BenchmarkCrossing(b *testing.B) {
	var ring []geo.LonLat
	for i := range MaxPoints - 2 {
		ring = append(ring, geo.FromDegrees(float64(i%2), 50+1e-4*float64(i)))
	}
	ring = append(ring, geo.FromDegrees(2, 52), geo.FromDegrees(2, 49.9))
	for b.Loop() {
		if err := simple([][]geo.LonLat{ring}); err != nil {
			b.Fatal(err)
		}
	}
}
