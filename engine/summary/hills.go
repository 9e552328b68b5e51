package summary

import (
	"math"
	"slices"

	"leadline/engine/geo"
)

// hills is a density on the nodes of a square grid, and its division into peaks
// and what belongs to them. The grid is a plain array if that is not much larger
// than the belief, else its nodes are hashed; the nodes' order differs, what
// comes out does not but for ties.
type hills struct {
	side float64
	// The plain array: its first column and row, and its width; 0 if hashed.
	col0, row0, width int32

	slot  []int32 // open addressing: node + 1, 0 is free; a power of two long
	key   []uint64
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

func nodeKey(col, row int32) uint64 { return uint64(uint32(col))<<32 | uint64(uint32(row)) }

func (h *hills) reset(side float64, entries int) {
	h.side = side
	h.width = 0
	h.key, h.mass = h.key[:0], h.mass[:0]
	h.near = resize(h.near, entries)
	// Small at first, so that clearing it costs a small belief nothing.
	h.slot = resize(h.slot, 256)
	clear(h.slot)
}

// lay makes the grid a plain array that spans the entries with two nodes to
// spare, if that is at most four times as many nodes as entries and 1024.
func (h *hills) lay(east, north []float64) {
	box := geo.EmptyBox()
	for i := range east {
		box = box.Extend(geo.Point{E: east[i], N: north[i]})
	}
	col0, row0 := math.Floor(box.Min.E/h.side)-2, math.Floor(box.Min.N/h.side)-2
	cols, rows := math.Floor(box.Max.E/h.side)+4-col0, math.Floor(box.Max.N/h.side)+4-row0
	if cols*rows > float64(4*len(east)+1024) {
		return
	}
	h.col0, h.row0, h.width = int32(col0), int32(row0), int32(cols)
	h.mass = resize(h.mass, int(cols*rows))
	clear(h.mass)
}

// place returns the node at a column and row, making it if need be.
func (h *hills) place(col, row int32) int32 {
	if h.width > 0 {
		return (row-h.row0)*h.width + col - h.col0
	}
	return h.node(nodeKey(col, row))
}

// around fills the nodes around one: -1 where there is none. A plain array has
// an empty rim; a node of it has no neighbours beyond.
func (h *hills) around(dst *[8]int32, n int32) {
	if w := h.width; w > 0 {
		*dst = [8]int32{n - w - 1, n - w, n - w + 1, n - 1, n + 1, n + w - 1, n + w, n + w + 1}
		return
	}
	col, row := int32(h.key[n]>>32), int32(uint32(h.key[n]))
	i := 0
	for dy := int32(-1); dy <= 1; dy++ {
		for dx := int32(-1); dx <= 1; dx++ {
			if dx != 0 || dy != 0 {
				dst[i] = h.find(nodeKey(col+dx, row+dy))
				i++
			}
		}
	}
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
		col, row := int32(h.key[i]>>32), int32(uint32(h.key[i]))
		for dy := int32(-1); dy <= 1; dy++ {
			for dx := int32(-1); dx <= 1; dx++ {
				j := int32(i)
				if dx != 0 || dy != 0 {
					j = h.node(nodeKey(col+dx, row+dy))
				}
				if int(j) == len(h.high) {
					h.high = append(h.high, 0)
				}
				h.high[j] += float64(float64((2-dx*dx)*(2-dy*dy)) / 16 * m)
			}
		}
	}
}

// divide visits the nodes from the highest down. A node with no visited
// neighbour is a new peak; any other joins the highest peak next to it. Where
// it joins several it is the saddle between them, and the lower peaks are
// absorbed unless the saddle is below prominence times their height.
func (h *hills) divide(prominence float64) {
	n := len(h.mass)
	h.order = resize(h.order, n)[:0]
	h.peak, h.visit = resize(h.peak, n), resize(h.visit, n)
	for i, high := range h.high {
		h.peak[i] = -1
		if high > 0 {
			h.order = append(h.order, packHeight(high, i))
		}
	}
	h.spare = resize(h.spare, len(h.order))
	sortPacked(h.order, h.spare)
	var next [8]int32
	for rank, packed := range h.order {
		at := int32(uint32(packed))
		h.visit[at] = int32(rank)
		var roots [8]int32
		count, best := 0, int32(-1)
		h.around(&next, at)
		for _, j := range next {
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
