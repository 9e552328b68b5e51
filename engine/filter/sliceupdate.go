package filter

import (
	"math"

	"leadline/engine/kernel"
)

// updateSlices is Update and UpdateWithin for slices: with maxCells above 0 the
// spacings of positions are halved until they resolve what the measurement leaves.
func (b *Belief) updateSlices(space PlaneSpace, l any, maxCells int, w *Workspace) (float64, error) {
	s, ss := &b.Slices, &w.slices
	if v, ok := l.(OfVelocity); ok {
		w.asked()
		b.resolveVelocities(v, maxCells, ss)
		return b.weighVelocities(v)
	}
	before := s.total() * s.Scale
	if w.foretell != nil {
		b.foretellSlices(space, l, w)
	}
	if b.lay(space, l, w); maxCells == 0 {
		if log, ok := b.weighInPlace(w); ok {
			return log, nil
		}
	}
	var first *Belief
	for range maxRefinements {
		sum, log, err := b.tryIt(w)
		if err != nil {
			if first != nil {
				*b = *first
			}
			return log, err
		}
		sharper := false
		if maxCells > 0 {
			je, jn := s.roughness(ss, ss.out)
			for d, j := range [2]float64{je, jn} {
				if 1 > sliceFine/(2*math.Sqrt(j/sum)) && !sharper {
					if first == nil {
						first = b.Clone()
					}
					if b.keepNearSlices(ss, sum); 2*s.cells() > maxCells {
						continue
					}
					ss.halved(s, d)
					b.Slices, ss.spare = ss.spare, b.Slices
					b.lay(space, l, w)
					sharper = true
				}
			}
		}
		if !sharper {
			b.takeOutcome(ss, sum)
			return log + kernel.Log(sum/before), nil
		}
	}
	sum, log, err := b.tryIt(w)
	if err != nil {
		*b = *first
		return log, err
	}
	b.takeOutcome(ss, sum)
	return log + kernel.Log(sum/before), nil
}

// resolveVelocities halves the spacings of velocities until they resolve what a
// measured velocity leaves: to the information that the belief has along an axis comes
// that of the measurement, the curvature of its log at the belief's mean.
func (b *Belief) resolveVelocities(l OfVelocity, maxCells int, ss *sliceSpace) {
	s := &b.Slices
	scale := b.sliceScales(ss)
	m := s.massMoments()
	for a := range 2 {
		h := s.SpacingMPS[a]
		at := [2]float64{m.Mean[2], m.Mean[3]}
		log := func(by float64) float64 {
			v := at
			v[a] += by
			return l.LogVelocity(v[0], v[1], [2]float64{})
		}
		info := 1/square(scale[2+a]*h) + math.Max(0, (2*log(0)-log(h)-log(-h))/(h*h))
		for range maxRefinements {
			if s.SpacingMPS[a] <= sliceFine/math.Sqrt(info) || 2*s.cells() > maxCells {
				break
			}
			b.halve(ss, 2+a)
		}
	}
}

// weighVelocities weighs whole slices.
func (b *Belief) weighVelocities(l OfVelocity) (float64, error) {
	s := &b.Slices
	logs := make([]float64, len(s.At))
	least := [2]float64{square(leastSigma * s.SpacingMPS[0]), square(leastSigma * s.SpacingMPS[1])}
	masses := make([]float64, len(s.At))
	for i := range s.At {
		c := &s.At[i]
		logs[i] = l.LogVelocity(s.velocity(0, c.East), s.velocity(1, c.North), least)
		masses[i] = math.Max(c.Mass, 0)
	}
	log, err := weigh(masses, logs)
	if err != nil {
		return log, err
	}
	for i := range s.At {
		c := &s.At[i]
		by := 0.0
		if c.Mass > 0 {
			by = masses[i] / c.Mass
		}
		c.Mass = masses[i]
		for k := range c.Count {
			_, mass := s.row(c, k)
			for x := range mass {
				mass[x] *= by
			}
		}
	}
	s.Scale = 1
	b.trimSlices()
	s.rescale()
	return log, nil
}

// takeOutcome makes what a measurement leaves the belief.
func (b *Belief) takeOutcome(ss *sliceSpace, sum float64) {
	s := &b.Slices
	s.Mass, ss.out = ss.out, s.Mass
	for i := range s.At {
		s.At[i].Mass = ss.left[i]
	}
	s.Scale = 1 / sum
	b.trimSlices()
	s.rescale()
}

