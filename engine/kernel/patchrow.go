package kernel

import "math"

// leastRow is from how many places of one north on a row's own polynomials are worth
// their making.
const leastRow = 8

// rowOfPatch is a Patch at one north: columns, rows and their derivatives by v are
// polynomials of u alone, at most quadratic.
type rowOfPatch [rowNumbers]float64

// What is in a rowOfPatch: coefficients of u⁰, u¹ and u², and twice that of u².
const (
	rowMinE = iota
	rowPerM
	rowLowE
	rowHighE
	rowLeastCol
	rowMostCol
	rowLeastRow
	rowMostRow
	rowCol
	rowColV    = rowCol + 4
	rowRow     = rowColV + 3
	rowRowV    = rowRow + 4
	rowNumbers = rowRowV + 3
)

// at makes r the row of a north; false if that is outside the box.
func (r *rowOfPatch) at(p *Patch, north float64) bool {
	fn := float64((north - p.MinN) * p.PerM)
	if !(fn >= p.LowN && fn < p.HighN) {
		return false
	}
	v := fn - p.LowN
	r[rowMinE], r[rowPerM], r[rowLowE], r[rowHighE] = p.MinE, p.PerM, p.LowE, p.HighE
	r[rowLeastCol], r[rowMostCol], r[rowLeastRow], r[rowMostRow] = p.LeastCol, p.MostCol, p.LeastRow, p.MostRow
	for _, of := range [2]struct {
		a     *[9]float64
		f, fv int
	}{{&p.Col, rowCol, rowColV}, {&p.Row, rowRow, rowRowV}} {
		for k := range 3 {
			r[of.f+k] = of.a[k] + float64(v*(of.a[3+k]+float64(v*of.a[6+k])))
			r[of.fv+k] = of.a[3+k] + float64(2*v*of.a[6+k])
		}
		r[of.f+3] = 2 * r[of.f+2]
	}
	return true
}

// sampleRowPlain is Patch.Sample of places that have one north in plain Go, from index k on.
func sampleRowPlain(p *Patch, r *rowOfPatch, height, slopeE, slopeN, east []float64, k int) int {
	for ; k < len(height); k++ {
		fe := float64((east[k] - p.MinE) * p.PerM)
		if !(fe >= p.LowE && fe < p.HighE) {
			return k
		}
		u := fe - p.LowE
		of := func(a int) (f, fu float64) {
			return r[a] + float64(u*(r[a+1]+float64(u*r[a+2]))), r[a+1] + float64(u*r[a+3])
		}
		col, cu := of(rowCol)
		row, ru := of(rowRow)
		cv := r[rowColV] + float64(u*(r[rowColV+1]+float64(u*r[rowColV+2])))
		rv := r[rowRowV] + float64(u*(r[rowRowV+1]+float64(u*r[rowRowV+2])))
		height[k], slopeE[k], slopeN[k] = p.bilinear(col, row, cu, cv, ru, rv)
	}
	return k
}

// bilinear is the height at a column and row, and its gradient by the derivatives of these.
func (p *Patch) bilinear(col, row, cu, cv, ru, rv float64) (h, se, sn float64) {
	if !(col >= p.LeastCol && col <= p.MostCol && row >= p.LeastRow && row <= p.MostRow) {
		return unknown, 0, 0
	}
	c := max(0, min(int(col), p.Cols-2))
	w := max(0, min(int(row), p.Rows-2))
	u, v := col-float64(c), row-float64(w)
	at := w*p.Cols + c
	first, second := p.Heights[at:at+2:at+2], p.Heights[at+p.Cols:at+p.Cols+2:at+p.Cols+2]
	h00 := float64(first[0])
	dc, dr := float64(first[1])-h00, float64(second[0])-h00
	twist := float64(second[1]) - float64(second[0]) - dc
	h = h00 + float64(u*dc) + float64(v*dr) + float64(u*v*twist)
	if h != h {
		return unknown, 0, 0
	}
	hc, hr := (dc+float64(v*twist))*p.PerM, (dr+float64(u*twist))*p.PerM
	return h, float64(hc*cu) + float64(hr*ru), float64(hc*cv) + float64(hr*rv)
}

// equals is how many numbers from the first on are the same.
func equals(x []float64) int {
	first := math.Float64bits(x[0])
	n := 1
	for ; n+4 <= len(x); n += 4 { // without asking of each one
		y := x[n : n+4 : n+4]
		if (math.Float64bits(y[0])^first)|(math.Float64bits(y[1])^first)|(math.Float64bits(y[2])^first)|(math.Float64bits(y[3])^first) != 0 {
			break
		}
	}
	for n < len(x) && math.Float64bits(x[n]) == first {
		n++
	}
	return n
}
