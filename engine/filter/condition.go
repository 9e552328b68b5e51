package filter

import (
	"math"

	"leadline/engine/kernel"
)

// noiseWork is a Noise with what does not change from cell to cell.
type noiseWork struct {
	m       int
	parts   []NoisePart
	logW    [maxParts]float64
	power   float64
	logFlat float64 // ln(FlatWeight·FlatDensity), -Inf without
	logZ    float64 // m·ln sqrt(2π)
	logBeta float64 // ln power
	// The last noise of each part and its log determinant: neighbouring cells
	// often share it.
	last    [maxParts]sym2
	lastLog [maxParts]float64
}

const maxParts = 4

func newNoiseWork(n *Noise, m int) noiseWork {
	if len(n.Parts) == 0 || len(n.Parts) > maxParts || m < 1 || m > 2 {
		panic("filter: a noise needs one to four parts and one or two rows")
	}
	w := noiseWork{m: m, parts: n.Parts, power: n.Power, logZ: float64(m) * kernel.LogSqrt2Pi}
	if w.power == 0 {
		w.power = 1
	}
	for i, p := range n.Parts {
		w.logW[i] = kernel.Log(p.Weight)
	}
	w.logFlat = kernel.Log(n.FlatWeight * n.FlatDensity)
	w.logBeta = kernel.Log(w.power)
	return w
}

// sym2 is a symmetric 2×2 matrix (a b; b c), or a alone.
type sym2 struct{ a, b, c float64 }

// logNormal returns ln N(r; 0, s) without the (2π)^-m/2, and the inverse.
func (s sym2) logNormal(m int, r [2]float64) (log float64, inv sym2) {
	if m == 1 {
		inv.a = 1 / s.a
		return -0.5 * (float64(float64(r[0]*r[0])*inv.a) + kernel.Log(s.a)), inv
	}
	det := float64(s.a*s.c) - float64(s.b*s.b)
	inv = sym2{s.c / det, -s.b / det, s.a / det}
	q := float64(float64(r[0]*r[0])*inv.a) + float64(2*r[0]*r[1]*inv.b) + float64(float64(r[1]*r[1])*inv.c)
	return -0.5 * (q + kernel.Log(det)), inv
}

// inverse returns the inverse; of one row, 1/a alone.
func (s sym2) inverse(m int) sym2 {
	if m == 1 {
		return sym2{a: 1 / s.a}
	}
	det := float64(s.a*s.c) - float64(s.b*s.b)
	return sym2{s.c / det, -s.b / det, s.a / det}
}

func (s sym2) logDet(m int) float64 {
	if m == 1 {
		return kernel.Log(s.a)
	}
	return kernel.Log(float64(s.a*s.c) - float64(s.b*s.b))
}

// condition updates g by the terms at i and returns the log likelihood there.
//
// With Power β the Gaussian parts count as N(r; 0, R)^β, which is N(r; 0,
// R/β) times a constant; the flat part counts inside the power, ln p =
// β ln(Σ parts + flat), where each part enters by its own marginal to the
// power 1/β. So n steps of power 1/n give what one of power 1 gives, up to
// what the quantities learn in between.
func (w *noiseWork) condition(g *gaussian, k int, angular uint, t *Terms, i int) float64 {
	if flat := t.Flat[i]; flat == flat {
		return float64(w.power * flat)
	}
	m := w.m
	rows := t.Row[i*m*k : (i+1)*m*k]
	var r [2]float64
	copy(r[:], t.Residual[i*m:(i+1)*m])
	var gain [2][MaxK]float64
	p := g.ofRows(&gain, k, m, rows)
	if len(w.parts) == 1 && math.IsInf(w.logFlat, -1) {
		log, inv := w.part(0, p, r, t.Extra[i])
		g.gainBy(k, m, &gain, w.shifted(0, r), inv)
		return float64(w.power*w.logW[0]) + log
	}
	// Mixture: responsibilities, then one Gaussian by moments.
	var logs [maxParts + 1]float64
	most := w.logFlat
	for c := range w.parts {
		l, _ := w.part(c, p, r, t.ExtraOf(i, c))
		logs[c] = w.logW[c] + l/w.power
		most = max(most, logs[c])
	}
	if math.IsInf(most, -1) {
		return most
	}
	n := len(w.parts)
	logs[n] = w.logFlat
	sum := 0.0
	for c := range n + 1 {
		logs[c] = kernel.Exp(logs[c] - most)
		sum += logs[c]
	}
	if w.power == 1 {
		prior := *g
		var mix gaussian
		for c := range n + 1 {
			share := logs[c] / sum
			if share < 1e-12 {
				continue
			}
			post := prior
			if c < n {
				_, inv := w.part(c, p, r, t.ExtraOf(i, c))
				post.gainBy(k, m, &gain, w.shifted(c, r), inv)
			}
			post.mass = share
			if mix.mass == 0 {
				mix = post
			} else {
				mix.absorb(k, &post, angular)
			}
		}
		mix.mass = prior.mass
		*g = mix
		return most + kernel.Log(sum)
	}
	// One of many views of the same error: a scale mixture updates with the
	// information of its parts, each by its share, times the power.
	var info sym2
	mean := 0.0
	for c := range n {
		if share := logs[c] / sum; share > 1e-6 {
			inv := w.noise(c, t.ExtraOf(i, c)).inverse(m)
			info.a += float64(share * inv.a)
			mean += float64(float64(share*inv.a) * w.parts[c].Mean)
			info.b += float64(share * inv.b)
			info.c += float64(share * inv.c)
		}
	}
	if info.a > 0 {
		r[0] -= mean / info.a
		r0 := info.inverse(m)
		s := sym2{p.a + r0.a/w.power, p.b + r0.b/w.power, p.c + r0.c/w.power}
		g.gainBy(k, m, &gain, r, s.inverse(m))
	}
	return float64(w.power * (most + kernel.Log(sum)))
}

