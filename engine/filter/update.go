package filter

import (
	"errors"
	"math"
	"slices"

	"leadline/engine/kernel"
)

// ErrContradiction is returned by Update when the measurement is impossible
// everywhere the belief is: every log likelihood is -Inf. The belief stays as
// it was.
var ErrContradiction = errors.New("filter: the measurement is impossible everywhere in the belief")

// Update weighs a belief by a measurement, in place, and returns the
// measurement's log evidence, ln p(z | all before). l is a Likelihood or a
// LinearLikelihood, which also updates each Gaussian's quantities; what is both
// is used as the latter.
//
// Where a belief is a lattice without quantities, a linear likelihood is
// evaluated at its points, no sharper than the lattice can show (leastSigma).
func Update(b *Belief, space Space, l any, w *Workspace) (logEvidence float64, err error) {
	if b.Map != space.Fingerprint() {
		panic("filter: the belief was seeded over another map")
	}
	if len(b.Axes) > 0 {
		return b.updateSlices(space.(PlaneSpace), l, 0, w)
	}
	if len(b.Quantities) == 0 {
		return b.updateTiles(space.(PlaneSpace), l, w)
	}
	b.condition(space, l, w)
	return b.settle(l, w)
}

// Try returns the log evidence that Update would, and leaves the belief as it
// is.
func Try(b *Belief, space Space, l any, w *Workspace) (logEvidence float64, err error) {
	if b.Map != space.Fingerprint() {
		panic("filter: the belief was seeded over another map")
	}
	if v, ok := l.(OfVelocity); ok && len(b.Axes) > 0 {
		return b.Clone().weighVelocities(v)
	}
	if len(b.Axes) > 0 || len(b.Quantities) == 0 {
		m := b
		if len(b.Axes) > 0 {
			m = b.margin(&w.slices)
		}
		left := m.weighTiles(space.(PlaneSpace), l, false, w)
		_, logEvidence, err = w.outcomeOf(left, m.Tiles.Mass, 0)
		return logEvidence, err
	}
	b.condition(space, l, w)
	w.scratch = append(w.scratch[:0], b.Mass...)
	return weigh(w.scratch, w.logs)
}

// condition writes the log likelihood of every Gaussian into w.logs and, of a
// linear likelihood, the Gaussians after it into w.out, entry by entry. The
// belief stays as it is, so that a contradiction leaves it alone.
func (b *Belief) condition(space Space, l any, w *Workspace) {
	n := len(b.Key)
	w.logs = resize(w.logs, n)
	clear(w.logs)
	switch l := l.(type) {
	case LinearLikelihood:
		w.locate(b, space, l.Wants())
		k := len(b.Quantities)
		m := l.Rows()
		w.terms.Reset(n, m, k)
		l.Linearize(&w.terms, &w.at, b.Quantities, b.Mean)
		noise := l.Noise()
		nw := newNoiseWork(&noise, m)
		angular := angularMask(b.Quantities)
		if p := w.asked(); p != nil {
			b.foretell(p, l, &noise, w)
		}
		if nw.tempered() {
			b.conditionTempered(&nw, w)
			return
		}
		w.out.empty(n, k)
		var g gaussian
		for i := range n {
			b.load(&g, i, k)
			w.logs[i] = nw.condition(&g, k, angular, &w.terms, i)
			w.out.push(b.Key[i], k, &g)
		}
	case Likelihood:
		w.asked()
		w.locate(b, space, l.Wants())
		l.LogLikelihood(w.logs, &w.at)
	default:
		panic("filter: not a likelihood")
	}
}

// settle weighs the belief by what condition found and returns the log
// evidence.
func (b *Belief) settle(l any, w *Workspace) (float64, error) {
	logEvidence, err := weigh(b.Mass, w.logs)
	if err != nil {
		return logEvidence, err
	}
	if _, ok := l.(LinearLikelihood); ok {
		b.Mean, w.out.Mean = w.out.Mean, b.Mean
		b.Cov, w.out.Cov = w.out.Cov, b.Cov
	}
	b.thin(w)
	return logEvidence, nil
}

