package filter_test

import (
	"math"
	"testing"

	"leadline/engine/filter"
)

// TestScatter: on one straight street the belief's density spread over the plane
// and read along the street is the belief convolved with the spread: mean and
// variance within 1 %. The other quantities keep their moments, the masses sum to
// 1, and all of it counts as restarted.
func TestScatter(t *testing.T) {
	g := line(8000, 1)
	qs := []filter.Quantity{{Name: filter.Along}, {Name: filter.OdometerScale, PriorMean: 0.01, PriorVar: 4e-4}}
	for _, c := range []struct {
		spread   float64
		maxCells int
		level    int
	}{{50, 1 << 16, 0}, {400, 1 << 16, 0}, {400, 3000, 2}} {
		b, err := filter.Seed(g, onLine{4000, 30}, qs, 1<<16)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		// The scale is learnt a little.
		step := filter.NewStep(2)
		step.SetF(0, 1, 100)
		filter.Predict(b, g, step, &w)
		_, m0, v0 := b.Moments(g, &w)
		s0, sv0, _ := b.Moment(filter.OdometerScale)
		pruned := b.Pruned
		if err := filter.Scatter(b, g, c.spread*c.spread, c.maxCells, &w); err != nil {
			t.Fatal(err)
		}
		_, m, v := b.Moments(g, &w)
		want := v0[2] + c.spread*c.spread
		if math.Abs(m.N-m0.N) > 0.01*math.Sqrt(want) || math.Abs(v[2]/want-1) > 0.01 {
			t.Errorf("spread %g: mean %v, variance %v; want %v, %v", c.spread, m.N, v[2], m0.N, want)
		}
		if s, sv, ok := b.Moment(filter.OdometerScale); !ok || math.Abs(s-s0) > 1e-12 || math.Abs(sv/sv0-1) > 1e-9 {
			t.Errorf("scale %v ± %v, before %v ± %v", s, sv, s0, sv0)
		}
		if math.Abs(mass(b)-1) > 1e-12 || b.Restarted != 1 || b.Pruned < pruned || b.Level != c.level || b.Quantities[1].PriorVar != 4e-4 {
			t.Errorf("mass %v, restarted %v, pruned %v, level %d, %+v", mass(b), b.Restarted, b.Pruned, b.Level, b.Quantities)
		}
	}
}
