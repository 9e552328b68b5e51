package filter

// Smooth runs one step backward: from the masses given all measurements after
// a step (later, one per Gaussian after the step's updates), the trace of
// that step, and the masses before it (earlier, after the updates then), it
// writes into dst the masses before the step given all measurements.
//
//	γ(i) = α(i) Σ_j w(i→j) γ'(j) / β(j),   β(j) = Σ_i α(i) w(i→j)
//
// dst has the length of earlier and must not overlap the others.
// Source: the forward-backward recursion in its filter form (Kitagawa, JASA
// 82, 1987).
func Smooth(dst, earlier, later []float64, t *Trace) {
	beta := make([]float64, t.Predicted)
	for j, s := range t.Source {
		beta[t.Target[j]] += float64(earlier[s] * t.Weight[j])
	}
	ratio := make([]float64, t.Predicted)
	for i, p := range t.Kept {
		ratio[p] = later[i] / beta[p]
	}
	clear(dst)
	for j, s := range t.Source {
		dst[s] += float64(float64(earlier[s]*t.Weight[j]) * ratio[t.Target[j]])
	}
}
