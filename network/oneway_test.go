package network

import (
	"math"
	"testing"

	"leadline/engine/geo"
)

// TestArrows: a line of 300 pixels has three arrows, evenly spread, that point
// along it; a short one has none.
func TestArrows(t *testing.T) {
	line := []geo.Point{{E: 0, N: 0}, {E: 100, N: 0}, {E: 100, N: 200}}
	as := arrowsOn(line)
	if len(as) != 3 {
		t.Fatalf("%d arrows", len(as))
	}
	for i, want := range []geo.Point{{E: 50, N: 0}, {E: 100, N: 50}, {E: 100, N: 150}} {
		tip, back := as[i][0], geo.Point{E: (as[i][1].E + as[i][2].E) / 2, N: (as[i][1].N + as[i][2].N) / 2}
		middle := geo.Point{E: (tip.E + back.E) / 2, N: (tip.N + back.N) / 2}
		if middle.Sub(want).Norm() > 1e-9 {
			t.Errorf("arrow %d is at %v, want %v", i, middle, want)
		}
		along := geo.Point{E: 1}
		if i > 0 {
			along = geo.Point{N: 1}
		}
		if d := tip.Sub(back); math.Abs(d.E-arrowLength*along.E)+math.Abs(d.N-arrowLength*along.N) > 1e-9 {
			t.Errorf("arrow %d points along %v", i, d)
		}
	}
	if as := arrowsOn([]geo.Point{{}, {E: arrowLeast - 1}}); as != nil {
		t.Errorf("a short line has %d arrows", len(as))
	}
}
