package filter

import (
	"leadline/engine/kernel"
)

// The spacing along each of the four axes is at most sliceFine of the scale on which
// the belief changes there, the other three held, where the budget allows; it doubles
// where twice the spacing would still be below sliceCoarse. Cells grow with the fourth
// power: at 0.4, as on a lattice of positions, there would be five times as many.
const (
	sliceFine   = 0.7
	sliceCoarse = 0.55
)

// Weights of cubics that keep mass, mean and variance: what one cell leaves to itself
// and to those between it and its neighbours when a spacing is halved (see
// interpolate), and what a cell that is dropped leaves to the four around it when it is
// doubled, which is sharesOf(1/2, 0).
var (
	halvingShares  = [7]float64{refineFar, 0, refineNear, refineMiddle, refineNear, 0, refineFar}
	doublingShares = [4]float64{-1. / 16, 9. / 16, 9. / 16, -1. / 16}
)

// adaptSlices is Adapt for slices: along each axis the spacing is halved or doubled
// at most once.
func (b *Belief) adaptSlices(maxCells int, w *Workspace) bool {
	s, ss := &b.Slices, &w.slices
	scale := b.sliceScales(ss)
	changed := false
	for d := 3; d >= 0; d-- {
		if 1 > sliceFine*scale[d] && 2*s.cells() <= maxCells {
			b.halve(ss, d)
			scale[d] *= 2
			changed = true
		} else if 2 < sliceCoarse*scale[d] {
			b.double(ss, d)
			scale[d] /= 2
			changed = true
		}
	}
	for s.cells() > maxCells {
		most := 0
		for d := range scale {
			if scale[d] > scale[most] {
				most = d
			}
		}
		b.double(ss, most)
		scale[most] /= 2
		changed = true
	}
	return changed
}

// halve and double change the spacing along axis d: 0 and 1 are those of the
// positions, 2 and 3 of the velocities. What that does to mean and variance is made
// up for as on a lattice: the places move, the variance is owed.
func (b *Belief) halve(ss *sliceSpace, d int) { b.respace(ss, d, ss.halved) }

func (b *Belief) double(ss *sliceSpace, d int) { b.respace(ss, d, ss.doubled) }

func (b *Belief) respace(ss *sliceSpace, d int, change func(s *Slices, d int)) {
	s := &b.Slices
	before := s.massMoments()
	change(s, d)
	b.Slices, ss.spare = ss.spare, b.Slices
	s.rescale()
	b.trimSlices()
	s.rescale()
	after := s.massMoments()
	for a := range 2 {
		s.shift(a, before.Mean[a]-after.Mean[a])
		s.BaseMPS[a] += before.Mean[2+a] - after.Mean[2+a]
		for i, at := range [3]int{Packed(a, a), Packed(2+a, a), Packed(2+a, 2+a)} {
			s.Pending[a][i] += before.Cov[at] - after.Cov[at]
		}
	}
}

// halved writes s with half the spacing along axis d into ss.spare.
func (ss *sliceSpace) halved(s *Slices, d int) {
	if d < 2 {
		ss.like(s)
		ss.spare.SpacingM[d] /= 2
		for i := range s.At {
			ss.halveSlice(s, &s.At[i], d)
		}
		return
	}
	a := d - 2
	ss.begin(s, a, refineReach)
	dst := &ss.spare
	dst.SpacingMPS[a] /= 2
	lo := ss.low[a]
	wide := append([]float64(nil), dst.OriginM[a]...)
	dst.OriginM[a] = dst.OriginM[a][:0]
	for k := range 2*len(wide) - 1 {
		dst.OriginM[a] = append(dst.OriginM[a], 0.5*(wide[k/2]+wide[(k+1)/2]))
	}
	dst.Low[a] = 2 * lo
	ss.low[a], ss.count[a] = 2*lo, int32(len(dst.OriginM[a]))
	ss.eachVelocity(func(at [2]int32) {
		for k := -int32(refineReach); k <= refineReach; k++ {
			if weight := halvingShares[refineReach+k]; weight != 0 && (at[a]-k)%2 == 0 {
				ss.takeFrom(s, at, a, floorDiv(at[a]-k, 2), weight)
			}
		}
		ss.gather(&ss.spare, s, at, 0)
	})
}

// doubled writes s with twice the spacing along axis d into ss.spare.
func (ss *sliceSpace) doubled(s *Slices, d int) {
	if d < 2 {
		ss.like(s)
		ss.spare.SpacingM[d] *= 2
		for i := range s.At {
			ss.doubleSlice(s, &s.At[i], d)
		}
		return
	}
	a := d - 2
	ss.begin(s, a, 4)
	dst := &ss.spare
	dst.SpacingMPS[a] *= 2
	lo, hi := ss.low[a], ss.low[a]+ss.count[a]
	fine, fineLow := append([]float64(nil), dst.OriginM[a]...), lo
	dst.OriginM[a] = dst.OriginM[a][:0]
	first := floorDiv(lo+1, 2)
	for k := first; 2*k < hi; k++ {
		dst.OriginM[a] = append(dst.OriginM[a], fine[2*k-fineLow])
	}
	dst.Low[a] = first
	ss.low[a], ss.count[a] = first, int32(len(dst.OriginM[a]))
	ss.eachVelocity(func(at [2]int32) {
		ss.takeFrom(s, at, a, 2*at[a], 1)
		for k, weight := range doublingShares {
			// The cell between m and m+1 leaves to m-1, m, m+1, m+2.
			ss.takeFrom(s, at, a, 2*(at[a]+1-int32(k))+1, weight)
		}
		ss.gather(&ss.spare, s, at, 0)
	})
}

