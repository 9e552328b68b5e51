package kernel

import "math"

// Patch looks heights up on a raster whose columns and rows are polynomials of the place:
// at most quadratic in each of u = (east - MinE)·PerM - LowE and v likewise, within a box.
// With h00, h10, h01, h11 at the corners of a raster's cell and (u, v) within that,
//
//	h = h00 + u (h10-h00) + v (h01-h00) + u v (h00-h10-h01+h11).
//
// All is set before the first Sample.
type Patch struct {
	MinE, MinN, PerM         float64
	LowE, HighE, LowN, HighN float64 // the box: Low ≤ (x - Min)·PerM < High
	// Col and Row have the coefficient of uᵃvᵇ at 3b + a.
	Col, Row [9]float64
	// What lies beyond these is off the raster.
	LeastCol, MostCol, LeastRow, MostRow float64
	Heights                              []float32 // Rows of Cols
	Cols, Rows                           int       // at least 2

	prepared bool
	lanes    [4 * patchNumbers]float64 // the numbers, in all lanes
}

const patchNumbers = 7 + 2*9 + 4

// unknown is NaN as package math has it.
var unknown = math.NaN()

// prepare makes the lanes.
func (p *Patch) prepare() {
	p.prepared = true
	n := 0
	put := func(xs ...float64) {
		for _, x := range xs {
			p.lanes[n], p.lanes[n+1], p.lanes[n+2], p.lanes[n+3] = x, x, x, x
			n += 4
		}
	}
	put(p.MinE, p.MinN, p.PerM, p.LowE, p.HighE, p.LowN, p.HighN)
	put(p.Col[:]...)
	put(p.Row[:]...)
	put(p.LeastCol, p.MostCol, p.LeastRow, p.MostRow)
}

// Sample writes heights and their gradients (east, north) at places until one is outside
// the box, and returns how many. A height that is unknown, off the raster or beside a NaN,
// is NaN, and its gradient 0.
//
// Of places after one another that have one north, leastRow or more, columns and rows are
// polynomials of u alone, made once: they differ by rounding, a few 1e-16 of the greatest term.
func (p *Patch) Sample(height, slopeE, slopeN, east, north []float64) int {
	n := len(height)
	slopeE, slopeN, east, north = slopeE[:n], slopeN[:n], east[:n], north[:n]
	var r rowOfPatch
	for k := 0; k < n; {
		to := k + equals(north[k:])
		var done int
		if to-k < leastRow {
			for to < n && to-k < leastRow {
				to += equals(north[to:])
			}
			done = k + samplePatch(p, height[k:to], slopeE[k:to], slopeN[k:to], east[k:to], north[k:to])
		} else if !r.at(p, north[k]) {
			return k
		} else {
			done = k + sampleRow(p, &r, height[k:to], slopeE[k:to], slopeN[k:to], east[k:to])
		}
		if k = done; k < to {
			return k
		}
	}
	return n
}

// samplePatchPlain is Patch.Sample in plain Go, from index k on.
func samplePatchPlain(p *Patch, height, slopeE, slopeN, east, north []float64, k int) int {
	for ; k < len(height); k++ {
		fe, fn := float64((east[k]-p.MinE)*p.PerM), float64((north[k]-p.MinN)*p.PerM)
		if !(fe >= p.LowE && fe < p.HighE && fn >= p.LowN && fn < p.HighN) {
			return k
		}
		col, cu, cv := quadratic(&p.Col, fe-p.LowE, fn-p.LowN)
		row, ru, rv := quadratic(&p.Row, fe-p.LowE, fn-p.LowN)
		height[k], slopeE[k], slopeN[k] = p.bilinear(col, row, cu, cv, ru, rv)
	}
	return k
}

// quadratic is a polynomial and its derivatives by u and v.
func quadratic(a *[9]float64, u, v float64) (f, fu, fv float64) {
	p0 := a[0] + float64(u*(a[1]+float64(u*a[2])))
	p1 := a[3] + float64(u*(a[4]+float64(u*a[5])))
	p2 := a[6] + float64(u*(a[7]+float64(u*a[8])))
	q0 := a[1] + float64(2*u*a[2])
	q1 := a[4] + float64(2*u*a[5])
	q2 := a[7] + float64(2*u*a[8])
	f = p0 + float64(v*(p1+float64(v*p2)))
	fu = q0 + float64(v*(q1+float64(v*q2)))
	fv = p1 + float64(2*v*p2)
	return f, fu, fv
}
