package filter_test

import (
	"fmt"
	"math"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/plane"
)

// sizes are named as in the benchmarks' output.
func sizeName(n int) string {
	switch {
	case n >= 1e6 && n%1e6 == 0:
		return fmt.Sprintf("cells=%dM", n/1e6)
	case n >= 1e3 && n%1e3 == 0:
		return fmt.Sprintf("cells=%dk", n/1e3)
	}
	return fmt.Sprintf("cells=%d", n)
}

// square is a uniform prior over a square about the origin.
type square struct{ halfM float64 }

func (s square) Box() geo.Box {
	return geo.Box{Min: geo.Point{E: -s.halfM, N: -s.halfM}, Max: geo.Point{E: s.halfM, N: s.halfM}}
}

func (s square) Density(dst []float64, at *filter.Columns) {
	for i := range dst {
		dst[i] = 0
		if math.Abs(at.East[i]) <= s.halfM && math.Abs(at.North[i]) <= s.halfM {
			dst[i] = 1
		}
	}
}

// perCell reports the time a cell, with the number of cells at the start.
func perCell(b *testing.B, cells int) {
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(cells), "ns/cell")
}

// BenchmarkPlanePredict spreads a lattice by (0.7, 0.5 cells)², correlated or
// not; the cost a cell does not grow with the cells.
func BenchmarkPlanePredict(b *testing.B) {
	for _, q := range []struct {
		name string
		q    [3]float64
	}{{"axes", [3]float64{0.49, 0, 0.25}}, {"correlated", [3]float64{0.49, 0.2, 0.25}}} {
		for _, n := range []int{1e3, 1e4, 1e5, 1e6, 1e7} {
			b.Run(q.name+"/"+sizeName(n), func(b *testing.B) {
				p := plane.Open(geo.LonLat{}, 10e3, 1)
				belief, err := filter.Seed(p, square{math.Sqrt(float64(n)) / 2}, nil, 1<<26)
				if err != nil {
					b.Fatal(err)
				}
				cells := belief.Cells()
				var w filter.Workspace
				step := filter.NewStep(2)
				step.Add[0], step.Add[1] = 3.3, -1.7
				copy(step.Q, q.q[:])
				fresh := belief.Clone()
				b.ResetTimer()
				b.ReportAllocs()
				for i := range b.N {
					if i%10 == 9 { // it widens step by step
						b.StopTimer()
						*belief = *fresh.Clone()
						b.StartTimer()
					}
					filter.Predict(belief, p, step, &w)
				}
				perCell(b, cells)
			})
		}
	}
}

// BenchmarkPlaneUpdate weighs a lattice by a linear likelihood.
func BenchmarkPlaneUpdate(b *testing.B) {
	for _, n := range []int{1e3, 1e4, 1e5, 1e6, 1e7} {
		b.Run(sizeName(n), func(b *testing.B) {
			p := plane.Open(geo.LonLat{}, 10e3, 1)
			side := math.Sqrt(float64(n))
			belief, err := filter.Seed(p, square{side / 2}, nil, 1<<26)
			if err != nil {
				b.Fatal(err)
			}
			cells := belief.Cells()
			var w filter.Workspace
			b.ResetTimer()
			b.ReportAllocs()
			for i := range b.N {
				// Back and forth, so that no cell falls below the floor.
				z := side
				if i%2 == 1 {
					z = -side
				}
				if _, err := filter.Update(belief, p, filtertest.Along{Z: z, SigmaM: 10 * side}, &w); err != nil {
					b.Fatal(err)
				}
			}
			perCell(b, cells)
		})
	}
}

// lineBelief fills n cells of a metre on streets of 100 m each that lead on in
// a ring, with the odometer scale as nuisance.
func lineBelief(b *testing.B, n int) (*filtertest.Graph, *filter.Belief) {
	lengths := make([]float64, max(1, n/100))
	next := make([][]filtertest.Link, len(lengths))
	for i := range lengths {
		lengths[i] = math.Min(100, float64(n))
		next[i] = []filtertest.Link{{To: int32((i + 1) % len(lengths)), Weight: 1}}
	}
	g := filtertest.NewGraph(1, lengths, next)
	belief, err := filter.Seed(g, filter.Anywhere{}, []filter.Quantity{{Name: filter.Along}, {Name: filter.OdometerScale, PriorVar: 1e-4}}, 1<<22)
	if err != nil {
		b.Fatal(err)
	}
	return g, belief
}

var lineSizes = []int{100, 1e3, 1e4, 3e5}

// BenchmarkLinePredict moves Gaussians with position and scale: in most steps
// whole, cut where they have grown wide.
func BenchmarkLinePredict(b *testing.B) {
	for _, n := range lineSizes {
		b.Run(sizeName(n), func(b *testing.B) {
			g, belief := lineBelief(b, n)
			cells := belief.Cells()
			var w filter.Workspace
			step := filter.NewStep(2)
			step.Add[0], step.Q[0] = 1.3, 0.02*0.02*1.3
			step.SetF(0, 1, 1.3)
			for range 20 { // to the steady mixture of narrow and cut
				filter.Predict(belief, g, step, &w)
			}
			b.ResetTimer()
			b.ReportAllocs()
			for range b.N {
				filter.Predict(belief, g, step, &w)
			}
			perCell(b, cells)
		})
	}
}

// BenchmarkLineUpdate conditions every Gaussian by a position.
func BenchmarkLineUpdate(b *testing.B) {
	for _, n := range lineSizes {
		b.Run(sizeName(n), func(b *testing.B) {
			g, belief := lineBelief(b, n)
			cells := belief.Cells()
			var w filter.Workspace
			b.ResetTimer()
			b.ReportAllocs()
			for range b.N {
				if _, err := filter.Update(belief, g, filtertest.Along{Z: 50, SigmaM: 1e4}, &w); err != nil {
					b.Fatal(err)
				}
			}
			perCell(b, cells)
		})
	}
}
