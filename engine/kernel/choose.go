//go:build !amd64

package kernel

func spread(dst, src []float64, at, stride int, weight []float64) {
	spreadPlain(dst, src, at, stride, weight, 0)
}

func weigh(dst, mass, logs []float64, most, least float64) {
	weighPlain(dst, mass, logs, most, least, 0)
}
