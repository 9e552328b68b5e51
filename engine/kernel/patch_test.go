package kernel

import (
	"math"
	"math/rand/v2"
	"testing"
)

// TestPatchBits compares with plain Go, for every length of a tail: within the box and
// outside, off the raster and at its very edges, beside voids, and at places that are no
// numbers.
func TestPatchBits(t *testing.T) {
	const seed = 16
	rng := rand.New(rand.NewPCG(seed, 1))
	stopped, known, unknown := 0, 0, 0
	for n := range 400 {
		p := Patch{MinE: -300, MinN: 50, PerM: 1.0 / 640, LowE: 2, LowN: 1, HighE: 3, HighN: 2, Cols: 2 + rng.IntN(60), Rows: 2 + rng.IntN(60)}
		p.Heights = make([]float32, p.Cols*p.Rows)
		for i := range p.Heights {
			p.Heights[i] = float32(500 * rng.NormFloat64())
			if rng.IntN(40) == 0 {
				p.Heights[i] = float32(math.NaN())
			}
		}
		lastC, lastR := float64(p.Cols-1), float64(p.Rows-1)
		p.LeastCol, p.MostCol, p.LeastRow, p.MostRow = -1e-4, lastC+1e-4, -1e-4, lastR+1e-4
		turned := 0.2 * rng.NormFloat64()
		p.Col = [9]float64{-0.1 * lastC, 1.2 * lastC, 0.01, turned, 0.003, 1e-4, -0.02, 1e-5, 1e-6}
		p.Row = [9]float64{1.1 * lastR, turned, -0.02, -1.2 * lastR, 0.004, 1e-4, 0.03, -1e-5, 1e-6}
		if n%5 == 0 { // exactly the raster's own columns and rows
			p.Col, p.Row = [9]float64{0, lastC}, [9]float64{lastR, 0, 0, -lastR}
		}
		east, north := make([]float64, n), make([]float64, n)
		for i := range n {
			east[i], north[i] = p.MinE+640*(2+rng.Float64()), p.MinN+640*(1+rng.Float64())
			switch rng.IntN(12 * n) {
			case 0:
				east[i] = math.NaN()
			case 1:
				north[i] = math.Inf(1)
			case 2:
				east[i] = p.MinE + 640*3
			case 3:
				north[i] = p.MinN + 640 - 1e-9
			}
			if rng.IntN(20) == 0 {
				east[i] = p.MinE + 640*2
			}
		}
		var got, want [3][]float64
		for i := range got {
			got[i], want[i] = make([]float64, n), make([]float64, n)
		}
		done := p.Sample(got[0], got[1], got[2], east, north)
		if plain := samplePatchPlain(&p, want[0], want[1], want[2], east, north, 0); done != plain {
			t.Fatalf("seed %d: %d places of %d, want %d", seed, done, n, plain)
		}
		for i := range got {
			sameBits(t, "Patch.Sample", got[i][:done], want[i][:done])
		}
		if done < n {
			stopped++
		}
		for _, h := range want[0][:done] {
			if h == h {
				known++
			} else {
				unknown++
			}
		}
	}
	if stopped < 20 || known < 10_000 || unknown < 1000 {
		t.Fatalf("seed %d: %d stopped, %d known, %d unknown", seed, stopped, known, unknown)
	}
}
