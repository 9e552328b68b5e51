package kernel

import "golang.org/x/sys/cpu"

// vectors is whether the CPU has AVX2 and the system keeps its registers;
// GODEBUG=cpu.avx2=off switches it off.
var vectors = cpu.X86.HasAVX2

const valueBytes = 8

func spread(dst, src []float64, at, stride int, weight []float64) {
	n := 0
	if vectors {
		if n = len(dst) &^ 3; n > 0 {
			spreadAVX2(&dst[0], &src[at], &weight[0], n, stride*valueBytes, len(weight)-1)
		}
	}
	spreadPlain(dst, src, at, stride, weight, n)
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
