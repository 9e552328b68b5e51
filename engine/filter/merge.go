package filter

import (
	"cmp"
	"math"
	"math/bits"
	"slices"

	"leadline/engine/geo"
)

// maxPerCell bounds perCell.
const maxPerCell = 16

// perCell is how many Gaussians one cell may hold. On lines, with one,
// headings a quarter turn apart would merge and the truth be lost at the
// first corner; on a plane the heading may be anything.
func perCell(dim int) int {
	if dim == 1 {
		return 3
	}
	return maxPerCell
}

// mergeAngleRad is the difference of an angular quantity below which two
// Gaussians of one cell are the same story. It is well under the 45° that
// tells two roads at a junction apart, and above the spread of headings along
// one road.
const mergeAngleRad = 0.25

// merger sorts Gaussians by cell and merges those of one cell.
type merger struct {
	order, spare []int32
}

// merge writes the Gaussians of src into dst (which it empties first), in
// ascending order of cell, merged by moments so that each cell holds at most
// most. trace, if not nil, gets for each entry of src the entry of
// dst it went into.
func (m *merger) merge(dst, src *Gaussians, k int, angular uint, most int, trace []int32) {
	n := len(src.Key)
	dst.empty(n, k)
	m.sort(src.Key)
	for a := 0; a < n; {
		key := src.Key[m.order[a]]
		b := a + 1
		for b < n && src.Key[m.order[b]] == key {
			b++
		}
		cell := m.order[a:b]
		a = b
		if len(cell) == 1 { // most of a narrow belief
			if trace != nil {
				trace[cell[0]] = int32(len(dst.Key))
			}
			dst.pushFrom(src, int(cell[0]), k)
			wrap(dst.Mean[len(dst.Mean)-k:], angular)
			continue
		}
		// Heavy ones first, so that they, not crumbs, found the groups.
		heavyFirst(cell, src.Mass)
		first := len(dst.Key)
		for _, i := range cell {
			into := dst.nearest(first, most, src.Mean[int(i)*k:][:k], angular)
			if into < 0 {
				into = len(dst.Key)
				dst.pushFrom(src, int(i), k)
			} else {
				dst.absorb(into, src, int(i), k, angular)
			}
			if trace != nil {
				trace[i] = int32(into)
			}
		}
		for i := first; i < len(dst.Key); i++ {
			wrap(dst.Mean[i*k:i*k+k], angular)
		}
	}
}

// heavyFirst sorts entries by falling mass, equals in the order that they have.
func heavyFirst(cell []int32, mass []float64) {
	if len(cell) > 12 {
		slices.SortStableFunc(cell, func(i, j int32) int { return cmp.Compare(mass[j], mass[i]) })
		return
	}
	for i := 1; i < len(cell); i++ {
		o := cell[i]
		j := i
		for ; j > 0 && mass[cell[j-1]] < mass[o]; j-- {
			cell[j] = cell[j-1]
		}
		cell[j] = o
	}
}

func wrap(mean []float64, angular uint) {
	for ; angular != 0; angular &= angular - 1 {
		q := bits.TrailingZeros(angular)
		mean[q] = geo.WrapPi(mean[q])
	}
}

// nearest returns which of the entries from first on a Gaussian belongs to, or -1 if it
// founds a group.
func (c *Gaussians) nearest(first, most int, mean []float64, angular uint) int {
	if len(c.Key) == first {
		return -1
	}
	if angular == 0 {
		return first
	}
	k := len(mean)
	best, least := -1, math.Inf(1)
	for i := first; i < len(c.Key); i++ {
		d, other := 0.0, c.Mean[i*k:i*k+k]
		for left := angular; left != 0; left &= left - 1 {
			q := bits.TrailingZeros(left)
			d = max(d, math.Abs(geo.WrapPi(mean[q]-other[q])))
		}
		if d < least {
			best, least = i, d
		}
	}
	if least > mergeAngleRad && len(c.Key)-first < most {
		return -1
	}
	return best
}

// load copies entry i, with k quantities.
func (c *Gaussians) load(g *gaussian, i, k int) {
	g.mass = c.Mass[i]
	copy(g.mean[:], c.Mean[i*k:i*k+k])
	p := k * (k + 1) / 2
	copy(g.cov[:], c.Cov[i*p:i*p+p])
}

// sort sets m.order to the stable ascending order of the keys: by insertion
// where they are few or in order but for a few places, as after a short step;
// else by a radix sort over the bits in which the keys differ, linear in their
// number.
func (m *merger) sort(keys []uint64) {
	n := len(keys)
	if cap(m.order) < n {
		m.order = make([]int32, n+n/4)
		m.spare = make([]int32, n+n/4)
	}
	m.order, m.spare = m.order[:n], m.spare[:n]
	for i := range m.order {
		m.order[i] = int32(i)
	}
	if m.insert(keys) {
		return
	}
	var differ uint64
	for _, key := range keys {
		differ |= key ^ keys[0]
	}
	const digit = 11
	for shift := 0; shift < 64; shift += digit {
		skip := bits.TrailingZeros64(differ >> uint(shift))
		if differ>>uint(shift) == 0 {
			break
		}
		shift += skip
		var count [1 << digit]int32
		for _, key := range keys {
			count[key>>uint(shift)&(1<<digit-1)]++
		}
		at := int32(0)
		for i, c := range count {
			count[i] = at
			at += c
		}
		for _, o := range m.order {
			d := keys[o] >> uint(shift) & (1<<digit - 1)
			m.spare[count[d]] = o
			count[d]++
		}
		m.order, m.spare = m.spare, m.order
	}
}

// insert sorts by insertion, and gives up where that takes more than 32 moves
// an entry; m.order is then in an order in which equals are as they were.
func (m *merger) insert(keys []uint64) bool {
	left := 32 * len(keys)
	for i := 1; i < len(keys); i++ {
		o := m.order[i]
		key := keys[o]
		j := i
		for ; j > 0 && keys[m.order[j-1]] > key; j-- {
			m.order[j] = m.order[j-1]
		}
		m.order[j] = o
		if left -= i - j; left < 0 {
			return false
		}
	}
	return true
}
