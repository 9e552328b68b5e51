package kernel

import "golang.org/x/sys/cpu"

// vectors is whether the CPU has AVX2 and the system keeps its registers;
// GODEBUG=cpu.avx2=off switches it off.
var vectors = cpu.X86.HasAVX2

const valueBytes = 8

func spread(dst, src []float64, at, stride, cols, from int, weight []float64) {
	rows := len(dst) / cols
	switch whole := cols &^ 3; {
	case !vectors:
		spreadRowsPlain(dst, src, at, stride, cols, from, weight)
	case whole == cols:
		spreadAVX2(&dst[0], &src[at], &weight[0], cols, rows, from*valueBytes, stride*valueBytes, len(weight)-1)
	default:
		for r := range rows {
			row := dst[r*cols : (r+1)*cols]
			if whole > 0 {
				spreadAVX2(&row[0], &src[at+r*from], &weight[0], whole, 1, 0, stride*valueBytes, len(weight)-1)
			}
			spreadPlain(row, src, at+r*from, stride, weight, whole)
		}
	}
}

func logNormal(dst, residual, variance []float64, logWeight float64) {
	n := 0
	if vectors {
		if n = len(dst) &^ 3; n > 0 {
			logNormalAVX2(&dst[0], &residual[0], &variance[0], n, logWeight)
		}
	}
	logNormalPlain(dst, residual, variance, logWeight, n)
}

func logAdd(dst []float64, log float64) {
	n := 0
	if vectors {
		if n = len(dst) &^ 3; n > 0 {
			logAddAVX2(&dst[0], n, log)
		}
	}
	logAddPlain(dst, log, n)
}

func weigh(dst, mass, logs []float64, most, least float64) {
	n := 0
	if vectors {
		if n = len(dst) &^ 3; n > 0 {
			weighAVX2(&dst[0], &mass[0], &logs[0], n, most, least)
		}
	}
	weighPlain(dst, mass, logs, most, least, n)
}

func addScaled(dst, src []float64, weight float64) {
	n := 0
	if vectors {
		if n = len(dst) &^ 3; n > 0 {
			addScaledAVX2(&dst[0], &src[0], n, weight)
		}
	}
	addScaledPlain(dst, src, weight, n)
}

func combine(dst, src []float64, at []int, weight []float64) {
	n := 0
	if vectors {
		if n = len(dst) &^ 3; n > 0 {
			combineAVX2(&dst[0], &src[0], &at[0], &weight[0], n, len(at))
		}
	}
	combinePlain(dst, src, at, weight, n)
}

func weighBy(dst, mass, src []float64, at []int, weight []float64, sum *[16]float64) {
	n := 0
	if vectors {
		if n = len(dst) &^ 3; n > 0 {
			weighByAVX2(&dst[0], &mass[0], &src[0], &at[0], &weight[0], &sum[0], n, len(at))
		}
	}
	weighByPlain(dst, mass, src, at, weight, sum, n)
}

func combineRows(dst []float64, to []Row, src []float64, taps []RowTap, weight []float64, at []int) {
	if !vectors || len(dst) == 0 || len(src) == 0 {
		combineRowsPlain(dst, to, src, taps, weight, at)
		return
	}
	if combineRowsAVX2(&dst[0], &to[0].Col, &src[0], &taps[0].Cols, &weight[0], &at[0], len(to), len(taps), len(dst), len(src)) != len(to) {
		panic("kernel: a row that is not in what it is of")
	}
}

func weighRows(sum float64, dst, mass []float64, rows []Row, src []float64, first, step, pitch int, weight *[4]float64) float64 {
	last := len(src) - 3*pitch
	if !vectors || len(rows) == 0 || len(mass) == 0 || last <= 0 {
		return weighRowsPlain(sum, dst, mass, rows, src, first, step, pitch, weight)
	}
	_ = dst[len(mass)-1]
	if weighRowsAVX2(&dst[0], &mass[0], &rows[0].Col, &src[0], &weight[0], len(rows), first, step, pitch, len(mass), last, &sum) != len(rows) {
		panic("kernel: a row that is not in what it is of")
	}
	return sum
}

func widen(to []Extent, rows []Row, cols, beyond int32) {
	if !vectors || len(rows) == 0 {
		widenPlain(to, rows, cols, beyond)
		return
	}
	widenAVX2(&to[0].First, &rows[0].Col, len(rows), cols, beyond)
}

func copyBlock(dst, src []float64, cols, rows, to, from int) {
	if !vectors {
		copyBlockPlain(dst, src, cols, rows, to, from)
		return
	}
	copyBlockAVX2(&dst[0], &src[0], cols, rows, to*valueBytes, from*valueBytes)
}

func dropBelow(sums *[4]float64, dst []float64, floor float64) bool {
	n, some := 0, 0
	if vectors {
		if n = len(dst) &^ 3; n > 0 {
			some = dropBelowAVX2(&sums[0], &dst[0], n, floor)
		}
	}
	return dropBelowPlain(sums, dst, floor, n) || some != 0
}

func logs(dst, src []float64) {
	n := 0
	if vectors {
		if n = len(dst) &^ 3; n > 0 {
			logsAVX2(&dst[0], &src[0], n)
		}
	}
	logsPlain(dst, src, n)
}

func exps(dst, src []float64) {
	n := 0
	if vectors {
		if n = len(dst) &^ 3; n > 0 {
			expsAVX2(&dst[0], &src[0], n)
		}
	}
	expsPlain(dst, src, n)
}

