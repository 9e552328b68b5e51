package filter

import (
	"math"
	"slices"

	"leadline/engine/kernel"
)

// sliceSpace is the memory for working on slices.
type sliceSpace struct {
	spare  Slices
	index  []int32  // of a velocity in the source's At, -1 for none
	low    [2]int32 // the velocities of what is made
	count  [2]int32
	from   [2]int32 // those that index is over
	across [2]int32
	taps   []sliceTap
	weight [2][]float64
	// stir's: slices of one velocity north between the two axes, and which there are.
	between Slices
	line    []int32
	dropped float64
	lo, hi  []int32 // the cells of a new slice's rows
	// What gather takes.
	heads   []head
	extents []kernel.Extent
	rows    []kernel.RowTap
	starts  []int
	weights []float64
	whole   []float64 // the weights of all taps
	partial []partial
	sheet   sheet
	lane    []float64
	last    []float64
	out     []float64 // masses that a measurement leaves, left by slice
	left    []float64
	margin  Belief
	flat    []float64
}

// sliceTap is a source's slice, shifted by rows and cols and weighed; of which there are
// wide, each a column farther than the one before, or high, each a row.
type sliceTap struct {
	slice                  int32
	cols, rows, wide, high int32
	weight                 [4]float64
}

// head is a tap with its slice's rows; first is where the first of them comes to lie.
type head struct {
	rows                    []SliceRow
	first, cols, wide, high int32
}

func oneTap(slice, cols, rows int32, weight float64) sliceTap {
	return sliceTap{slice, cols, rows, 1, 1, [4]float64{weight}}
}

// begin indexes the slices of s and makes ss.spare an empty grid like it, with reach
// more velocities to either side along axis a; they have the places of the outermost.
func (ss *sliceSpace) begin(s *Slices, a int, reach int32) {
	ss.indexSlices(s)
	ss.like(s)
	for a := range 2 {
		ss.widen(s, a, 0)
	}
	ss.widen(s, a, reach)
}

// widen adds velocities along axis a to what begin made.
func (ss *sliceSpace) widen(s *Slices, a int, reach int32) {
	o := ss.spare.OriginM[a][:0]
	lo, hi := ss.low[a], ss.low[a]+ss.count[a]
	for i := lo - reach; i < hi+reach; i++ {
		o = append(o, s.origin(a, min(max(i, lo), hi-1)))
	}
	ss.spare.OriginM[a], ss.spare.Low[a] = o, lo-reach
	ss.low[a] -= reach
	ss.count[a] += 2 * reach
}

// like makes ss.spare an empty grid with the spacings and places of s.
func (ss *sliceSpace) like(s *Slices) {
	d := &ss.spare
	at, rows, mass, o := d.At[:0], d.Rows[:0], d.Mass[:0], d.OriginM
	*d = *s
	d.At, d.Rows, d.Mass = at, rows, mass
	for a := range 2 {
		d.OriginM[a] = append(o[a][:0], s.OriginM[a]...)
	}
	if n := s.cells(); cap(d.Mass) < n+n/3 { // a pass makes the rows a little longer
		d.Mass = make([]float64, 0, n+n/2)
	}
}

// indexSlices sets ss.index over the velocities that s has.
func (ss *sliceSpace) indexSlices(s *Slices) {
	for a := range 2 {
		lo, hi := int32(math.MaxInt32), int32(math.MinInt32)
		for i := range s.At {
			v := s.At[i].along(a)
			lo, hi = min(lo, v), max(hi, v)
		}
		ss.low[a], ss.count[a] = lo, hi-lo+1
	}
	ss.index = resize(ss.index, int(ss.count[0])*int(ss.count[1]))
	for i := range ss.index {
		ss.index[i] = -1
	}
	for i := range s.At {
		c := &s.At[i]
		ss.index[(c.North-ss.low[1])*ss.count[0]+c.East-ss.low[0]] = int32(i)
	}
	ss.from, ss.across = ss.low, ss.count
}

// find returns the index of a velocity, or -1.
func (ss *sliceSpace) find(at [2]int32) int32 {
	i, j := at[0]-ss.from[0], at[1]-ss.from[1]
	if i < 0 || j < 0 || i >= ss.across[0] || j >= ss.across[1] {
		return -1
	}
	return ss.index[j*ss.across[0]+i]
}

