package filter

import (
	"math"

	"leadline/engine/kernel"
)

// sheet is what a measurement says of positions, at nodes that are a cell of the
// slices apart along east and half a cell along north. Slices lie between its nodes,
// each with an offset of its own: along east the logs are read between nodes by
// cubics, which is exact for parabolas, for each velocity east; along north the
// densities.
type sheet struct {
	east, north   float64 // of node (0, 0)
	stepE, stepN  float64
	cols, rows    int32
	lo, hi        []int32 // the nodes of a row that are needed
	logs          []float64
	most, least   float64
	lik           []float64 // for one velocity east, cells from col on
	col, width    int32
	ones          []float64
	firstRow, end int32
	smooth        []bool // of a row: cubics can be trusted
}

// steepLogs is how much the logs of four nodes may differ for a cubic through them:
// where they differ more, as at an edge beyond which nothing is possible, a line does.
const steepLogs = 20.0

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

// lay sets the sheet's nodes around all that has mass, and evaluates the measurement
// at them.
func (b *Belief) lay(space PlaneSpace, l any, w *Workspace) {
	s, sh := &b.Slices, &w.slices.sheet
	sh.stepE, sh.stepN = s.SpacingM[0], s.SpacingM[1]/2
	minE, maxE := math.Inf(1), math.Inf(-1)
	minN, maxN := math.Inf(1), math.Inf(-1)
	for i := range s.At {
		c := &s.At[i]
		oE, oN := s.origin(0, c.East), s.origin(1, c.North)+float64(s.SpacingM[1]*float64(c.Row))
		minN, maxN = math.Min(minN, oN), math.Max(maxN, oN+float64(s.SpacingM[1]*float64(c.Count)))
		for _, r := range s.Rows[c.First : c.First+c.Count] {
			if r.Len > 0 {
				minE = math.Min(minE, oE+float64(sh.stepE*float64(r.Col)))
				maxE = math.Max(maxE, oE+float64(sh.stepE*float64(r.Col+r.Len)))
			}
		}
	}
	sh.east, sh.north = minE-2*sh.stepE, minN-2*sh.stepN
	sh.cols = int32((maxE-sh.east)/sh.stepE) + 4
	sh.rows = int32((maxN-sh.north)/sh.stepN) + 4
	sh.need(s)
	sh.logs = resize(sh.logs, int(sh.cols)*int(sh.rows))
	sh.smooth = resize(sh.smooth, int(sh.rows))
	ev := newEvaluation(l, math.Max(s.SpacingM[0], s.SpacingM[1]))
	sh.most, sh.least = math.Inf(-1), math.Inf(1)
	for r := range sh.rows {
		lo, hi := sh.lo[r], sh.hi[r]
		if hi <= lo {
			continue
		}
		w.at.Resize(ev.wants, 2, int(hi-lo))
		for c := lo; c < hi; c++ {
			w.at.East[c-lo] = sh.east + float64(sh.stepE*float64(c))
			w.at.North[c-lo] = sh.north + float64(sh.stepN*float64(r))
		}
		space.Sample(&w.at)
		w.logsOf(&ev)
		row := sh.logs[int(r)*int(sh.cols):][lo:hi]
		for i, v := range w.cellLogs {
			if v != v || v > math.MaxFloat64 {
				panic("filter: a likelihood returned NaN or +Inf")
			}
			row[i] = v
			sh.most, sh.least = math.Max(sh.most, v), math.Min(sh.least, v)
		}
	}
	const impossible = 800 // nats: exp of it is 0
	for r := range sh.rows {
		row := sh.logs[int(r)*int(sh.cols):]
		sh.smooth[r] = true
		for c := sh.lo[r]; c < sh.hi[r]; c++ {
			row[c] = math.Max(row[c], sh.most-impossible)
			if c >= sh.lo[r]+3 {
				q := row[c-3 : c+1]
				if max(q[0], q[1], q[2], q[3])-min(q[0], q[1], q[2], q[3]) > steepLogs {
					sh.smooth[r] = false
				}
			}
		}
	}
}

// need finds the nodes that are around cells with mass.
func (sh *sheet) need(s *Slices) {
	sh.lo, sh.hi = resize(sh.lo, int(sh.rows)), resize(sh.hi, int(sh.rows))
	for r := range sh.lo {
		sh.lo[r], sh.hi[r] = math.MaxInt32, math.MinInt32
	}
	for i := range s.At {
		c := &s.At[i]
		row, _ := sh.rowOf(s, c)
		off := int32(math.Floor((s.origin(0, c.East) - sh.east) / sh.stepE))
		for k, r := range s.Rows[c.First : c.First+c.Count] {
			if r.Len > 0 {
				at := row + 2*int32(k)
				sh.lo[at], sh.hi[at] = min(sh.lo[at], off+r.Col-1), max(sh.hi[at], off+r.Col+r.Len+2)
			}
		}
	}
	// Each takes one row before and two after it.
	last := len(sh.lo) - 1
	sh.widen(last)
}