// weighInPlace is Update where something must be left: logs that differ by less than
// safeLogs cannot make all masses 0. It reports false, and does nothing, otherwise.
func (b *Belief) weighInPlace(w *Workspace) (log float64, ok bool) {
	s, ss := &b.Slices, &w.slices
	sh := &ss.sheet
	if !(sh.most-sh.least < safeLogs) {
		return 0, false
	}
	before := s.total() * s.Scale
	ss.out, ss.left = s.Mass, resize(ss.left, len(s.At))
	sum := b.weighSlices(ss)
	ss.out = nil
	for i := range s.At {
		s.At[i].Mass = ss.left[i]
	}
	s.Scale = 1 / sum
	return sh.most + kernel.Log(sum/before), true
}

// safeLogs leaves the smallest masses that are kept far from the smallest numbers.
const safeLogs = 500.0

// tryIt writes the masses that a measurement leaves, not normalised, into ss.out, in
// the places of the belief's; it returns their sum and by how much more the log
// evidence is than the log of that. The sheet has been laid.
func (b *Belief) tryIt(w *Workspace) (sum, log float64, err error) {
	s, ss := &b.Slices, &w.slices
	sh := &ss.sheet
	if math.IsInf(sh.most, -1) {
		return 0, sh.most, ErrContradiction
	}
	ss.out = ss.emptyLike(ss.out, s)
	ss.left = resize(ss.left, len(s.At))
	if sum = b.weighSlices(ss); !(sum >= leastMass) {
		return sum, math.Inf(-1), ErrContradiction
	}
	return sum, sh.most, nil
}

// weighSlices writes what the sheet leaves into ss.out and ss.left and returns the sum.
func (b *Belief) weighSlices(ss *sliceSpace) (sum float64) {
	s, sh := &b.Slices, &ss.sheet
	ss.indexSlices(s)
	for i := range ss.count[0] {
		if !sh.readBetween(ss, s, i) {
			continue
		}
		for j := range ss.count[1] {
			if k := ss.index[j*ss.count[0]+i]; k >= 0 {
				ss.left[k] = sh.weigh(ss, s, &s.At[k])
				sum += ss.left[k]
			}
		}
	}
	return sum
}

// emptyLike makes dst as long as the masses of s, 0 around its rows.
func (ss *sliceSpace) emptyLike(dst []float64, s *Slices) []float64 {
	if cap(dst) < len(s.Mass) {
		return make([]float64, len(s.Mass), len(s.Mass)+len(s.Mass)/4)
	}
	dst = dst[:len(s.Mass)]
	for _, r := range s.Rows {
		clear(dst[r.Start-slicePad : r.Start])
		clear(dst[r.Start+int(r.Len):][:slicePad])
	}
	return dst
}

// keepNearSlices cuts the rows of the belief to what is within keepCells of cells to
// which the outcome in ss.out, of which sum is the whole, leaves something.
func (b *Belief) keepNearSlices(ss *sliceSpace, sum float64) {
	s := &b.Slices
	floor := sliceFloor * sum
	for i := range s.At {
		c := &s.At[i]
		n := int(c.Count)
		ss.lo, ss.hi = resize(ss.lo, n), resize(ss.hi, n)
		for k := range n {
			r := s.Rows[int(c.First)+k]
			ss.lo[k], ss.hi[k] = math.MaxInt32, math.MinInt32
			for x, v := range ss.out[r.Start : r.Start+int(r.Len)] {
				if v >= floor {
					ss.lo[k], ss.hi[k] = min(ss.lo[k], r.Col+int32(x)), r.Col+int32(x)+1
				}
			}
		}
		for k := range n {
			lo, hi := int32(math.MaxInt32), int32(math.MinInt32)
			for q := max(0, k-keepCells); q <= min(n-1, k+keepCells); q++ {
				lo, hi = min(lo, ss.lo[q]), max(hi, ss.hi[q])
			}
			r := &s.Rows[int(c.First)+k]
			if hi <= lo {
				c.Mass -= wipe(s.Mass[r.Start : r.Start+int(r.Len)])
				r.Len = 0
				continue
			}
			lo, hi = max(lo-keepCells, r.Col), min(hi+keepCells, r.Col+r.Len)
			if hi <= lo {
				r.Len = 0
				continue
			}
			// Whole lanes, and nothing beside them.
			lo = r.Col + (lo-r.Col)&^(sliceLane-1)
			hi = r.Col + (hi-r.Col+sliceLane-1)&^(sliceLane-1)
			mass := s.Mass[r.Start : r.Start+int(r.Len)]
			c.Mass -= wipe(mass[:lo-r.Col]) + wipe(mass[hi-r.Col:])
			r.Start += int(lo - r.Col)
			r.Col, r.Len = lo, hi-lo
		}
	}
}