// ofRows returns the variance of what rows (m×k) take of g, row C rowᵀ, and
// writes C rowᵀ (k×m) into gain.
func (g *gaussian) ofRows(gain *[2][MaxK]float64, k, m int, rows []float64) (p sym2) {
	for a := range m {
		row := rows[a*k : a*k+k]
		for x := range k {
			s := 0.0
			for y, v := range row {
				if v != 0 {
					s += float64(v * g.at(x, y))
				}
			}
			gain[a][x] = s
		}
	}
	for x, v := range rows[:k] {
		p.a += float64(v * gain[0][x])
	}
	if m == 2 {
		for x, v := range rows[k : 2*k] {
			p.b += float64(v * gain[0][x])
			p.c += float64(v * gain[1][x])
		}
	}
	return p
}

// shifted is a residual about the mean of part c.
func (w *noiseWork) shifted(c int, r [2]float64) [2]float64 {
	r[0] -= w.parts[c].Mean
	return r
}

// noise is the covariance of part c at a position.
func (w *noiseWork) noise(c int, extra float64) sym2 {
	cov := &w.parts[c].Cov
	return sym2{cov[0] + extra, cov[1], cov[2] + extra}
}

// part returns the log of part c to the power β, marginalised over the
// Gaussian (p is the variance of g(x)), without the part's weight; and the
// inverse of the innovation covariance.
func (w *noiseWork) part(c int, p sym2, r [2]float64, extra float64) (log float64, inv sym2) {
	noise, beta := w.noise(c, extra), w.power
	r = w.shifted(c, r)
	if beta == 1 {
		s := sym2{p.a + noise.a, p.b + noise.b, p.c + noise.c}
		log, inv = s.logNormal(w.m, r)
		return log - w.logZ, inv
	}
	s := sym2{p.a + noise.a/beta, p.b + noise.b/beta, p.c + noise.c/beta}
	log, inv = s.logNormal(w.m, r)
	if noise != w.last[c] {
		w.last[c], w.lastLog[c] = noise, noise.logDet(w.m)
	}
	// N(r;0,R)^β = N(r;0,R/β)·C with ln C = (1-β)·(ln sqrt((2π)^m |R|)) - (m/2) ln β.
	logConst := float64((1-beta)*(w.logZ+0.5*w.lastLog[c])) - 0.5*float64(w.m)*w.logBeta
	return log - w.logZ + logConst, inv
}

// gainBy is the Kalman update with gain columns C rowᵀ, residual r and the
// inverse innovation covariance.
func (g *gaussian) gainBy(k, m int, gain *[2][MaxK]float64, r [2]float64, inv sym2) {
	if m == 1 {
		for x := range k {
			kx := float64(gain[0][x] * inv.a)
			g.mean[x] += float64(kx * r[0])
			for y := 0; y <= x; y++ {
				g.cov[Packed(x, y)] -= float64(kx * gain[0][y])
			}
		}
		return
	}
	for x := range k {
		k0 := float64(gain[0][x]*inv.a) + float64(gain[1][x]*inv.b)
		k1 := float64(gain[0][x]*inv.b) + float64(gain[1][x]*inv.c)
		g.mean[x] += float64(k0*r[0]) + float64(k1*r[1])
		for y := 0; y <= x; y++ {
			g.cov[Packed(x, y)] -= float64(k0*gain[0][y]) + float64(k1*gain[1][y])
		}
	}
}
