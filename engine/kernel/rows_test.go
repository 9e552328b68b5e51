package kernel

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// someRows are rows of up to 80 cells, some of none, one after the other.
func someRows(rng *rand.Rand, count int) (rows []Row, cells int) {
	cells = RowPad
	for range count {
		n := RowLane * rng.IntN(21)
		rows = append(rows, Row{int32(rng.IntN(9) - 4), int32(n), cells})
		cells += n + RowPad
	}
	return rows, cells
}

func someCells(rng *rand.Rand, n int) []float64 {
	src := make([]float64, n)
	for i := range src {
		src[i] = rng.NormFloat64() * math.Exp(-300*rng.Float64())
		if rng.IntN(8) == 0 {
			src[i] = awkward[rng.IntN(len(awkward))]
		}
	}
	return src
}

// TestRowsBits compares CombineRows and WeighRows with plain Go, and with Combine and
// WeighBy row by row.
func TestRowsBits(t *testing.T) {
	const seed = 7
	rng := rand.New(rand.NewPCG(seed, 1))
	for range 300 {
		count, taps := 1+rng.IntN(12), 1+rng.IntN(9)
		to, cells := someRows(rng, count)
		src := someCells(rng, cells+200)
		var from []RowTap
		var weight []float64
		for range taps {
			tap := RowTap{Cols: rng.IntN(7) - 3}
			for k := range to {
				// Any place that leaves room on either side.
				tap.Rows = append(tap.Rows, Row{int32(rng.IntN(9) - 4), 4, 12 + rng.IntN(len(src)-24-int(to[k].Len))})
			}
			from, weight = append(from, tap), append(weight, rng.NormFloat64())
		}
		at := make([]int, 9)
		got, want, single := someCells(rng, cells), make([]float64, cells), make([]float64, cells)
		copy(want, got)
		copy(single, got)
		CombineRows(got, to, src, from, weight, at)
		combineRowsPlain(want, to, src, from, weight, at[:taps])
		sameBits(t, "CombineRows", got, want)
		for k, r := range to {
			if r.Len == 0 {
				continue
			}
			var at []int
			for _, tap := range from {
				at = append(at, tap.Rows[k].Start+int(r.Col)-int(tap.Rows[k].Col)-tap.Cols)
			}
			Combine(single[r.Start:r.Start+int(r.Len)], src, at, weight)
			clear(single[r.Start+int(r.Len):][:RowPad])
		}
		sameBits(t, "CombineRows by rows", got, single)

		first, step, pitch := 4+rng.IntN(9), rng.IntN(7), rng.IntN(9)
		src = someCells(rng, 300)
		mass := someCells(rng, cells)
		copy(want, mass)
		copy(single, mass)
		got = slices.Clone(mass)
		four := [4]float64{rng.NormFloat64(), rng.NormFloat64(), rng.NormFloat64(), rng.NormFloat64()}
		sum := WeighRows(0.5, got, got, to, src, first, step, pitch, &four)
		plain := weighRowsPlain(0.5, want, want, to, src, first, step, pitch, &four)
		sameBits(t, "WeighRows", got, want)
		all := 0.5
		for k, r := range to {
			if r.Len > 0 {
				row := single[r.Start : r.Start+int(r.Len)]
				all += WeighBy(row, row, src[first+k*step+int(r.Col):], []int{0, pitch, 2 * pitch, 3 * pitch}, four[:])
			}
		}
		sameBits(t, "WeighRows by rows", got, single)
		sameBits(t, "WeighRows' sum", []float64{sum, sum}, []float64{plain, all})
	}
}

// TestRowsOutside has rows that are read or written beyond what there is.
func TestRowsOutside(t *testing.T) {
	cells := make([]float64, 24)
	row := []Row{{0, 8, 4}}
	for name, f := range map[string]func(){
		"written beyond": func() {
			CombineRows(cells[:12], row, make([]float64, 40), []RowTap{{Rows: row, Cols: 0}}, []float64{1}, make([]int, 1))
		},
		"written before": func() {
			CombineRows(cells, []Row{{0, 8, -4}}, make([]float64, 40), []RowTap{{Rows: row, Cols: 0}}, []float64{1}, make([]int, 1))
		},
		"read before": func() {
			CombineRows(cells, row, make([]float64, 40), []RowTap{{Rows: row, Cols: 5}}, []float64{1}, make([]int, 1))
		},
		"read beyond": func() {
			CombineRows(cells, row, make([]float64, 16), []RowTap{{Rows: row, Cols: -5}}, []float64{1}, make([]int, 1))
		},
		"rows that are missing": func() {
			CombineRows(cells, row, make([]float64, 16), []RowTap{{}}, []float64{1}, make([]int, 1))
		},
		"weighed beyond": func() {
			WeighRows(0, cells[:11], cells[:11], row, make([]float64, 40), 0, 0, 1, &[4]float64{1})
		},
		"weighed by what is before": func() {
			WeighRows(0, cells, cells, row, make([]float64, 40), -1, 0, 1, &[4]float64{1})
		},
		"weighed by what is beyond": func() {
			WeighRows(0, cells, cells, row, make([]float64, 28), 0, 0, 7, &[4]float64{1})
		},
	} {
		t.Run(name, func(t *testing.T) {
			defer func() {
				if recover() == nil {
					t.Error("no panic")
				}
			}()
			f()
		})
	}
}