func normalSeries(x []float64) {
	n := 0
	if vectors {
		if n = len(x) &^ 3; n > 0 {
			normalSeriesAVX2(&x[0], n)
		}
	}
	normalSeriesPlain(x, n)
}

func normalFraction(x []float64) {
	n := 0
	if vectors {
		if n = len(x) &^ 3; n > 0 {
			normalFractionAVX2(&x[0], n)
		}
	}
	normalFractionPlain(x, n)
}

func beyond(sum *[4]float64, mass, w2, v, is []float64, r2, excess float64) {
	n := 0
	if vectors {
		if n = len(mass) &^ 3; n > 0 {
			beyondAVX2(&sum[0], &mass[0], &w2[0], &v[0], &is[0], &quick[0].q, n, r2, excess)
		}
	}
	beyondPlain(sum, mass, w2, v, is, r2, excess, n)
}

func samplePatch(p *Patch, height, slopeE, slopeN, east, north []float64) int {
	n := 0
	// Places in a raster are numbers of 32 bits there, and preparing costs as much as a few.
	if vectors && len(height) > 7 && p.in32() {
		if !p.prepared {
			p.prepare()
		}
		n = samplePatchAVX2(&height[0], &slopeE[0], &slopeN[0], &east[0], &north[0], &p.lanes[0], &p.Heights[0], len(height)&^3, p.Cols, p.Rows-2)
	}
	return samplePatchPlain(p, height, slopeE, slopeN, east, north, n)
}

func likely(l *Likely, sums *[8]float64, dst, mass, residual, row, extra, flat []float64, least float64) {
	n := 0
	if vectors {
		if n = len(dst) &^ 3; n > 0 {
			lanes := sixLanes(l.Noise, l.Mean, l.Least, l.Weight, l.Flat, least)
			likelyAVX2(&sums[0], &dst[0], &mass[0], &residual[0], &row[0], &extra[0], &flat[0], &lanes[0], n)
		}
	}
	likelyPlain(l, sums, dst, mass, residual, row, extra, flat, least, n)
}

func ground(g *Ground, residual, extra, row, flat, height, slopeE, slopeN, variance []float64) {
	n := 0
	if vectors {
		if n = len(residual) &^ 3; n > 0 {
			lanes := sixLanes(g.TopM, g.DistanceM, g.MapFactor, g.SlopeVar, g.Tilt, g.Flat)
			groundAVX2(&residual[0], &extra[0], &row[0], &flat[0], &height[0], &slopeE[0], &slopeN[0], &variance[0], &lanes[0], n)
		}
	}
	groundPlain(g, residual, extra, row, flat, height, slopeE, slopeN, variance, n)
}

// sixLanes has each number four times.
func sixLanes(x ...float64) (lanes [24]float64) {
	for k, v := range x {
		lanes[4*k], lanes[4*k+1], lanes[4*k+2], lanes[4*k+3] = v, v, v, v
	}
	return lanes
}

// in32 says whether places in the raster are numbers of 32 bits.
func (p *Patch) in32() bool {
	return len(p.Heights) < 1<<29 && p.Cols > 1 && p.Rows > 1 && p.Cols <= len(p.Heights)/p.Rows
}

func sampleRow(p *Patch, r *rowOfPatch, height, slopeE, slopeN, east []float64) int {
	n := 0
	if vectors && len(height) > 3 && p.in32() {
		n = sampleRowAVX2(&height[0], &slopeE[0], &slopeN[0], &east[0], &r[0], &p.Heights[0], len(height)&^3, p.Cols, p.Rows-2)
	}
	return sampleRowPlain(p, r, height, slopeE, slopeN, east, n)
}

func dense(src []float64) bool {
	n := 0
	if vectors {
		if n = len(src) &^ 3; n > 0 && denseAVX2(&src[0], n) != 0 {
			return false
		}
	}
	return densePlain(src, n)
}

func count(src []float64) int {
	n, above := 0, 0
	if vectors {
		if n = len(src) &^ 3; n > 0 {
			above = countAVX2(&src[0], n)
		}
	}
	return above + countPlain(src, n)
}

func roots(dst, src []float64, cols, rows, to int) {
	if !vectors {
		rootsPlain(dst, src, cols, rows, to)
		return
	}
	rootsAVX2(&dst[0], &src[0], cols, rows, to*valueBytes)
}

func steps(sums *[8]float64, src []float64, cols, rows, from int) {
	if !vectors {
		stepsPlain(sums, src, cols, rows, from)
		return
	}
	stepsAVX2(&sums[0], &src[0], cols, rows, from*valueBytes)
}

func scaleBy(dst []float64, by, floor float64) (some, enough int) {
	n := 0
	if vectors {
		if n = len(dst) &^ 3; n > 0 {
			some, enough = scaleAVX2(&dst[0], n, by, floor)
		}
	}
	a, b := scalePlain(dst, by, floor, n)
	return some + a, enough + b
}

func blockMoments(sums *[24]float64, src []float64, cols int) {
	if !vectors {
		blockMomentsPlain(sums, src, cols)
		return
	}
	rows, first := len(src)/cols, -0.5*float64(cols-1)
	x := [4]float64{first, first + 1, first + 2, first + 3}
	blockMomentsAVX2(&sums[0], &src[0], &x[0], cols, rows, -0.5*float64(rows-1))
}
