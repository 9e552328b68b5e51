package summary

import (
	"cmp"
	"math"
	"slices"
)

// hills is a density on the nodes of a sparse square grid, and its division
// into peaks and what belongs to them.
type hills struct {
	side  float64
	slot  []int32 // open addressing: node + 1, 0 is free; a power of two long
	key   []uint64
	mass  []float64
	high  []float64 // smoothed
	order []hill
	peak  []int32 // union-find parent by node, -1 while not yet visited
	near  []int32 // by entry: the nearest node
}

type hill struct {
	high float64
	key  uint64
	node int32
}

// byHeight sorts the highest first, and equals by their place.
func byHeight(a, b hill) int {
	if a.high != b.high {
		return cmp.Compare(b.high, a.high)
	}
	return cmp.Compare(a.key, b.key)
}

func nodeKey(col, row int32) uint64 { return uint64(uint32(col))<<32 | uint64(uint32(row)) }

func (h *hills) reset(side float64, entries int) {
	h.side = side
	h.key, h.mass = h.key[:0], h.mass[:0]
	h.near = resize(h.near, entries)
	// Small at first, so that clearing it costs a small belief nothing.
	h.slot = resize(h.slot, 256)
	clear(h.slot)
}

func hashOf(key uint64, mask int) int {
	key *= 0x9e3779b97f4a7c15 // 2^64 over the golden ratio
	return int(key>>32) & mask
}

// find returns the node of a key, -1 if there is none.
func (h *hills) find(key uint64) int32 {
	mask := len(h.slot) - 1
	for i := hashOf(key, mask); ; i = (i + 1) & mask {
		n := h.slot[i] - 1
		if n < 0 || h.key[n] == key {
			return n
		}
	}
}

// node returns the node of a key, making it if need be.
func (h *hills) node(key uint64) int32 {
	mask := len(h.slot) - 1
	i := hashOf(key, mask)
	for ; h.slot[i] != 0; i = (i + 1) & mask {
		if n := h.slot[i] - 1; h.key[n] == key {
			return n
		}
	}
	n := int32(len(h.key))
	h.key = append(h.key, key)
	h.mass = append(h.mass, 0)
	h.slot[i] = n + 1
	if 2*len(h.key) > len(h.slot) {
		h.grow()
	}
	return n
}

func (h *hills) grow() {
	h.slot = resize(h.slot, 4*len(h.slot))
	clear(h.slot)
	mask := len(h.slot) - 1
	for n, key := range h.key {
		i := hashOf(key, mask)
		for h.slot[i] != 0 {
			i = (i + 1) & mask
		}
		h.slot[i] = int32(n) + 1
	}
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
				h.node(nodeKey(col, row)), h.node(nodeKey(col+1, row)),
				h.node(nodeKey(col, row+1)), h.node(nodeKey(col+1, row+1)),
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
	n := len(h.key)
	h.high = resize(h.high, n)
	for i := range n {
		h.high[i] = 0
	}
	for i := range n {
		m := h.mass[i]
		if m == 0 {
			continue
		}
		col, row := int32(h.key[i]>>32), int32(uint32(h.key[i]))
		for dy := int32(-1); dy <= 1; dy++ {
			for dx := int32(-1); dx <= 1; dx++ {
				j := int32(i)
				if dx != 0 || dy != 0 {
					j = h.node(nodeKey(col+dx, row+dy))
				}
				w := float64((2-dx*dx)*(2-dy*dy)) / 16
				if int(j) == len(h.high) {
					h.high = append(h.high, 0)
				}
				h.high[j] += float64(w * m)
			}
		}
	}
}

// divide visits the nodes from the highest down. A node with no visited
// neighbour is a new peak; any other joins the highest peak next to it. Where
// it joins several it is the saddle between them, and the lower peaks are
// absorbed unless the saddle is below prominence times their height.
func (h *hills) divide(prominence float64) {
	n := len(h.key)
	h.order = resize(h.order, n)[:0]
	h.peak = resize(h.peak, n)
	for i := range n {
		h.peak[i] = -1
		if h.high[i] > 0 {
			h.order = append(h.order, hill{h.high[i], h.key[i], int32(i)})
		}
	}
	slices.SortFunc(h.order, byHeight)
	for i := range h.order {
		at := &h.order[i]
		col, row := int32(at.key>>32), int32(uint32(at.key))
		var roots [8]int32
		count, best := 0, int32(-1)
		for dy := int32(-1); dy <= 1; dy++ {
			for dx := int32(-1); dx <= 1; dx++ {
				if dx == 0 && dy == 0 {
					continue
				}
				j := h.find(nodeKey(col+dx, row+dy))
				if j < 0 || h.peak[j] < 0 {
					continue
				}
				j = h.root(j)
				if slices.Contains(roots[:count], j) {
					continue
				}
				roots[count] = j
				count++
				if best < 0 || h.above(j, best) {
					best = j
				}
			}
		}
		if best < 0 {
			h.peak[at.node] = at.node
			continue
		}
		h.peak[at.node] = best
		for _, j := range roots[:count] {
			if j != best && at.high >= prominence*h.high[j] {
				h.peak[j] = best
			}
		}
	}
}

// above orders peaks as divide visits them.
func (h *hills) above(a, b int32) bool {
	if h.high[a] != h.high[b] {
		return h.high[a] > h.high[b]
	}
	return h.key[a] < h.key[b]
}

// root returns the peak that a visited node belongs to.
func (h *hills) root(n int32) int32 {
	for h.peak[n] != n {
		h.peak[n] = h.peak[h.peak[n]]
		n = h.peak[n]
	}
	return n
}
