package filter

import (
	"math"

	"leadline/engine/kernel"
)

// tempered is the memory of conditionTempered, a column of all Gaussians after the other:
// for each part of the noise the variance of the innovation and that of the noise, their
// logs, the logs of parts and flat over the greatest, and what these are.
type tempered struct {
	gain, own, variance, log, over, part, most, sum []float64
}

// tempered says whether conditionTempered is condition: one component of a mixture, by a
// power of it, as each comparison of the heading with the road is.
func (w *noiseWork) tempered() bool {
	return w.m == 1 && w.power != 1 && (len(w.parts) > 1 || !math.IsInf(w.logFlat, -1))
}

// conditionTempered does for all Gaussians what condition does for one, to the bit, with
// logs and exponentials of many at a time.
func (b *Belief) conditionTempered(nw *noiseWork, w *Workspace) {
	n, k, parts := len(b.Key), len(b.Quantities), len(nw.parts)
	p := k * (k + 1) / 2
	t, u := &w.terms, &w.tempered
	u.gain, u.own, u.most, u.sum = resize(u.gain, n*k), resize(u.own, n), resize(u.most, n), resize(u.sum, n)
	u.variance, u.log = resize(u.variance, 2*parts*n), resize(u.log, 2*parts*n)
	u.over, u.part = resize(u.over, (parts+1)*n), resize(u.part, (parts+1)*n)
	for i := range n {
		u.own[i] = rowOf(u.gain[i*k:(i+1)*k], t.Row[i*k:(i+1)*k], b.Cov[i*p:(i+1)*p])
	}
	own, flat := u.own[:n], t.Flat[:n]
	for c := range parts {
		variance, noise := u.variance[2*c*n:][:n], u.variance[(2*c+1)*n:][:n]
		cov := nw.parts[c].Cov[0]
		for i, v := range own {
			own := cov + t.ExtraOf(i, c)
			variance[i], noise[i] = v+own/nw.power, own
		}
	}
	kernel.Logs(u.log, u.variance)
	most := u.most[:n]
	fill(most, nw.logFlat)
	for c := range parts {
		variance, log, logNoise, over := u.variance[2*c*n:][:n], u.log[2*c*n:][:n], u.log[(2*c+1)*n:][:n], u.over[c*n:][:n]
		mean, logW := nw.parts[c].Mean, nw.logW[c]
		rest, half := 1-nw.power, 0.5*nw.logBeta
		for i, r := range t.Residual[:n] {
			r -= mean
			l := -0.5 * (float64(float64(r*r)*(1/variance[i])) + log[i])
			scale := float64(rest*(nw.logZ+0.5*logNoise[i])) - half
			x := logW + (l-nw.logZ+scale)/nw.power
			over[i] = x
			if !(x <= most[i]) { // or no number, which is to be seen
				most[i] = x
			}
		}
	}
	fill(u.over[parts*n:], nw.logFlat)
	for c := range parts + 1 {
		over := u.over[c*n:][:n]
		for i, m := range most {
			if f := flat[i]; f == f || m < -math.MaxFloat64 {
				over[i] = math.Inf(-1) // there are no shares
				continue
			}
			over[i] -= m
		}
	}
	kernel.Exps(u.part, u.over)
	sum := u.sum[:n]
	copy(sum, u.part)
	for c := 1; c <= parts; c++ {
		for i, x := range u.part[c*n:][:n] {
			sum[i] += x
		}
	}
	for i, s := range sum {
		if s == 0 {
			sum[i] = 1
		}
	}
	kernel.Logs(u.over[:n], u.sum)
	w.out.reset()
	w.out.Key, w.out.Mass = append(w.out.Key, b.Key...), append(w.out.Mass, b.Mass...)
	w.out.Mean, w.out.Cov = append(w.out.Mean, b.Mean...), append(w.out.Cov, b.Cov...)
	for i := range n {
		if flat := t.Flat[i]; flat == flat {
			w.logs[i] = float64(nw.power * flat)
			continue
		}
		if w.logs[i] = u.most[i]; math.IsInf(u.most[i], -1) {
			continue
		}
		w.logs[i] = float64(nw.power * (u.most[i] + u.over[i]))
		var info, mean float64
		for c := range parts {
			if share := u.part[c*n+i] / u.sum[i]; share > 1e-6 {
				inv := 1 / u.variance[(2*c+1)*n+i]
				info += float64(share * inv)
				mean += float64(float64(share*inv) * nw.parts[c].Mean)
			}
		}
		if info > 0 {
			r := t.Residual[i] - mean/info
			inv := 1 / (u.own[i] + (1/info)/nw.power)
			gainOne(w.out.Mean[i*k:(i+1)*k], w.out.Cov[i*p:(i+1)*p], u.gain[i*k:(i+1)*k], r, inv)
		}
	}
}

