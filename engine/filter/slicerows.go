package filter

import "math"

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
	for r := range lo {
		row := SliceRow{Start: n}
		if hi[r] > lo[r] {
			row.Col, row.Len = lo[r], (hi[r]-lo[r]+sliceLane-1)&^(sliceLane-1)
			n += int(row.Len) + slicePad
		}
		s.Rows = append(s.Rows, row)
	}
	s.extend(n)
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
	v := (*[sliceLane]float64)(mass)
	return math.Abs(v[0]) < floor && math.Abs(v[1]) < floor && math.Abs(v[2]) < floor && math.Abs(v[3]) < floor
}

// wipe makes masses 0 and returns what they were in all.
func wipe(mass []float64) (sum float64) {
	for i, v := range mass {
		sum += v
		mass[i] = 0
	}
	return sum
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
		if mass := s.Mass[r.Start : r.Start+int(r.Len)]; faint(mass, floor) || faint(mass[r.Len-sliceLane:], floor) {
			cut := s.trim(r, floor)
			c.Mass -= cut
			gone += cut
		}
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
