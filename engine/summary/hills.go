package summary

import (
	"math"
	"slices"
)

// hills is a density on the nodes of a square grid, and its division into peaks
// and what belongs to them. The grid is a plain array if that is not much larger
// than the belief, else its nodes come in blocks; the nodes' order differs, what
// comes out does not but for ties.
type hills struct {
	side float64
	// The plain array: its first column and row, and its width; 0 if in blocks.
	col0, row0, width int32
	blocks            blocks

	mass  []float64
	high  []float64 // smoothed
	order []uint64  // packed by byHeight
	spare []uint64
	visit []int32 // when divide came to a node
	peak  []int32 // union-find parent by node, -1 while not yet visited
	near  []int32 // by entry: the nearest node
}

// packHeight makes numbers that ascend as heights fall and then as nodes rise.
// Heights are compared as float32: one in 10⁷ is no hill.
func packHeight(high float64, node int) uint64 {
	return uint64(^math.Float32bits(float32(high)))<<32 | uint64(uint32(node))
}

// sortPacked sorts in ascending order; spare is as long as order.
func sortPacked(order, spare []uint64) {
	if len(order) < 2048 {
		slices.Sort(order)
		return
	}
	// By eleven bits of the height at a time, least first. Each pass keeps
	// the order of equals; the nodes begin in theirs.
	from, to := order, spare
	for _, shift := range [3]int{32, 43, 54} {
		var count [2048]int
		for _, v := range from {
			count[v>>shift&2047]++
		}
		sum := 0
		for i, c := range count {
			count[i] = sum
			sum += c
		}
		for _, v := range from {
			d := v >> shift & 2047
			to[count[d]] = v
			count[d]++
		}
		from, to = to, from
	}
	copy(order, from) // an odd number of passes ends in spare
}

// pour adds an entry's mass to the four nodes around it, bilinearly, so that
// cutting an entry in two that have its mean changes nothing.
func (h *hills) pour(east, north, mass []float64) {
	const none = math.MinInt32
	lastCol, lastRow := int32(none), int32(none)
	var quad [4]int32
	inverse := 1 / h.side
	for i, m := range mass {
		x, y := east[i]*inverse, north[i]*inverse
		fx, fy := math.Floor(x), math.Floor(y)
		col, row := int32(fx), int32(fy)
		if col != lastCol || row != lastRow {
			lastCol, lastRow = col, row
			quad = [4]int32{
				h.place(col, row), h.place(col+1, row),
				h.place(col, row+1), h.place(col+1, row+1),
			}
		}
		x -= fx
		y -= fy
		h.mass[quad[0]] += float64(m * float64((1-x)*(1-y)))
		h.mass[quad[1]] += float64(m * float64(x*(1-y)))
		h.mass[quad[2]] += float64(m * float64((1-x)*y))
		h.mass[quad[3]] += float64(m * float64(x*y))
		k := 0
		if x >= 0.5 {
			k = 1
		}
		if y >= 0.5 {
			k += 2
		}
		h.near[i] = quad[k]
	}
}

// smooth spreads the masses by the binomial kernel (1 2 1)/4 each way.
func (h *hills) smooth() {
	h.high = resize(h.high, len(h.mass))
	clear(h.high)
	n := len(h.mass)
	if w := int(h.width); w > 0 {
		for i, m := range h.mass {
			if m == 0 {
				continue
			}
			for _, o := range [3]int{i - w, i, i + w} {
				q := m * (1.0 / 16)
				if o == i {
					q *= 2
				}
				h.high[o-1] += q
				h.high[o] += 2 * q
				h.high[o+1] += q
			}
		}
		return
	}
	for i := range n {
		m := h.mass[i]
		if m == 0 {
			continue
		}
		for dy := int32(-1); dy <= 1; dy++ {
			for dx := int32(-1); dx <= 1; dx++ {
				j := h.blocks.beside(int32(i), dx, dy, true)
				for len(h.high) < h.blocks.nodes() {
					h.high = append(h.high, noNodes[:]...)
				}
				h.high[j] += float64(float64((2-dx*dx)*(2-dy*dy)) / 16 * m)
			}
		}
	}
	for len(h.mass) < len(h.high) {
		h.mass = append(h.mass, noNodes[:]...)
	}
}

// divide visits the nodes from the highest down. A node with no visited
// neighbour is a new peak; any other joins the highest peak next to it. Where
// it joins several it is the saddle between them, and the lower peaks are
// absorbed unless the saddle is below prominence times their height.
func (h *hills) divide(prominence float64) {
	n := len(h.mass)
	used := 0
	for _, high := range h.high {
		if high > 0 {
			used++
		}
	}
	h.order = resize(h.order, used)[:0]
	h.peak, h.visit = resize(h.peak, n), resize(h.visit, n)
	for i, high := range h.high {
		h.peak[i] = -1
		if high > 0 {
			h.order = append(h.order, packHeight(high, i))
		}
	}
	h.spare = resize(h.spare, len(h.order))
	sortPacked(h.order, h.spare)
	for rank, packed := range h.order {
		at := int32(uint32(packed))
		h.visit[at] = int32(rank)
		var roots [8]int32
		count, best := 0, int32(-1)
		for _, j := range h.around(at) {
			if j < 0 || h.peak[j] < 0 {
				continue
			}
			j = h.root(j)
			if slices.Contains(roots[:count], j) {
				continue
			}
			roots[count] = j
			count++
			if best < 0 || h.visit[j] < h.visit[best] {
				best = j
			}
		}
		if best < 0 {
			h.peak[at] = at
			continue
		}
		h.peak[at] = best
		for _, j := range roots[:count] {
			if j != best && h.high[at] >= prominence*h.high[j] {
				h.peak[j] = best
			}
		}
	}
}

// root returns the peak that a visited node belongs to.
func (h *hills) root(n int32) int32 {
	for h.peak[n] != n {
		h.peak[n] = h.peak[h.peak[n]]
		n = h.peak[n]
	}
	return n
}
