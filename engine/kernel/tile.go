package kernel

import "math"

// Dense reports whether no value is 0.
func Dense(src []float64) bool { return dense(src) }

// densePlain is Dense in plain Go, for values from i on.
func densePlain(src []float64, i int) bool {
	for _, v := range src[i:] {
		if v == 0 {
			return false
		}
	}
	return true
}

// Count is how many values are above 0.
func Count(src []float64) int { return count(src) }

// countPlain is Count in plain Go, for values from i on.
func countPlain(src []float64, i int) (above int) {
	for _, v := range src[i:] {
		if v > 0 {
			above++
		}
	}
	return above
}

// Roots writes the square roots of rows of cols values into rows that are to values apart.
func Roots(dst, src []float64, cols, to int) {
	rows := wholeRows(len(src), cols)
	if rows == 0 {
		return
	}
	if to < cols {
		panic("kernel: rows that overlap")
	}
	_ = dst[(rows-1)*to+cols-1]
	roots(dst, src, cols, rows, to)
}

// rootsPlain is Roots in plain Go.
func rootsPlain(dst, src []float64, cols, rows, to int) {
	for r := range rows {
		for c, v := range src[r*cols : (r+1)*cols] {
			dst[r*to+c] = math.Sqrt(v)
		}
	}
}

// Steps are the sums of squares of steps from each value to the next of its row and to that
// of the next row, over rows of cols values, from apart, beyond which lies one more of each.
// cols is a multiple of 4, or it panics. Column c goes into sums c%4, which are added in pairs.
func Steps(src []float64, cols, rows, from int) (x, y float64) {
	if cols <= 0 || cols%4 != 0 || rows <= 0 || from <= cols {
		panic("kernel: steps of rows that are no whole lanes, or overlap")
	}
	_ = src[rows*from+cols-1]
	var s [8]float64
	steps(&s, src, cols, rows, from)
	return (s[0] + s[1]) + (s[2] + s[3]), (s[4] + s[5]) + (s[6] + s[7])
}

// stepsPlain is Steps in plain Go.
func stepsPlain(sums *[8]float64, src []float64, cols, rows, from int) {
	for r := range rows {
		here, above := src[r*from:], src[(r+1)*from:]
		for c, v := range here[:cols] {
			x, y := here[c+1]-v, above[c]-v
			sums[c%4] += float64(x * x)
			sums[4+c%4] += float64(y * y)
		}
	}
}

// wholeRows is how many rows of cols values there are; it panics if they are not whole, or
// not of whole lanes.
func wholeRows(n, cols int) int {
	if cols <= 0 || cols%4 != 0 || n%cols != 0 {
		panic("kernel: a block that is not whole rows of whole lanes")
	}
	return n / cols
}

// Scale multiplies by a number and counts what is then above 0, and what is at least floor.
func Scale(dst []float64, by, floor float64) (some, enough int) { return scaleBy(dst, by, floor) }

// scalePlain is Scale in plain Go, from index i on.
func scalePlain(dst []float64, by, floor float64, i int) (some, enough int) {
	for ; i < len(dst); i++ {
		v := dst[i] * by
		dst[i] = v
		if v > 0 {
			some++
		}
		if v >= floor {
			enough++
		}
	}
	return some, enough
}

// BlockMoments are sums over a block of cells: of v, x·v, y·v, x²·v, xy·v and y²·v, where x
// and y are cells from the block's middle. cols is a multiple of 4, or it panics. Column c
// goes into sums c%4, of a row and then of the block, which are added in pairs.
func BlockMoments(src []float64, cols int) (m [6]float64) {
	var sums [24]float64
	if wholeRows(len(src), cols) > 0 {
		blockMoments(&sums, src, cols)
	}
	for k := range m {
		s := sums[4*k:]
		m[k] = (s[0] + s[1]) + (s[2] + s[3])
	}
	return m
}

// blockMomentsPlain is BlockMoments in plain Go.
func blockMomentsPlain(sums *[24]float64, src []float64, cols int) {
	y := -0.5 * float64(len(src)/cols-1)
	for ; len(src) > 0; src = src[cols:] {
		var row [12]float64
		x := -0.5 * float64(cols-1)
		for c, v := range src[:cols] {
			xv := float64(v * x)
			row[c%4] += v
			row[4+c%4] += xv
			row[8+c%4] += float64(xv * x)
			x++
		}
		for k := range 4 {
			yv := float64(row[k] * y)
			sums[k] += row[k]
			sums[4+k] += row[4+k]
			sums[8+k] += yv
			sums[12+k] += row[8+k]
			sums[16+k] += float64(row[4+k] * y)
			sums[20+k] += float64(yv * y)
		}
		y++
	}
}
