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
		for c := range parts {
			noise := nw.noise(c, t.ExtraOf(i, c)).a
			u.variance[2*c*n+i], u.variance[(2*c+1)*n+i] = u.own[i]+noise/nw.power, noise
		}
	}
	kernel.Logs(u.log, u.variance)
	for i := range n {
		most := nw.logFlat
		for c := range parts {
			r := t.Residual[i] - nw.parts[c].Mean
			s := 2*c*n + i
			log := -0.5 * (float64(float64(r*r)*(1/u.variance[s])) + u.log[s])
			scale := float64((1-nw.power)*(nw.logZ+0.5*u.log[s+n])) - 0.5*nw.logBeta
			u.over[c*n+i] = nw.logW[c] + (log-nw.logZ+scale)/nw.power
			most = max(most, u.over[c*n+i])
		}
		u.over[parts*n+i], u.most[i] = nw.logFlat, most
		for c := range parts + 1 {
			over := &u.over[c*n+i]
			if flat := t.Flat[i]; flat == flat || math.IsInf(most, -1) {
				*over = math.Inf(-1) // there are no shares
				continue
			}
			*over -= most
		}
	}
	kernel.Exps(u.part, u.over)
	for i := range n {
		sum := 0.0
		for c := range parts + 1 {
			sum += u.part[c*n+i]
		}
		if u.sum[i] = sum; sum == 0 {
			u.sum[i] = 1
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

// gainOne is gaussian.gainBy of one row, in columns.
func gainOne(mean, cov, gain []float64, r, inv float64) {
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
