package kernel

import "math"

// LogNormal writes logWeight + ln N(residual; 0, variance).
func LogNormal(dst, residual, variance []float64, logWeight float64) {
	residual, variance = residual[:len(dst)], variance[:len(dst)]
	for _, v := range variance {
		if !(v >= 0x1p-1022 && v <= math.MaxFloat64) { // no vector code for these
			logNormalPlain(dst, residual, variance, logWeight, 0)
			return
		}
	}
	logNormal(dst, residual, variance, logWeight)
}

// logNormalPlain is LogNormal in plain Go, from index i on.
func logNormalPlain(dst, residual, variance []float64, logWeight float64, i int) {
	for ; i < len(dst); i++ {
		r, v := residual[i], variance[i]
		log := -0.5 * (float64(float64(r*r)*(1/v)) + Log(v))
		dst[i] = logWeight + (log - LogSqrt2Pi)
	}
}

// LogAdd makes every number the log of the sum of its exponential and that of
// log, which is finite. None is NaN or +Inf.
func LogAdd(dst []float64, log float64) { logAdd(dst, log) }

// logAddPlain is LogAdd in plain Go, from index i on.
func logAddPlain(dst []float64, log float64, i int) {
	for ; i < len(dst); i++ {
		x := dst[i]
		dst[i] = max(x, log) + Log(1+Exp(-math.Abs(x-log)))
	}
}