// eachVelocity calls use with every velocity of what is made, and no taps.
func (ss *sliceSpace) eachVelocity(use func(at [2]int32)) {
	for j := range ss.count[1] {
		for i := range ss.count[0] {
			ss.taps = ss.taps[:0]
			use([2]int32{ss.low[0] + i, ss.low[1] + j})
		}
	}
}

// takeFrom adds taps from the source that is index along axis a, and like at along
// the other one, at the same positions.
func (ss *sliceSpace) takeFrom(s *Slices, at [2]int32, a int, index int32, weight float64) {
	from := at
	from[a] = index
	if k := ss.find(from); k >= 0 {
		d := (s.origin(a, index) - ss.spare.origin(a, at[a])) / s.SpacingM[a]
		ss.shareOut(k, a, d, weight)
	}
}

// halveSlice appends a slice to ss.spare with half the spacing of positions along
// axis d, doubleSlice with twice.
func (ss *sliceSpace) halveSlice(s *Slices, c *Slice, d int) {
	dst := &ss.spare
	if d == 1 {
		top := 2*c.Row - refineReach
		ss.rowsOf(s, c, 2*c.Count-1+2*refineReach, func(k int32, use func(row int32, weight float64)) {
			for i, weight := range halvingShares {
				if weight != 0 {
					use(2*k+int32(i), weight)
				}
			}
		}, top)
		return
	}
	ss.lo, ss.hi = resize(ss.lo, int(c.Count)), resize(ss.hi, int(c.Count))
	for k, r := range s.Rows[c.First : c.First+c.Count] {
		ss.lo[k], ss.hi[k] = 2*r.Col-refineReach, 2*(r.Col+r.Len-1)+refineReach+1
		if r.Len == 0 {
			ss.hi[k] = ss.lo[k]
		}
	}
	into := dst.placeClear([2]int32{c.East, c.North}, c.Row, ss.lo, ss.hi)
	into.Mass = c.Mass
	for k := range c.Count {
		_, mass := s.row(c, k)
		_, fine := dst.row(into, k)
		for x, v := range mass {
			o := fine[2*x : 2*x+2*refineReach+1]
			far, near := float64(v*refineFar), float64(v*refineNear)
			o[0] += far
			o[2] += near
			o[3] += float64(v * refineMiddle)
			o[4] += near
			o[6] += far
		}
	}
}

func (ss *sliceSpace) doubleSlice(s *Slices, c *Slice, d int) {
	dst := &ss.spare
	if d == 1 {
		top := floorDiv(c.Row, 2) - 2
		bottom := floorDiv(c.Row+c.Count-1, 2) + 3
		ss.rowsOf(s, c, bottom-top, func(k int32, use func(row int32, weight float64)) {
			row := c.Row + k
			m := floorDiv(row, 2)
			if row == 2*m {
				use(m-top, 1)
				return
			}
			for i, weight := range doublingShares {
				use(m-1+int32(i)-top, weight)
			}
		}, top)
		return
	}
	ss.lo, ss.hi = resize(ss.lo, int(c.Count)), resize(ss.hi, int(c.Count))
	for k, r := range s.Rows[c.First : c.First+c.Count] {
		ss.lo[k], ss.hi[k] = floorDiv(r.Col, 2)-1, floorDiv(r.Col+r.Len-1, 2)+3
		if r.Len == 0 {
			ss.hi[k] = ss.lo[k]
		}
	}
	into := dst.placeClear([2]int32{c.East, c.North}, c.Row, ss.lo, ss.hi)
	into.Mass = c.Mass
	for k := range c.Count {
		r, mass := s.row(c, k)
		wide, coarse := dst.row(into, k)
		for x, v := range mass {
			col := r.Col + int32(x)
			m := floorDiv(col, 2)
			if col == 2*m {
				coarse[m-wide.Col] += v
				continue
			}
			o := coarse[m-1-wide.Col:][:4]
			for i, weight := range doublingShares {
				o[i] += float64(v * weight)
			}
		}
	}
}

// rowsOf appends a slice of n rows from top on, which get the rows of c by the weights
// that of gives for each.
func (ss *sliceSpace) rowsOf(s *Slices, c *Slice, n int32, of func(k int32, use func(row int32, weight float64)), top int32) {
	ss.noRows(n)
	for k := range c.Count {
		r, _ := s.row(c, k)
		of(k, func(row int32, _ float64) {
			if r.Len > 0 {
				ss.lo[row], ss.hi[row] = min(ss.lo[row], r.Col), max(ss.hi[row], r.Col+r.Len)
			}
		})
	}
	dst := &ss.spare
	into := dst.placeClear([2]int32{c.East, c.North}, top, ss.lo, ss.hi)
	into.Mass = c.Mass
	for k := range c.Count {
		r, mass := s.row(c, k)
		of(k, func(row int32, weight float64) {
			if r.Len > 0 {
				wide, to := dst.row(into, row)
				o := r.Col - wide.Col
				kernel.AddScaled(to[o:o+r.Len], mass, weight)
			}
		})
	}
}