// gather appends to dst the slice of a velocity that ss.taps make of src, without what
// is faint at the ends of rows, which counts as dropped. It reports false where there
// is none.
func (ss *sliceSpace) gather(dst, src *Slices, at [2]int32, floor float64) bool {
	if len(ss.taps) == 0 {
		return false
	}
	// The rows of first up to end are made of a row of each tap.
	top, bottom, first, end := int32(math.MaxInt32), int32(math.MinInt32), int32(math.MinInt32), int32(math.MaxInt32)
	ss.heads, ss.whole = ss.heads[:0], ss.whole[:0]
	mass := 0.0
	for i := range ss.taps {
		t := &ss.taps[i]
		c := &src.At[t.slice]
		from, to := c.Row+t.rows, c.Row+t.rows+c.Count
		top, bottom = min(top, from), max(bottom, to+t.high-1)
		first, end = max(first, from+t.high-1), min(end, to)
		ss.heads = append(ss.heads, head{src.Rows[c.First : c.First+c.Count], from, t.cols, t.wide, t.high})
		weights := t.weight[:t.wide*t.high]
		ss.whole = append(ss.whole, weights...)
		for _, weight := range weights {
			mass += float64(weight * c.Mass)
		}
	}
	ss.extents = resize(ss.extents, int(bottom-top))
	extents := ss.extents
	for i := range extents {
		extents[i] = kernel.NoExtent
	}
	for i := range ss.heads {
		h := &ss.heads[i]
		for q := range h.high {
			kernel.Widen(extents[h.first-top+q:], h.rows, h.cols, h.wide-1)
		}
	}
	c := ss.placeExtents(dst, at, top)
	c.Mass = mass
	rows := dst.Rows[c.First:]
	for k := int32(0); k < c.Count; {
		from := k
		if top+k >= first {
			for k < c.Count && top+k < end && whole(&extents[k], &rows[k]) {
				k++
			}
		}
		if k > from {
			ss.gatherRows(dst, src, rows[from:k], top+from)
			continue
		}
		if r := &rows[k]; r.Len > 0 {
			ss.gatherRagged(src, dst.Mass[r.Start:r.Start+int(r.Len)], r.Col, top+k)
			clear(dst.Mass[r.Start+int(r.Len):][:slicePad])
		}
		k++
	}
	ss.dropped += dst.trimRows(c, floor)
	if c.Count == 0 {
		dst.At = dst.At[:len(dst.At)-1]
		return false
	}
	return true
}

// whole is whether rows that a row is made of reach all over it, with what is around
// them.
func whole(e *kernel.Extent, r *SliceRow) bool {
	return -e.MinusLast-slicePad <= r.Col && r.Col+r.Len <= e.Least+slicePad
}

// placeExtents appends a slice with rows as ss.extents say, or a little longer. Their
// masses are not set, nor what is after them.
func (ss *sliceSpace) placeExtents(s *Slices, at [2]int32, top int32) *Slice {
	n := len(ss.extents)
	first := len(s.Rows)
	s.Rows = slices.Grow(s.Rows, n)[:first+n]
	rows := s.Rows[first:]
	start := max(len(s.Mass), slicePad)
	for k := range rows {
		e := &ss.extents[k]
		if rows[k] = (SliceRow{Start: start}); e.First < math.MaxInt32 {
			long := (-e.MinusEnd - e.First + sliceLane - 1) &^ (sliceLane - 1)
			rows[k].Col, rows[k].Len = e.First, long
			start += int(long) + slicePad
		}
	}
	s.extend(start)
	s.At = append(s.At, Slice{East: at[0], North: at[1], Row: top, First: int32(first), Count: int32(n)})
	return &s.At[len(s.At)-1]
}

// extend makes room for n masses in all, that are not set; the first are 0.
func (s *Slices) extend(n int) {
	old := len(s.Mass)
	if cap(s.Mass) < n {
		s.Mass = append(make([]float64, 0, n+n/2), s.Mass...)
	}
	s.Mass = s.Mass[:n]
	if old == 0 {
		clear(s.Mass[:min(n, slicePad)])
	}
}

// gatherRows writes rows of a slice, the first of them row, to each of which the rows of
// all taps reach.
func (ss *sliceSpace) gatherRows(dst, src *Slices, to []SliceRow, row int32) {
	ss.rows = ss.rows[:0]
	for i := range ss.heads {
		h := &ss.heads[i]
		for q := range h.high {
			k := row - h.first - q
			rows := h.rows[k : k+int32(len(to))]
			for x := range h.wide {
				ss.rows = append(ss.rows, kernel.RowTap{Rows: rows, Cols: int(h.cols + x), Ahead: q+x == 0})
			}
		}
	}
	ss.starts = resize(ss.starts, len(ss.whole))
	kernel.CombineRows(dst.Mass, to, src.Mass, ss.rows, ss.whole, ss.starts)
}

// gatherRagged writes one row of a slice, from col on, to which the rows of some taps do
// not reach, or not all over: those that do together, the others one by one.
func (ss *sliceSpace) gatherRagged(s *Slices, dst []float64, col, row int32) {
	starts, weights := ss.starts[:0], ss.weights[:0]
	ss.partial = ss.partial[:0]
	n := int32(len(dst))
	for i := range ss.heads {
		h := &ss.heads[i]
		for q := range h.high {
			k := row - h.first - q
			if k < 0 || k >= int32(len(h.rows)) {
				continue
			}
			r := h.rows[k]
			if r.Len == 0 {
				continue
			}
			weight := ss.taps[i].weight[q*h.wide:][:h.wide]
			off := col - h.cols - r.Col
			if off-h.wide+1 >= -slicePad && off+n <= r.Len+slicePad {
				from := r.Start + int(off)
				for x, weight := range weight {
					starts, weights = append(starts, from-x), append(weights, weight)
				}
				continue
			}
			for x, weight := range weight {
				ss.partial = append(ss.partial, partial{r.Start, int32(x) - off, r.Len, weight})
			}
		}
	}
	ss.starts, ss.weights = starts, weights
	if len(starts) > 0 {
		kernel.Combine(dst, s.Mass, starts, weights)
	} else {
		clear(dst)
	}
	for _, p := range ss.partial {
		kernel.AddScaled(dst[p.col:p.col+p.length], s.Mass[p.start:p.start+int(p.length)], p.weight)
	}
}

// partial is a row that covers a part of another one, from cell col on.
type partial struct {
	start       int
	col, length int32
	weight      float64
}