// rowOf is gaussian.ofRows of one row, in columns.
func rowOf(gain, row, cov []float64) (own float64) {
	if len(gain) == 4 {
		return rowOfFour((*[4]float64)(gain), (*[4]float64)(row), (*[10]float64)(cov))
	}
	for x := range gain {
		s := 0.0
		for y, v := range row {
			if v != 0 {
				s += float64(v * cov[Packed(max(x, y), min(x, y))])
			}
		}
		gain[x] = s
	}
	for x, v := range row {
		own += float64(v * gain[x])
	}
	return own
}

// rowOfFour is rowOf of four quantities: sums begin at 0, so that no product with 0
// changes any.
func rowOfFour(gain, row *[4]float64, c *[10]float64) float64 {
	a, b, d, e := row[0], row[1], row[2], row[3]
	g0 := 0 + float64(a*c[0]) + float64(b*c[1]) + float64(d*c[3]) + float64(e*c[6])
	g1 := 0 + float64(a*c[1]) + float64(b*c[2]) + float64(d*c[4]) + float64(e*c[7])
	g2 := 0 + float64(a*c[3]) + float64(b*c[4]) + float64(d*c[5]) + float64(e*c[8])
	g3 := 0 + float64(a*c[6]) + float64(b*c[7]) + float64(d*c[8]) + float64(e*c[9])
	gain[0], gain[1], gain[2], gain[3] = g0, g1, g2, g3
	return 0 + float64(a*g0) + float64(b*g1) + float64(d*g2) + float64(e*g3)
}

// gainOne is gaussian.gainBy of one row, in columns.
func gainOne(mean, cov, gain []float64, r, inv float64) {
	if len(mean) == 4 {
		gainFour((*[4]float64)(mean), (*[10]float64)(cov), (*[4]float64)(gain), r, inv)
		return
	}
	n := 0
	for x := range mean {
		by := float64(gain[x] * inv)
		mean[x] += float64(by * r)
		for _, g := range gain[:x+1] {
			cov[n] -= float64(by * g)
			n++
		}
	}
}

// gainFour is gainOne of four quantities.
func gainFour(mean *[4]float64, c *[10]float64, gain *[4]float64, r, inv float64) {
	g0, g1, g2, g3 := gain[0], gain[1], gain[2], gain[3]
	b0, b1, b2, b3 := float64(g0*inv), float64(g1*inv), float64(g2*inv), float64(g3*inv)
	mean[0] += float64(b0 * r)
	mean[1] += float64(b1 * r)
	mean[2] += float64(b2 * r)
	mean[3] += float64(b3 * r)
	c[0] -= float64(b0 * g0)
	c[1] -= float64(b1 * g0)
	c[2] -= float64(b1 * g1)
	c[3] -= float64(b2 * g0)
	c[4] -= float64(b2 * g1)
	c[5] -= float64(b2 * g2)
	c[6] -= float64(b3 * g0)
	c[7] -= float64(b3 * g1)
	c[8] -= float64(b3 * g2)
	c[9] -= float64(b3 * g3)
}
