package kernel

import (
	"math"
	"math/rand/v2"
	"testing"
)

// TestPatchBits compares with plain Go, for every length of a tail: within the box and
// outside, off the raster and at its very edges, beside voids, and at places that are no
// numbers; places of one north also with those taken one by one.
func TestPatchBits(t *testing.T) {
	const seed = 16
	rng := rand.New(rand.NewPCG(seed, 1))
	stopped, known, unknown, rows := 0, 0, 0, 0
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
		oneNorth := n%3 == 0 && n > 0
		if oneNorth {
			for i := range north {
				north[i] = north[0]
			}
		}
		var got, want [3][]float64
		for i := range got {
			got[i], want[i] = make([]float64, n), make([]float64, n)
		}
		done := p.Sample(got[0], got[1], got[2], east, north)
		plain := 0
		switch {
		case oneNorth && n >= leastRow:
			var r rowOfPatch
			if r.at(&p, north[0]) {
				plain = sampleRowPlain(&p, &r, want[0], want[1], want[2], east, 0)
			}
			var slow [3][]float64
			for i := range slow {
				slow[i] = make([]float64, n)
			}
			if general := samplePatchPlain(&p, slow[0], slow[1], slow[2], east, north, 0); general != plain {
				t.Fatalf("seed %d: a row of %d places, want %d", seed, plain, general)
			}
			// Columns and rows are sums of ten rounded terms of up to 3·60, and heights
			// are of the order of 500 m, 5000 between two corners at most. Where
			// rounding takes a place over a corner, slopes jump and it may be unknown.
			for i, h := range want[0][:plain] {
				if off := math.Abs(h - slow[0][i]); off > 10*180*0x1p-53*2*5000 {
					t.Fatalf("seed %d: a height of %v in a row, %v by itself", seed, h, slow[0][i])
				}
				rows++
			}
		default:
			plain = samplePatchPlain(&p, want[0], want[1], want[2], east, north, 0)
		}
		if done != plain {
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
	if stopped < 20 || known < 10_000 || unknown < 1000 || rows < 10_000 {
		t.Fatalf("seed %d: %d stopped, %d known, %d unknown, %d in rows", seed, stopped, known, unknown, rows)
	}
}
