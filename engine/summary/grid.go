package summary

import (
	"math"

	"leadline/engine/geo"
)

func (h *hills) reset(side float64, entries int) {
	h.side = side
	h.width = 0
	h.mass = h.mass[:0]
	h.near = resize(h.near, entries)
	h.blocks.reset()
}

// lay makes the grid a plain array that spans the entries with two nodes to
// spare, if that is at most four times as many nodes as entries and 1024.
func (h *hills) lay(box geo.Box, entries int) {
	col0, row0 := math.Floor(box.Min.E/h.side)-2, math.Floor(box.Min.N/h.side)-2
	cols, rows := math.Floor(box.Max.E/h.side)+4-col0, math.Floor(box.Max.N/h.side)+4-row0
	if cols*rows > float64(4*entries+1024) {
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
	n := h.blocks.node(col, row)
	for len(h.mass) < h.blocks.nodes() {
		h.mass = append(h.mass, noNodes[:]...)
	}
	return n
}

// noNodes are the masses of a new block.
var noNodes [blockSide * blockSide]float64

// ways are the steps from a node to those around it.
var ways = [8][2]int32{{-1, -1}, {0, -1}, {1, -1}, {-1, 0}, {1, 0}, {-1, 1}, {0, 1}, {1, 1}}

// around returns the nodes around one: -1 where there is none. A plain array
// has an empty rim, which is never asked for; all its other nodes have eight.
func (h *hills) around(n int32) [8]int32 {
	if w := h.width; w > 0 {
		return [8]int32{n - w - 1, n - w, n - w + 1, n - 1, n + 1, n + w - 1, n + w, n + w + 1}
	}
	var out [8]int32
	for i, way := range ways {
		out[i] = h.blocks.beside(n, way[0], way[1], false)
	}
	return out
}
