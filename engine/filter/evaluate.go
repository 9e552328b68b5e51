package filter

import (
	"math"

	"leadline/engine/kernel"
)

// evaluation is a likelihood as it is taken at places, on a lattice of a spacing.
type evaluation struct {
	wants  Wants
	lin    LinearLikelihood
	like   Likelihood
	noise  Noise
	nw     noiseWork
	least  float64
	linear bool
}

func newEvaluation(l any, h float64) (e evaluation) {
	e.least = square(leastSigma * h)
	e.wants = WantPosition
	switch l := l.(type) {
	case LinearLikelihood:
		e.lin, e.linear, e.noise = l, true, l.Noise()
		e.nw = newNoiseWork(&e.noise, l.Rows())
		e.wants |= l.Wants()
	case Likelihood:
		e.like = l
		e.wants |= l.Wants()
	default:
		panic("filter: not a likelihood")
	}
	return e
}

// logsOf writes the logs at the places of w.at into w.cellLogs.
func (w *Workspace) logsOf(e *evaluation) {
	n := w.at.Len()
	w.cellLogs = resize(w.cellLogs, n)
	if !e.linear {
		clear(w.cellLogs)
		e.like.LogLikelihood(w.cellLogs, &w.at)
		return
	}
	w.linearize(e)
	if e.nw.simple() {
		w.densities(&e.nw, n, e.least)
		return
	}
	for j := range n {
		w.cellLogs[j] = e.nw.density(&w.terms, j, e.least)
	}
}

// linearize sets w.terms to those at the places of w.at.
func (w *Workspace) linearize(e *evaluation) {
	w.terms.Reset(w.at.Len(), e.lin.Rows(), 2)
	e.lin.Linearize(&w.terms, &w.at, nil, nil)
}

// likely is a simple noise in terms of densities.
func (e *evaluation) likely() kernel.Likely {
	part := &e.nw.parts[0]
	return kernel.Likely{
		Noise: part.Cov[0], Mean: part.Mean, Least: e.least,
		Weight: float64(part.Weight * kernel.InvSqrt2Pi), Flat: float64(e.noise.FlatWeight * e.noise.FlatDensity),
	}
}

// ofPosition is the variance of what the rows take of a position at i that has
// the variance within along each axis.
func (t *Terms) ofPosition(i, m int, within float64) sym2 {
	row := t.Row[i*m*2 : (i+1)*m*2]
	p := sym2{a: float64(within * (float64(row[0]*row[0]) + float64(row[1]*row[1])))}
	if m == 2 {
		p.b = float64(within * (float64(row[0]*row[2]) + float64(row[1]*row[3])))
		p.c = float64(within * (float64(row[2]*row[2]) + float64(row[3]*row[3])))
	}
	return p
}

// leastSigma is the least standard deviation that a measurement has on a lattice,
// in cells: sharper ones are made as blunt as that. The sum over points of a
// density so wide differs from its integral by at most 2·exp(-2π²·leastSigma²) of
// it, 1.4 % (Poisson's summation formula); a sharper one would be seen or missed
// as the points happen to lie. What is blunter is taken at the points as it is,
// without a variance for the cell: a lattice's masses have the belief's own.
const leastSigma = 0.5

// blunt is the variance of a measurement on a lattice over that of the first part
// of its noise, along the first row: above 1 the lattice adds to it.
func (w *noiseWork) blunt(t *Terms, i int, least float64) float32 {
	if flat := t.Flat[i]; flat == flat {
		return 0
	}
	row := t.Row[i*w.m*2 : (i+1)*w.m*2]
	g := float64(row[0]*row[0]) + float64(row[1]*row[1])
	return float32(float64(least*g) * w.power / w.noise(0, t.Extra[i]).a)
}

// bluntAll writes blunt of the cells that w.terms are of to their places.
func (w *noiseWork) bluntAll(dst []float32, cells []uint16, t *Terms, least float64) {
	if w.m != 1 {
		for j, x := range cells {
			dst[x] = w.blunt(t, j, least)
		}
		return
	}
	noise := w.parts[0].Cov[0]
	for j, x := range cells {
		dst[x] = 0
		if flat := t.Flat[j]; flat != flat {
			e, n := t.Row[2*j], t.Row[2*j+1]
			g := float64(e*e) + float64(n*n)
			dst[x] = float32(float64(least*g) * w.power / (noise + t.Extra[j]))
		}
	}
}