// weigh multiplies mass by exp(logs), normalises it to a sum of 1 and returns
// the log of the sum before, relative to the sum of the masses on entry. If
// nothing is left it returns ErrContradiction and leaves mass alone.
func weigh(mass, logs []float64) (float64, error) {
	_, logEvidence, err := weighInto(mass, mass, logs, 0)
	return logEvidence, err
}

// weighInto is weigh with dst for the result, which may be mass, and counts what
// is at least floor.
func weighInto(dst, mass, logs []float64, floor float64) (n int, logEvidence float64, err error) {
	most, before := math.Inf(-1), 0.0
	for i, l := range logs {
		if l != l || l > math.MaxFloat64 {
			panic("filter: a likelihood returned NaN or +Inf")
		}
		before += mass[i]
		if mass[i] >= leastMass && l > most {
			most = l
		}
	}
	if math.IsInf(most, -1) {
		return 0, most, ErrContradiction
	}
	sum := 0.0
	for i := 0; i < len(dst); i += weighRun {
		j := min(i+weighRun, len(dst))
		kernel.Weigh(dst[i:j], mass[i:j], logs[i:j], most, leastMass)
		for _, v := range dst[i:j] {
			sum += v
		}
	}
	scale := 1 / sum
	for i, v := range dst {
		v *= scale
		if dst[i] = v; v >= floor {
			n++
		}
	}
	return n, most + kernel.Log(sum/before), nil
}

// weighRun is how many masses are weighed before they are summed: as many as
// stay in the cache.
const weighRun = 1024

// leastMass is what counts as mass when a belief is weighed. Less is left where a
// lattice is refined around a measurement that contradicts it by many sigmas; if
// that were the likeliest, the others' weights would be 0, the sum no normal number,
// and its inverse infinite.
const leastMass = 1e-250

// thin drops Gaussians below Floor and counts their mass as pruned. w may be nil.
func (b *Belief) thin(w *Workspace) {
	var u *turn
	if w != nil && w.tape != nil && slices.ContainsFunc(b.Mass, func(m float64) bool { return m < Floor }) {
		u = w.turn(b, thinned)
	}
	k := len(b.Quantities)
	p := k * (k + 1) / 2
	j, kept := 0, 0.0
	for i, m := range b.Mass {
		if m < Floor {
			b.Pruned += m
			continue
		}
		if i != j {
			b.Key[j], b.Mass[j] = b.Key[i], m
			copy(b.Mean[j*k:j*k+k], b.Mean[i*k:i*k+k])
			copy(b.Cov[j*p:j*p+p], b.Cov[i*p:i*p+p])
		}
		if u != nil {
			u.kept = append(u.kept, int32(i))
		}
		kept += m
		j++
	}
	b.Key, b.Mass, b.Mean, b.Cov = b.Key[:j], b.Mass[:j], b.Mean[:j*k], b.Cov[:j*p]
	for i := range b.Mass {
		b.Mass[i] /= kept
	}
}

// Reset makes the terms ready for n positions, m residual components and k
// quantities, keeping what memory there is.
func (t *Terms) Reset(n, m, k int) {
	t.Residual = resize(t.Residual, n*m)
	t.Row = resize(t.Row, n*m*k)
	t.Extra = resize(t.Extra, n)
	t.Wide = resize(t.Wide, n)
	t.Flat = resize(t.Flat, n)
	clear(t.Row)
	clear(t.Extra)
	fill(t.Wide, math.NaN())
	fill(t.Flat, math.NaN())
}

// fill writes a number everywhere.
func fill(dst []float64, x float64) {
	if len(dst) == 0 {
		return
	}
	dst[0] = x
	for n := 1; n < len(dst); n *= 2 {
		copy(dst[n:], dst[:n])
	}
}

// ExtraOf is the variance to add to part c of the noise at position i.
func (t *Terms) ExtraOf(i, c int) float64 {
	if wide := t.Wide[i]; c > 0 && wide == wide {
		return wide
	}
	return t.Extra[i]
}
