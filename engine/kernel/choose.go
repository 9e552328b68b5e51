//go:build !amd64

package kernel

func spread(dst, src []float64, at, stride, cols, from int, weight []float64) {
	spreadRowsPlain(dst, src, at, stride, cols, from, weight)
}

func logNormal(dst, residual, variance []float64, logWeight float64) {
	logNormalPlain(dst, residual, variance, logWeight, 0)
}

func logAdd(dst []float64, log float64) { logAddPlain(dst, log, 0) }

func weigh(dst, mass, logs []float64, most, least float64) {
	weighPlain(dst, mass, logs, most, least, 0)
}

func addScaled(dst, src []float64, weight float64) { addScaledPlain(dst, src, weight, 0) }

func combine(dst, src []float64, at []int, weight []float64) {
	combinePlain(dst, src, at, weight, 0)
}

func weighBy(dst, mass, src []float64, at []int, weight []float64, sum *[16]float64) {
	weighByPlain(dst, mass, src, at, weight, sum, 0)
}

func combineRows(dst []float64, to []Row, src []float64, taps []RowTap, weight []float64, at []int) {
	combineRowsPlain(dst, to, src, taps, weight, at)
}

func weighRows(sum float64, dst, mass []float64, rows []Row, src []float64, first, step, pitch int, weight *[4]float64) float64 {
	return weighRowsPlain(sum, dst, mass, rows, src, first, step, pitch, weight)
}

func widen(to []Extent, rows []Row, cols, beyond int32) { widenPlain(to, rows, cols, beyond) }

func copyBlock(dst, src []float64, cols, rows, to, from int) {
	copyBlockPlain(dst, src, cols, rows, to, from)
}

func dropBelow(sums *[4]float64, dst []float64, floor float64) bool {
	return dropBelowPlain(sums, dst, floor, 0)
}

func logs(dst, src []float64) { logsPlain(dst, src, 0) }

func exps(dst, src []float64) { expsPlain(dst, src, 0) }

func normalSeries(x []float64) { normalSeriesPlain(x, 0) }

func normalFraction(x []float64) { normalFractionPlain(x, 0) }

func beyond(sum *[4]float64, mass, w2, v, is []float64, r2, excess float64) {
	beyondPlain(sum, mass, w2, v, is, r2, excess, 0)
}

func samplePatch(p *Patch, height, slopeE, slopeN, east, north []float64) int {
	return samplePatchPlain(p, height, slopeE, slopeN, east, north, 0)
}

func likely(l *Likely, sums *[8]float64, dst, mass, residual, row, extra, flat []float64, least float64) {
	likelyPlain(l, sums, dst, mass, residual, row, extra, flat, least, 0)
}

func ground(g *Ground, residual, extra, row, flat, height, slopeE, slopeN, variance []float64) {
	groundPlain(g, residual, extra, row, flat, height, slopeE, slopeN, variance, 0)
}

func sampleRow(p *Patch, r *rowOfPatch, height, slopeE, slopeN, east []float64) int {
	return sampleRowPlain(p, r, height, slopeE, slopeN, east, 0)
}

func dense(src []float64) bool { return densePlain(src, 0) }

func count(src []float64) int { return countPlain(src, 0) }

func roots(dst, src []float64, cols, rows, to int) { rootsPlain(dst, src, cols, rows, to) }

func steps(sums *[8]float64, src []float64, cols, rows, from int) {
	stepsPlain(sums, src, cols, rows, from)
}

func scaleBy(dst []float64, by, floor float64) (some, enough int) {
	return scalePlain(dst, by, floor, 0)
}

func blockMoments(sums *[24]float64, src []float64, cols int) { blockMomentsPlain(sums, src, cols) }
