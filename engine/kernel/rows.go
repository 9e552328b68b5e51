package kernel

import "math"

// Row is a stretch of a row of cells: Len of them, a multiple of RowLane, the first of
// which is in column Col and at place Start of what they are in.
type Row struct {
	Col, Len int32
	Start    int
}

// RowLane is what lengths of rows are multiples of, RowPad how many values after each
// row are the row's own, and 0.
const (
	RowLane = 4
	RowPad  = 4
)

// RowTap are rows to take from, each shifted by Cols columns. Of rows that several taps
// share, one is to say Ahead: what comes after them is then fetched from memory before
// its turn.
type RowTap struct {
	Rows  []Row
	Cols  int
	Ahead bool
}

// CombineRows writes rows of dst as weighted sums of rows of src: what row k of to has
// in column c is
//
//	Σ weight[t]·(row k of taps[t], column c - Cols),
//
// added in the order of the taps, of which there is at least one, with RowPad zeros
// after each row that is not empty. Places beside a row count as its columns; all that
// is read must lie in src, all that is written in dst, which does not overlap src. at is
// room for a number a tap.
func CombineRows(dst []float64, to []Row, src []float64, taps []RowTap, weight []float64, at []int) {
	if len(to) == 0 {
		return
	}
	weight, at = weight[:len(taps)], at[:len(taps)]
	for i := range taps {
		_ = taps[i].Rows[len(to)-1]
	}
	combineRows(dst, to, src, taps, weight, at)
}

// Extent is of a row that is made of others: its first column, the one beyond its last,
// below 0, the last first column of those, below 0, and the first one beyond. One of no
// rows is NoExtent.
type Extent struct{ First, MinusEnd, MinusLast, Least int32 }

// NoExtent is that of no rows.
var NoExtent = Extent{math.MaxInt32, math.MaxInt32, math.MaxInt32, math.MaxInt32}

// Widen takes rows into extents, each shifted by cols columns and by up to beyond more.
// What is made of a row without cells has no last first column: it is out of reach.
func Widen(to []Extent, rows []Row, cols, beyond int32) { widen(to[:len(rows)], rows, cols, beyond) }

// widenPlain is Widen in plain Go.
func widenPlain(to []Extent, rows []Row, cols, beyond int32) {
	for k := range rows {
		r, e := &rows[k], &to[k]
		if r.Len == 0 {
			e.MinusLast = -math.MaxInt32
			continue
		}
		lo, hi := r.Col+cols, r.Col+r.Len+cols
		*e = Extent{min(e.First, lo), min(e.MinusEnd, -hi-beyond), min(e.MinusLast, -lo-beyond), min(e.Least, hi)}
	}
}

// combineRowsPlain is CombineRows in plain Go.
func combineRowsPlain(dst []float64, to []Row, src []float64, taps []RowTap, weight []float64, at []int) {
	for k, r := range to {
		n := int(r.Len)
		if n == 0 {
			continue
		}
		for t := range taps {
			from := &taps[t].Rows[k]
			at[t] = from.Start + int(r.Col) - int(from.Col) - taps[t].Cols
		}
		within(src, n, at)
		_ = dst[r.Start+n+RowPad-1]
		clear(dst[r.Start+n:][:RowPad])
		combinePlain(dst[r.Start:r.Start+n], src, at, weight, 0)
	}
}

// WeighRows does for each row what WeighBy does with src, from place
// first + k·step + Col for row k and four stretches that are pitch places apart, and
// returns sum with the rows' sums added in their order; dst may be mass.
func WeighRows(sum float64, dst, mass []float64, rows []Row, src []float64, first, step, pitch int, weight *[4]float64) float64 {
	if pitch < 0 {
		panic("kernel: stretches that go back")
	}
	return weighRows(sum, dst, mass, rows, src, first, step, pitch, weight)
}

// weighRowsPlain is WeighRows in plain Go.
func weighRowsPlain(all float64, dst, mass []float64, rows []Row, src []float64, first, step, pitch int, weight *[4]float64) float64 {
	at := [4]int{0, pitch, 2 * pitch, 3 * pitch}
	for k, r := range rows {
		n := int(r.Len)
		if n == 0 {
			continue
		}
		_ = mass[r.Start+n-1]
		src := src[first+k*step+int(r.Col):]
		within(src, n, at[:])
		var sum [16]float64
		weighByPlain(dst[r.Start:r.Start+n], mass[r.Start:r.Start+n], src, at[:], weight[:], &sum, 0)
		all += sumOf(&sum)
	}
	return all
}

// sumOf adds sixteen sums in pairs, four apart before those beside each other.
func sumOf(sum *[16]float64) float64 {
	var four [4]float64
	for i := range four {
		four[i] = sum[i] + sum[4+i] + (sum[8+i] + sum[12+i])
	}
	return four[0] + four[1] + (four[2] + four[3])
}
