package filter

import (
	"math"

	"leadline/engine/kernel"
)

// sliceScales are the scales along the four axes, in cells: as scale is of a lattice.
func (b *Belief) sliceScales(ss *sliceSpace) (scale [4]float64) {
	s := &b.Slices
	total := s.total()
	rough := [4]float64{}
	rough[0], rough[1] = s.roughness(ss, s.Mass)
	ss.indexSlices(s)
	for i := range s.At {
		c := &s.At[i]
		for a := range 2 {
			next := [2]int32{c.East, c.North}
			next[a]++
			rough[2+a] += ss.stepBetween(s, c, ss.find(next), a)
			next[a] -= 2
			if ss.find(next) < 0 {
				rough[2+a] += c.Mass
			}
		}
	}
	for d, j := range rough {
		scale[d] = 1 / (2 * math.Sqrt(j/total))
	}
	return scale
}

// roughness is Σ (√p(i+1) - √p(i))² of masses along the axes of positions.
func (s *Slices) roughness(ss *sliceSpace, masses []float64) (je, jn float64) {
	for i := range s.At {
		c := &s.At[i]
		var above SliceRow
		ss.last = ss.last[:0]
		for k := range c.Count + 1 {
			var r SliceRow
			ss.lane = ss.lane[:0]
			if k < c.Count {
				r = s.Rows[c.First+k]
				before := 0.0
				for _, v := range masses[r.Start : r.Start+int(r.Len)] {
					root := math.Sqrt(math.Max(v, 0))
					ss.lane = append(ss.lane, root)
					step := root - before
					je += float64(step * step)
					before = root
				}
				je += float64(before * before)
			}
			jn += apartBy(ss.lane, r.Col, ss.last, above.Col)
			above = r
			ss.lane, ss.last = ss.last, ss.lane
		}
	}
	return je, jn
}

// apartBy is the sum of the squared differences of two rows that begin at columns.
func apartBy(p []float64, pCol int32, q []float64, qCol int32) (sum float64) {
	lo, hi := max(pCol, qCol), min(pCol+int32(len(p)), qCol+int32(len(q)))
	if hi <= lo {
		return squares(p) + squares(q)
	}
	sum = squares(p[:lo-pCol]) + squares(p[hi-pCol:]) + squares(q[:lo-qCol]) + squares(q[hi-qCol:])
	q = q[lo-qCol:]
	for i, v := range p[lo-pCol : hi-pCol] {
		step := v - q[i]
		sum += float64(step * step)
	}
	return sum
}

func squares(p []float64) (sum float64) {
	for _, v := range p {
		sum += float64(v * v)
	}
	return sum
}

// stepBetween is the sum of (√p' - √p)² between a slice and the next along axis a, at
// the same positions: the next one's masses are read between its cells.
func (ss *sliceSpace) stepBetween(s *Slices, c *Slice, next int32, a int) float64 {
	if next < 0 {
		return c.Mass
	}
	n := &s.At[next]
	d := (s.origin(a, c.along(a)+1) - s.origin(a, c.along(a))) / s.SpacingM[a]
	m := math.Floor(d)
	f := d - m
	// Cell i of the next slice lies at i + m + f here: what is read at a cell here
	// is (1-f) of its cell i - m and f of the one before.
	rows, cols := int32(0), int32(m)
	if a == 1 {
		rows, cols = int32(m), 0
	}
	both := 0.0
	for k := range c.Count {
		r, mass := s.row(c, k)
		if r.Len == 0 {
			continue
		}
		ss.lane = resize(ss.lane, int(r.Len))
		clear(ss.lane)
		add := func(rows, cols int32, weight float64) {
			if i := c.Row + k - rows - n.Row; i >= 0 && i < n.Count && weight > 0 {
				o, other := s.row(n, i)
				lo, hi := max(r.Col, o.Col+cols), min(r.Col+r.Len, o.Col+o.Len+cols)
				if hi > lo {
					kernel.AddScaled(ss.lane[lo-r.Col:hi-r.Col], other[lo-cols-o.Col:hi-cols-o.Col], weight)
				}
			}
		}
		add(rows, cols, 1-f)
		if a == 0 {
			add(rows, cols+1, f)
		} else {
			add(rows+1, cols, f)
		}
		for x, v := range ss.lane {
			both += math.Sqrt(math.Max(v*mass[x], 0))
		}
	}
	return math.Max(0, c.Mass+n.Mass-2*both)
}
