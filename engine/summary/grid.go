package summary

import (
	"math"

	"leadline/engine/geo"
)

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

// around returns the nodes around one: -1 where there is none. A plain array
// has an empty rim, which is never asked for; all its other nodes have eight.
func (h *hills) around(n int32) [8]int32 {
	if w := h.width; w > 0 {
		return [8]int32{n - w - 1, n - w, n - w + 1, n - 1, n + 1, n + w - 1, n + w, n + w + 1}
	}
	return h.next[n]
}

// link fills next.
func (h *hills) link() {
	h.next = resize(h.next, len(h.key))
	for n, key := range h.key {
		col, row := int32(key>>32), int32(uint32(key))
		i := 0
		for dy := int32(-1); dy <= 1; dy++ {
			for dx := int32(-1); dx <= 1; dx++ {
				if dx != 0 || dy != 0 {
					h.next[n][i] = h.find(nodeKey(col+dx, row+dy))
					i++
				}
			}
		}
	}
}

// hashOf keeps the columns of a row side by side, so that looking at a node's
// neighbours stays within a few cache lines; rows are scattered by 2^32 over the
// golden ratio.
func hashOf(key uint64, mask int) int {
	return int(uint32(key)*0x9e3779b1+uint32(key>>32)) & mask
}

// find returns the node of a key, -1 if there is none.
func (h *hills) find(key uint64) int32 {
	mask := len(h.slot) - 1
	for i := hashOf(key, mask); ; i = (i + 1) & mask {
		if s := &h.slot[i]; s.node == 0 || s.key == key {
			return s.node - 1
		}
	}
}

// node returns the node of a key, making it if need be.
func (h *hills) node(key uint64) int32 {
	mask := len(h.slot) - 1
	i := hashOf(key, mask)
	for ; h.slot[i].node != 0; i = (i + 1) & mask {
		if h.slot[i].key == key {
			return h.slot[i].node - 1
		}
	}
	n := int32(len(h.key))
	h.key = append(h.key, key)
	h.mass = append(h.mass, 0)
	h.slot[i] = slot{key, n + 1}
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
		for h.slot[i].node != 0 {
			i = (i + 1) & mask
		}
		h.slot[i] = slot{key, int32(n) + 1}
	}
}
