package filter_test

import (
	"math"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/plane"
)

// TestAreaStart: a start in an area smaller than the map's cells has the moments
// of the area, which for a rectangle of sides a and b are a²/12 and b²/12 along
// them, and for one with a hole those of the whole less those of the hole.
func TestAreaStart(t *testing.T) {
	turned := func(a, b, deg float64) []geo.Point {
		s, c := math.Sincos(geo.Rad(deg))
		var ring []geo.Point
		for _, p := range [][2]float64{{-1, -1}, {1, -1}, {1, 1}, {-1, 1}} {
			x, y := p[0]*a/2, p[1]*b/2
			ring = append(ring, geo.Point{E: 300 + x*c - y*s, N: -200 + x*s + y*c})
		}
		return ring
	}
	nuisance := []filter.Quantity{{Name: filter.East}, {Name: filter.North}, {Name: "offset", PriorVar: 1}}
	for _, c := range []struct {
		name  string
		rings [][]geo.Point
		want  [2]float64 // variances along the sides
		deg   float64
	}{
		{"as large as a cell", [][]geo.Point{turned(90, 90, 0)}, [2]float64{90 * 90 / 12., 90 * 90 / 12.}, 0},
		{"small", [][]geo.Point{turned(30, 20, 0)}, [2]float64{30 * 30 / 12., 20 * 20 / 12.}, 0},
		{"turned", [][]geo.Point{turned(40, 12, 30)}, [2]float64{40 * 40 / 12., 12 * 12 / 12.}, 30},
		{"large", [][]geo.Point{turned(4000, 3000, 0)}, [2]float64{4000 * 4000 / 12., 3000 * 3000 / 12.}, 0},
		{"with a hole", [][]geo.Point{turned(40, 40, 0), turned(20, 20, 0)}, [2]float64{(1600*1600 - 400*400) / (12 * 1200.), (1600*1600 - 400*400) / (12 * 1200.)}, 0},
	} {
		for _, qs := range [][]filter.Quantity{nil, nuisance} {
			space := plane.Open(geo.LonLat{}, 20_000, 92)
			b, err := filter.Seed(space, filter.Within{Rings: c.rings}, qs, 1<<18)
			if err != nil {
				t.Fatalf("%s, %d quantities: %v", c.name, len(qs), err)
			}
			var w filter.Workspace
			_, mean, cov := b.Moments(space, &w)
			sin, cos := math.Sincos(geo.Rad(c.deg))
			along := cos*cos*cov[0] + 2*sin*cos*cov[1] + sin*sin*cov[2]
			across := sin*sin*cov[0] - 2*sin*cos*cov[1] + cos*cos*cov[2]
			h := b.Lattice.SpacingM
			// The area is read at sixteen places a cell, which moves an edge by up to an
			// eighth of a cell; a cell adds h²/12, or the width of its Gaussian.
			sigma, own := math.Sqrt(math.Min(c.want[0], c.want[1])), 1.0/12
			if qs != nil {
				own = 0.36
			}
			within := h/2/(math.Sqrt(12)*sigma) + own*h*h/(sigma*sigma)
			if math.Abs(along/c.want[0]-1) > within || math.Abs(across/c.want[1]-1) > within || within > 0.25 {
				t.Errorf("%s, %d quantities, cells of %.3g m: variances %.4g and %.4g, want %.4g and %.4g within %.2g of them", c.name, len(qs), h, along, across, c.want[0], c.want[1], within)
			}
			if d := mean.Sub(geo.Point{E: 300, N: -200}).Norm(); d > h/2 {
				t.Errorf("%s, %d quantities: mean off by %.3g m, cells are %.3g m", c.name, len(qs), d, h)
			}
			t.Logf("%s, %d quantities: cells of %.3g m, variances %.4g and %.4g, want %.4g and %.4g", c.name, len(qs), h, along, across, c.want[0], c.want[1])
		}
	}
}