// TestWidenBits compares Widen with plain Go.
func TestWidenBits(t *testing.T) {
	const seed = 8
	rng := rand.New(rand.NewPCG(seed, 1))
	for range 300 {
		n := rng.IntN(12)
		got := make([]Extent, n+2)
		for i := range got {
			got[i] = NoExtent
		}
		want := slices.Clone(got)
		for range 1 + rng.IntN(9) {
			rows, _ := someRows(rng, n)
			cols, beyond := int32(rng.IntN(9)-4), int32(rng.IntN(4))
			Widen(got, rows, cols, beyond)
			widenPlain(want, rows, cols, beyond)
		}
		if !slices.Equal(got, want) {
			t.Fatalf("seed %d: %v, want %v", seed, got, want)
		}
	}
}

// TestBlockBits compares CopyBlock and DropBelow with plain Go, and the latter with what it is to do.
func TestBlockBits(t *testing.T) {
	const seed = 9
	rng := rand.New(rand.NewPCG(seed, 1))
	for range 500 {
		cols, rows := rng.IntN(60), rng.IntN(6)
		to, from := cols+rng.IntN(5), cols+rng.IntN(5)
		src := someCells(rng, rows*from+rng.IntN(9))
		got := someCells(rng, rows*to+rng.IntN(9))
		want := slices.Clone(got)
		CopyBlock(got, src, cols, rows, to, from)
		copyBlockPlain(want, src, cols, rows, to, from)
		sameBits(t, "CopyBlock", got, want)
		floor := math.Exp(-300 * rng.Float64())
		for i := range src {
			if rng.IntN(3) > 0 {
				src[i] = math.Copysign(0, src[i])
			}
		}
		dropped, left := 0.0, false
		kept := slices.Clone(src)
		for i, v := range src {
			if v > 0 && v < floor {
				dropped += v
				kept[i] = 0
			}
			left = left || kept[i] > 0
		}
		plain := slices.Clone(src)
		var sums [4]float64
		if some := dropBelowPlain(&sums, plain, floor, 0); some != left {
			t.Fatalf("seed %d: in plain Go, some are left is %v", seed, some)
		}
		some, sum := DropBelow(src, floor)
		if some != left || math.Abs(sum-dropped) > 1e-15*dropped {
			t.Fatalf("seed %d: %v and %v, want %v and %v", seed, some, sum, left, dropped)
		}
		sameBits(t, "DropBelow in plain Go", plain, kept)
		sameBits(t, "DropBelow", append(src, sum), append(kept, (sums[0]+sums[1])+(sums[2]+sums[3])))
	}
}

// TestLogsBits compares Logs and Exps with plain Go, for every length of a tail.
func TestLogsBits(t *testing.T) {
	const seed = 10
	rng := rand.New(rand.NewPCG(seed, 1))
	for i := range 400 {
		src, got, want := make([]float64, i%11), make([]float64, i%11), make([]float64, i%11)
		for j := range src {
			src[j] = math.Exp(600 * rng.NormFloat64())
			if i%7 == 0 && rng.IntN(3) == 0 {
				src[j] = []float64{0, 5e-324, 1e-310, math.Inf(1), 1}[rng.IntN(5)]
			}
		}
		Logs(got, src)
		logsPlain(want, src, 0)
		sameBits(t, "Logs", got, want)
		for j := range src {
			src[j] = -800 * rng.Float64() * rng.Float64()
			if rng.IntN(9) == 0 {
				src[j] = []float64{0, math.Inf(-1), -745.13, -745.2, -708.5}[rng.IntN(5)]
			}
		}
		Exps(got, src)
		expsPlain(want, src, 0)
		sameBits(t, "Exps", got, want)
	}
}

// TestEdgesBits compares Edges with NormalDensity and NormalUpper.
func TestEdgesBits(t *testing.T) {
	const seed = 11
	rng := rand.New(rand.NewPCG(seed, 1))
	var work EdgeWork
	for trial := range 400 {
		n := trial % 23
		z, density, tail := make([]float64, n), make([]float64, n), make([]float64, n)
		var wantDensity, wantTail []float64
		for i := range z {
			z[i] = []float64{1, 3.2, 12, 40}[rng.IntN(4)] * rng.NormFloat64()
			if rng.IntN(9) == 0 {
				z[i] = []float64{0, 3, -3, 38.6, 1e-300, -50, math.Nextafter(3, 0), 1e-9}[rng.IntN(8)]
			}
			wantDensity, wantTail = append(wantDensity, NormalDensity(z[i])), append(wantTail, NormalUpper(math.Abs(z[i])))
		}
		Edges(density, tail, z, &work)
		sameBits(t, "densities", density, wantDensity)
		sameBits(t, "tails", tail, wantTail)
	}
}
