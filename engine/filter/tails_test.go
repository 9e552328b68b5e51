package filter

import (
	"math"
	"testing"
)

// convolve applies a kernel n times to a point mass in the middle of m cells.
func convolve(w []float64, n, m int) []float64 {
	p, q := make([]float64, m), make([]float64, m)
	p[m/2] = 1
	for range n {
		clear(q)
		for i, v := range p {
			for d, x := range w {
				if i+d < m {
					q[i+d] += v * x
				}
				if d > 0 && i-d >= 0 {
					q[i-d] += v * x
				}
			}
		}
		p, q = q, p
	}
	return p
}

// TestTails measures the mass beyond 5.4 standard deviations (cells 14 and
// outwards) after one step and after a hundred, both with a total variance of
// (2.5 cells)²: the coarsest lattice that Adapt keeps. A Gaussian has 6.7e-8
// there. Measured: 5.5e-8 in one step, 6.0e-7 in a hundred of a quarter of a
// cell each, whose excess kurtosis is that of a walk by single cells,
// 1/6.25. So small steps overstate the tail, by less than 1e-6.
func TestTails(t *testing.T) {
	const total, beyond = 6.25, 14
	gauss := math.Erfc((beyond - 0.5) / 2.5 / math.Sqrt2)
	for _, c := range []struct {
		steps      int
		low, above float64
	}{{1, 0.5e-7, 0.6e-7}, {10, 0.5e-7, 0.6e-7}, {100, 5.5e-7, 6.5e-7}, {1000, 8e-7, 9e-7}} {
		const m = 401
		p := convolve(discreteNormal(nil, total/float64(c.steps)), c.steps, m)
		tail, variance := 0.0, 0.0
		for i, v := range p {
			n := float64(i - m/2)
			variance += v * n * n
			if math.Abs(n) >= beyond {
				tail += v
			}
		}
		t.Logf("%d steps: mass beyond 5.4 sigma %.3g, of a Gaussian %.3g", c.steps, tail, gauss)
		if math.Abs(variance-total) > 1e-11*total { // 1000 steps of 1e-15
			t.Errorf("%d steps: variance %.15g, want %g", c.steps, variance, total)
		}
		if tail < c.low || tail > c.above {
			t.Errorf("%d steps: mass beyond 5.4 sigma %g, measured before: %g to %g", c.steps, tail, c.low, c.above)
		}
	}
}

// TestTailsAcross measures the mass beyond the ellipse that holds all but 1e-7
// of a Gaussian, after a start of (2.5 cells)² and a hundred small correlated
// steps whose standard deviations differ by ten, at angles that no lattice
// direction has. Measured: 4.3e-7 at most (1.0e-7 in one step; 1.0e-6 in a
// hundred for standard deviations that differ by thirty).
func TestTailsAcross(t *testing.T) {
	const steps = 100
	for _, deg := range []float64{10, 37} {
		s, c := math.Sincos(deg * math.Pi / 180)
		const big, small = 125, 1.25
		total := [3]float64{big*c*c + small*s*s, (big - small) * c * s, big*s*s + small*c*c}
		b := &Belief{Map: "x", Dim: 2, Lattice: Lattice{SpacingM: 1}}
		b.Tiles.At, b.Tiles.Mass = []TileAt{{0, 0}}, make([]float64, tileCells)
		b.Tiles.Mass[0] = 1
		var w Workspace
		b.predictTiles(Step{Add: make([]float64, 2), Q: []float64{6.25, 0, 6.25}}, &w)
		for range steps {
			b.predictTiles(Step{Add: make([]float64, 2), Q: []float64{total[0] / steps, total[1] / steps, total[2] / steps}}, &w)
		}
		ee, en, nn := 6.25+total[0], total[1], 6.25+total[2]
		tail := 0.0
		for i, at := range b.Tiles.At {
			for x, v := range b.Tiles.tile(i) {
				e, n := float64(at.Col*TileSide+int32(x%TileSide)), float64(at.Row*TileSide+int32(x/TileSide))
				// χ² with two degrees of freedom: exp(-d/2) = 1e-7.
				if (nn*e*e-2*en*e*n+ee*n*n)/(ee*nn-en*en) > -2*math.Log(1e-7) {
					tail += v
				}
			}
		}
		if tail < 0.5e-7 || tail > 5e-7 {
			t.Errorf("%g°: %.3g beyond the ellipse of 1e-7", deg, tail)
		}
	}
}
