package kernel

import "math"

// Edges writes the standard normal density at each z and the mass beyond |z|:
// NormalDensity(z) and NormalUpper(|z|), to the bit. None is NaN. Of those below
// seriesEnd and those from there on it takes four at a time, as they come; work is kept
// from one call to the next.
func Edges(density, tail, z []float64, work *EdgeWork) {
	n := len(z)
	density, tail = density[:n], tail[:n]
	for i, v := range z {
		density[i] = -0.5 * float64(v*v)
	}
	Exps(density, density)
	for i, v := range density {
		density[i] = InvSqrt2Pi * v
	}
	w := work
	w.at[0], w.at[1], w.x[0], w.x[1] = w.at[0][:0], w.at[1][:0], w.x[0][:0], w.x[1][:0]
	for i, v := range z {
		switch x := math.Abs(v); {
		case x > normalEnd:
			tail[i] = 0
		case x < seriesEnd:
			w.at[0], w.x[0] = append(w.at[0], int32(i)), append(w.x[0], x)
		default:
			w.at[1], w.x[1] = append(w.at[1], int32(i)), append(w.x[1], x)
		}
	}
	normalSeries(w.x[0])
	for j, i := range w.at[0] {
		tail[i] = 0.5 - float64(density[i]*w.x[0][j])
	}
	normalFraction(w.x[1])
	for j, i := range w.at[1] {
		tail[i] = density[i] / w.x[1][j]
	}
}

// EdgeWork is the memory of Edges.
type EdgeWork struct {
	at [2][]int32
	x  [2][]float64
}

// normalSeriesPlain replaces each x from i on by normalSum.
func normalSeriesPlain(x []float64, i int) {
	for ; i < len(x); i++ {
		x[i] = normalSum(x[i])
	}
}

// normalFractionPlain replaces each x from i on by millsInverse.
func normalFractionPlain(x []float64, i int) {
	for ; i < len(x); i++ {
		x[i] = millsInverse(x[i])
	}
}