func (sh *sheet) widen(last int) {
	lo, hi := append([]int32(nil), sh.lo...), append([]int32(nil), sh.hi...)
	for r := range lo {
		for k := max(0, r-2); k <= min(last, r+1); k++ {
			sh.lo[r], sh.hi[r] = min(sh.lo[r], lo[k]), max(sh.hi[r], hi[k])
		}
		if sh.hi[r] > sh.lo[r] {
			sh.lo[r], sh.hi[r] = max(0, sh.lo[r]), min(sh.cols, sh.hi[r])
		}
	}
}

// rowOf is the row of nodes at or before a slice's first row, and how far beyond it
// that lies, in nodes.
func (sh *sheet) rowOf(s *Slices, c *Slice) (row int32, f float64) {
	t := (s.origin(1, c.North) + float64(s.SpacingM[1]*float64(c.Row)) - sh.north) / sh.stepN
	m := math.Floor(t)
	return int32(m), t - m
}

// readBetween sets sh.lik to the densities at the columns of the slices of the i-th
// velocity east, for the rows of nodes that they need; false if there are none.
func (sh *sheet) readBetween(ss *sliceSpace, s *Slices, i int32) bool {
	col, end := int32(math.MaxInt32), int32(math.MinInt32)
	top, bottom := int32(math.MaxInt32), int32(math.MinInt32)
	east := 0.0
	for j := range ss.count[1] {
		k := ss.index[j*ss.count[0]+i]
		if k < 0 {
			continue
		}
		c := &s.At[k]
		east = s.origin(0, c.East)
		row, _ := sh.rowOf(s, c)
		top, bottom = min(top, row-1), max(bottom, row+2*c.Count+1)
		for _, r := range s.Rows[c.First : c.First+c.Count] {
			if r.Len > 0 {
				col, end = min(col, r.Col), max(end, r.Col+r.Len)
			}
		}
	}
	if end <= col {
		return false
	}
	sh.col, sh.width = col, end-col
	top, bottom = max(top, 0), min(bottom, sh.rows)
	sh.firstRow, sh.end = top, bottom
	n := int(sh.width)
	sh.lik = resize(sh.lik, n*int(bottom-top))
	for len(sh.ones) < n {
		sh.ones = append(sh.ones, 1)
	}
	t := (east - sh.east) / sh.stepE
	m := math.Floor(t)
	shares := sharesOf(t-m, 0)
	off := int32(m) + col // the node at or before the first column
	for r := top; r < bottom; r++ {
		out := sh.lik[int(r-top)*n:][:n]
		// Columns whose four nodes are there.
		a, b := max(0, sh.lo[r]+1-off), min(sh.width, sh.hi[r]-2-off)
		clear(out)
		if b <= a {
			continue
		}
		logs := sh.logs[int(r)*int(sh.cols):]
		ss.lane = resize(ss.lane, int(b-a))
		lane := ss.lane
		clear(lane)
		from := off + a - 1
		if sh.smooth[r] {
			for k, share := range shares {
				if share != 0 {
					kernel.AddScaled(lane, logs[from+int32(k):][:len(lane)], share)
				}
			}
		} else {
			sh.careful(lane, logs[from:], t-m, shares)
		}
		kernel.Weigh(out[a:b], sh.ones[:len(lane)], lane, sh.most, 0)
	}
	return true
}

// careful reads logs between nodes where they may be steep.
func (sh *sheet) careful(dst, logs []float64, f float64, shares [4]float64) {
	for x := range dst {
		q := logs[x : x+4]
		v := q[1] + float64(f*(q[2]-q[1]))
		if max(q[0], q[1], q[2], q[3])-min(q[0], q[1], q[2], q[3]) <= steepLogs {
			v = float64(shares[0]*q[0]) + float64(shares[1]*q[1]) + float64(shares[2]*q[2]) + float64(shares[3]*q[3])
		}
		dst[x] = v
	}
}

// weigh writes what the measurement leaves of a slice into ss.out and returns the sum.
func (sh *sheet) weigh(ss *sliceSpace, s *Slices, c *Slice) (sum float64) {
	row, f := sh.rowOf(s, c)
	shares := sharesOf(f, 0)
	n := sh.width
	for i := range shares {
		shares[i] *= s.Scale
	}
	for k := range c.Count {
		r, mass := s.row(c, k)
		if r.Len == 0 {
			continue
		}
		at := row + 2*k - 1 - sh.firstRow
		ss.starts, ss.weights = ss.starts[:0], ss.weights[:0]
		for i, share := range shares {
			if o := at + int32(i); share != 0 && o >= 0 && o < sh.end-sh.firstRow {
				ss.starts = append(ss.starts, int(o*n+r.Col-sh.col))
				ss.weights = append(ss.weights, share)
			}
		}
		sum += kernel.WeighBy(ss.out[r.Start:r.Start+int(r.Len)], mass, sh.lik, ss.starts, ss.weights)
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
	w.terms.Reset(n, e.lin.Rows(), 2)
	e.lin.Linearize(&w.terms, &w.at, nil, nil)
	if e.nw.simple() {
		w.densities(&e.nw, n, e.least)
		return
	}
	for j := range n {
		w.cellLogs[j] = e.nw.density(&w.terms, j, e.least)
	}
}
