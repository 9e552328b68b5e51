package filter

import (
	"math"

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
	// What gatherRow takes.
	heads   []head
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
// count, each a column farther than the one before.
type sliceTap struct {
	slice             int32
	cols, rows, count int32
	weight            [4]float64
}

// head is a tap with its slice's rows; first is where the first of them comes to lie.
type head struct {
	rows               []SliceRow
	first, cols, count int32
}

func oneTap(slice, cols, rows int32, weight float64) sliceTap {
	return sliceTap{slice, cols, rows, 1, [4]float64{weight}}
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
	top, bottom := int32(math.MaxInt32), int32(math.MinInt32)
	ss.heads, ss.whole = ss.heads[:0], ss.whole[:0]
	for i := range ss.taps {
		t := &ss.taps[i]
		c := &src.At[t.slice]
		top, bottom = min(top, c.Row+t.rows), max(bottom, c.Row+c.Count+t.rows)
		ss.heads = append(ss.heads, head{src.Rows[c.First : c.First+c.Count], c.Row + t.rows, t.cols, t.count})
		ss.whole = append(ss.whole, t.weight[:t.count]...)
	}
	ss.starts = resize(ss.starts, len(ss.whole))
	ss.noRows(bottom - top)
	for i := range ss.heads {
		h := &ss.heads[i]
		lo := ss.lo[h.first-top:][:len(h.rows)]
		hi := ss.hi[h.first-top:][:len(h.rows)]
		beyond := h.cols + h.count - 1
		for k := range h.rows {
			if r := &h.rows[k]; r.Len > 0 {
				lo[k], hi[k] = min(lo[k], r.Col+h.cols), max(hi[k], r.Col+r.Len+beyond)
			}
		}
	}
	c := dst.place(at, top, ss.lo, ss.hi)
	for i := range ss.taps {
		t := &ss.taps[i]
		for _, weight := range t.weight[:t.count] {
			c.Mass += float64(weight * src.At[t.slice].Mass)
		}
	}
	for k := range c.Count {
		r := &dst.Rows[c.First+k]
		if r.Len == 0 {
			continue
		}
		ss.gatherRow(src, dst.Mass[r.Start:r.Start+int(r.Len)], r.Col, top+k)
		clear(dst.Mass[r.Start+int(r.Len):][:slicePad])
	}
	ss.dropped += dst.trimRows(c, floor)
	if c.Count == 0 {
		dst.At = dst.At[:len(dst.At)-1]
		return false
	}
	return true
}

// trimRows cuts the faint ends of a slice's rows, and the rows before and after all
// that have something left, and returns what they had. A slice of nothing is left
// without rows.
func (s *Slices) trimRows(c *Slice, floor float64) (gone float64) {
	first, last := int32(math.MaxInt32), int32(-1)
	for k := range c.Count {
		r := &s.Rows[c.First+k]
		if r.Len == 0 {
			continue
		}
		cut := s.trim(r, floor)
		c.Mass -= cut
		gone += cut
		if r.Len > 0 {
			first, last = min(first, k), k
		}
	}
	if last < 0 {
		c.Count = 0
		return gone
	}
	c.First += first
	c.Row += first
	c.Count = last - first + 1
	return gone
}

// trim cuts a row's faint ends and returns their mass.
func (s *Slices) trim(r *SliceRow, floor float64) (gone float64) {
	mass := s.Mass[r.Start : r.Start+int(r.Len)]
	x, y := 0, len(mass)
	for x < y && faint(mass[x:x+sliceLane], floor) {
		x += sliceLane
	}
	for y > x && faint(mass[y-sliceLane:y], floor) {
		y -= sliceLane
	}
	if y-x < len(mass) {
		gone = wipe(mass[:x]) + wipe(mass[y:])
		r.Start += x
		r.Col += int32(x)
		r.Len = int32(y - x)
	}
	return gone
}

// gatherRow writes one row of a slice, from col on. Where the rows of all taps reach
// all over it, with what is around them, they are taken together.
func (ss *sliceSpace) gatherRow(s *Slices, dst []float64, col, row int32) {
	n := int32(len(dst))
	starts := ss.starts
	taps := 0
	for i := range ss.heads {
		h := &ss.heads[i]
		k := row - h.first
		if uint32(k) >= uint32(len(h.rows)) {
			ss.gatherRagged(s, dst, col, row)
			return
		}
		r := &h.rows[k]
		off := col - h.cols - r.Col
		if r.Len == 0 || off-h.count+1 < -slicePad || off+n > r.Len+slicePad {
			ss.gatherRagged(s, dst, col, row)
			return
		}
		from := r.Start + int(off)
		for q := range int(h.count) {
			starts[taps] = from - q
			taps++
		}
	}
	kernel.Combine(dst, s.Mass, starts[:taps], ss.whole)
}

// gatherRagged is gatherRow for rows of which some do not: those that do together, the
// others one by one.
func (ss *sliceSpace) gatherRagged(s *Slices, dst []float64, col, row int32) {
	starts, weights := ss.starts[:0], ss.weights[:0]
	ss.partial = ss.partial[:0]
	n := int32(len(dst))
	for i := range ss.heads {
		h := &ss.heads[i]
		k := row - h.first
		if k < 0 || k >= int32(len(h.rows)) {
			continue
		}
		r := h.rows[k]
		if r.Len == 0 {
			continue
		}
		weight := ss.taps[i].weight[:h.count]
		off := col - h.cols - r.Col
		if off-h.count+1 >= -slicePad && off+n <= r.Len+slicePad {
			from := r.Start + int(off)
			for q, weight := range weight {
				starts, weights = append(starts, from-q), append(weights, weight)
			}
			continue
		}
		for q, weight := range weight {
			ss.partial = append(ss.partial, partial{r.Start, int32(q) - off, r.Len, weight})
		}
	}
	ss.weights = weights
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

// noRows makes n empty rows.
func (ss *sliceSpace) noRows(n int32) {
	ss.lo, ss.hi = resize(ss.lo, int(n)), resize(ss.hi, int(n))
	for r := range ss.lo {
		ss.lo[r], ss.hi[r] = math.MaxInt32, math.MinInt32
	}
}

// place appends a slice with rows from lo to hi, or a little longer. Their masses are
// not set, nor what is after them.
func (s *Slices) place(at [2]int32, top int32, lo, hi []int32) *Slice {
	s.At = append(s.At, Slice{East: at[0], North: at[1], Row: top, First: int32(len(s.Rows)), Count: int32(len(lo))})
	n := max(len(s.Mass), slicePad)
	old := len(s.Mass)
	for r := range lo {
		row := SliceRow{Start: n}
		if hi[r] > lo[r] {
			row.Col, row.Len = lo[r], (hi[r]-lo[r]+sliceLane-1)&^(sliceLane-1)
			n += int(row.Len) + slicePad
		}
		s.Rows = append(s.Rows, row)
	}
	if cap(s.Mass) < n {
		s.Mass = append(make([]float64, 0, n+n/2), s.Mass...)
	}
	s.Mass = s.Mass[:n]
	if old == 0 {
		clear(s.Mass[:min(n, slicePad)])
	}
	return &s.At[len(s.At)-1]
}

// placeClear is place with masses of 0.
func (s *Slices) placeClear(at [2]int32, top int32, lo, hi []int32) *Slice {
	old := len(s.Mass)
	c := s.place(at, top, lo, hi)
	clear(s.Mass[old:])
	return c
}

// trimSlices drops what is faint at the ends of rows, the rows and slices that have
// nothing left, and counts it.
func (b *Belief) trimSlices() {
	s := &b.Slices
	floor := sliceFloor / s.Scale
	dropped := 0.0
	kept := s.At[:0]
	for i := range s.At {
		c := s.At[i]
		dropped += s.trimRows(&c, floor)
		if c.Count > 0 {
			kept = append(kept, c)
		}
	}
	s.At = kept
	b.Pruned += math.Max(0, dropped*s.Scale)
}

func faint(mass []float64, floor float64) bool {
	for _, v := range mass[:sliceLane] {
		if !(v < floor && v > -floor) {
			return false
		}
	}
	return true
}

// wipe makes masses 0 and returns what they were in all.
func wipe(mass []float64) (sum float64) {
	for i, v := range mass {
		sum += v
		mass[i] = 0
	}
	return sum
}