// density returns the log likelihood at a point of a lattice, on which no
// measurement is sharper than the variance least along each axis.
func (w *noiseWork) density(t *Terms, i int, least float64) float64 {
	if flat := t.Flat[i]; flat == flat {
		return float64(w.power * flat)
	}
	m := w.m
	var r [2]float64
	copy(r[:], t.Residual[i*m:(i+1)*m])
	p := t.ofPosition(i, m, least)
	if len(w.parts) == 1 && math.IsInf(w.logFlat, -1) {
		log, _ := w.part(0, w.short(0, p, t.Extra[i]), r, t.Extra[i])
		return float64(w.power*w.logW[0]) + log
	}
	var logs [maxParts]float64
	most := w.logFlat
	for c := range w.parts {
		l, _ := w.part(c, w.short(c, p, t.ExtraOf(i, c)), r, t.ExtraOf(i, c))
		logs[c] = w.logW[c] + l/w.power
		most = max(most, logs[c])
	}
	if math.IsInf(most, -1) {
		return most
	}
	sum := kernel.Exp(w.logFlat - most)
	for c := range w.parts {
		sum += kernel.Exp(logs[c] - most)
	}
	return float64(w.power * (most + kernel.Log(sum)))
}

// simple says whether the noise is one Gaussian of one component, with outliers or
// without, that counts in full.
func (w *noiseWork) simple() bool { return w.m == 1 && len(w.parts) == 1 && w.power == 1 }

// densities writes noiseWork.density of n points into w.cellLogs, for a simple
// noise.
func (w *Workspace) densities(nw *noiseWork, n int, least float64) {
	t, noise, mean := &w.terms, nw.parts[0].Cov[0], nw.parts[0].Mean
	w.cellLogs, w.residual, w.variance = resize(w.cellLogs, n), resize(w.residual, n), resize(w.variance, n)
	for j := range n {
		if flat := t.Flat[j]; flat == flat {
			w.residual[j], w.variance[j] = 0, 1
			continue
		}
		e, n := t.Row[2*j], t.Row[2*j+1]
		v := noise + t.Extra[j]
		if wide := float64(least * (float64(e*e) + float64(n*n))); wide > v {
			v = (wide - v) + v
		}
		w.residual[j], w.variance[j] = t.Residual[j]-mean, v
	}
	kernel.LogNormal(w.cellLogs, w.residual, w.variance, nw.logW[0])
	if !math.IsInf(nw.logFlat, -1) {
		kernel.LogAdd(w.cellLogs, nw.logFlat)
	}
	for j, flat := range t.Flat {
		if flat == flat {
			w.cellLogs[j] = flat
		}
	}
}

// short returns the least variance that makes the noise of part c as wide as a
// covariance along every direction.
func (w *noiseWork) short(c int, least sym2, extra float64) sym2 {
	n := w.noise(c, extra)
	return sym2{n.a / w.power, n.b / w.power, n.c / w.power}.short(w.m, least)
}

// short returns the least covariance that makes s as wide as another one along
// every direction.
func (s sym2) short(m int, least sym2) sym2 {
	if m == 1 {
		return sym2{a: max(0, least.a-s.a)}
	}
	d := sym2{least.a - s.a, least.b - s.b, least.c - s.c}
	mid, half := 0.5*(d.a+d.c), 0.5*(d.a-d.c)
	r := math.Sqrt(float64(half*half) + float64(d.b*d.b))
	switch {
	case mid+r <= 0:
		return sym2{}
	case mid-r >= 0:
		return d
	}
	// The positive eigenvalue times its projection, (d - (mid - r)·1)/2r.
	x := (mid + r) / (2 * r)
	return sym2{float64(x * (d.a - mid + r)), float64(x * d.b), float64(x * (d.c - mid + r))}
}
