package kernel

func spread(dst, src []float64, at, stride int, weight []float64) {
	spreadPlain(dst, src, at, stride, weight, 0)
}
