package kernel

import "math"

// Logs writes Log of each number.
func Logs(dst, src []float64) {
	src = src[:len(dst)]
	for _, v := range src {
		if !(v >= 0x1p-1022 && v <= math.MaxFloat64) { // no vector code for these
			logsPlain(dst, src, 0)
			return
		}
	}
	logs(dst, src)
}

// logsPlain is Logs in plain Go, from index i on.
func logsPlain(dst, src []float64, i int) {
	for ; i < len(dst); i++ {
		dst[i] = Log(src[i])
	}
}

// Exps writes Exp of each number, of which none is above 0 or NaN.
func Exps(dst, src []float64) { exps(dst, src[:len(dst)]) }

// expsPlain is Exps in plain Go, from index i on.
func expsPlain(dst, src []float64, i int) {
	for ; i < len(dst); i++ {
		dst[i] = Exp(src[i])
	}
}
