package filter

import "slices"

// Way is for each Gaussian of a belief on lines the likeliest of the ways, that
// is sequences of charts, by which the vehicle may have come there, and the share
// of the Gaussian that came by it. Along a chart all motions count together: the
// likeliest sequence of cells would be one that keeps to cell after cell, since a
// cell more or less costs as much as the noise of the whole way.
//
// It is the Viterbi algorithm (Forney, Proc. IEEE 61, 1973) with sums within
// charts: of two ways that meet in a Gaussian, the one with less of it is dropped.
type Way struct {
	id    []uint64 // of the way, see extend
	prior []int32  // the chart before, -1: unknown
	part  []float64
	// Before a turn, for each piece: the share of its source that is on the way of
	// its target; 0 for what is on another one.
	piece []float64
}

// A way is known by the number that its charts make in a base modulo 2^64, from
// which the last one can be taken off again. Two of them have the same number
// by accident once in 2^64.
const (
	wayBase    = 0x9e3779b97f4a7c15
	wayInverse = 0xf1de83e19937733d
)

// Way is that of a belief on lines that has just begun: each chart is its own.
func (b *Belief) Way() Way {
	w := Way{id: make([]uint64, len(b.Key)), prior: make([]int32, len(b.Key)), part: make([]float64, len(b.Key))}
	for i, key := range b.Key {
		chart, _ := LineCell(key)
		w.id[i], w.prior[i], w.part[i] = uint64(uint32(chart))+1, -1, 1
	}
	return w
}

// Ways follows a tape of a belief on lines forward: first is of its beginning. The
// n-th of what it returns is of what there was before turn n, the last of its end.
func (t *Tape) Ways(first Way) []Way {
	all := make([]Way, 0, len(t.turns)+1)
	for n := range t.turns {
		u := &t.turns[n]
		next := u.ways(&first)
		all = append(all, first)
		first = next
	}
	return append(all, first)
}

// ways takes what there was before a turn to what there is after it, and notes
// which pieces are on the way of their target.
func (u *turn) ways(w *Way) Way {
	switch u.kind {
	case thinned:
		var out Way
		for _, j := range u.kept {
			out.id, out.prior, out.part = append(out.id, w.id[j]), append(out.prior, w.prior[j]), append(out.part, w.part[j])
		}
		return out
	case given:
		n := len(u.after.Mass)
		out := Way{id: make([]uint64, n), prior: make([]int32, n), part: make([]float64, n)}
		for i := range n {
			out.id[i], out.prior[i], out.part[i] = elsewhere, -1, 1
		}
		return out
	}
	type end struct {
		target int32
		id     uint64
		prior  int32
		mass   float64
	}
	ends := make([]end, len(u.target))
	w.piece = make([]float64, len(u.target))
	for j, t := range u.target {
		e := &ends[j]
		*e = end{t, elsewhere, -1, u.piece.Mass[j]}
		if s := u.source[j]; s >= 0 {
			e.id, e.prior = w.extend(u, s, t, u.offset[j] < 0)
			e.mass *= w.part[s]
		}
	}
	n := len(u.after.Mass)
	out := Way{id: make([]uint64, n), prior: make([]int32, n), part: make([]float64, n)}
	order := make([]int32, len(ends))
	for j := range order {
		order[j] = int32(j)
	}
	slices.SortStableFunc(order, func(a, b int32) int { return int(ends[a].target) - int(ends[b].target) })
	for a := 0; a < len(order); {
		t := ends[order[a]].target
		b := a
		whole, most := 0.0, 0.0
		var best *end
		for ; b < len(order) && ends[order[b]].target == t; b++ {
			whole += u.piece.Mass[order[b]]
		}
		for x := a; x < b; x++ {
			e := &ends[order[x]]
			if best != nil && e.id == best.id {
				continue
			}
			sum := 0.0
			for _, j := range order[x:b] {
				if ends[j].id == e.id {
					sum += ends[j].mass
				}
			}
			if best == nil || sum > most {
				best, most = e, sum
			}
		}
		out.id[t], out.prior[t], out.part[t] = best.id, best.prior, most/whole
		for _, j := range order[a:b] {
			if ends[j].id == best.id {
				w.piece[j] = 1
				if s := u.source[j]; s >= 0 {
					w.piece[j] = w.part[s]
				}
			}
		}
		a = b
	}
	return out
}

// elsewhere is the way of what comes from elsewhere.
const elsewhere = 0

// extend is the way of a piece of entry s that goes to entry t: a chart further, or
// back to the one before.
func (w *Way) extend(u *turn, s, t int32, back bool) (id uint64, prior int32) {
	from, _ := LineCell(u.before.Key[s])
	to, _ := LineCell(u.after.Key[t])
	switch {
	case from == to:
		return w.id[s], w.prior[s]
	case back && w.prior[s] == to:
		return (w.id[s] - uint64(uint32(from)) - 1) * wayInverse, -1
	}
	return w.id[s]*wayBase + uint64(uint32(to)) + 1, from
}

// along keeps the pieces that are on the way of their target.
func (w *Way) along(pieces []int32) []int32 {
	kept := pieces[:0]
	for _, j := range pieces {
		if w.piece[j] > 0 {
			kept = append(kept, j)
		}
	}
	return kept
}

// share is the part of a piece that is on the way of its target.
func (w *Way) share(j int32) float64 {
	if w == nil {
		return 1
	}
	return w.piece[j]
}

// Restrict leaves of a belief, or of what is known of it later, what came by the
// likeliest way of all, and returns the probability of that way.
func (w *Way) Restrict(h *Belief) float64 {
	sums := map[uint64]float64{}
	for i, m := range h.Mass {
		sums[w.id[i]] += m * w.part[i]
	}
	best, most := uint64(0), -1.0
	for _, id := range w.id { // in order: equals fall the same way each time
		if m := sums[id]; m > most {
			best, most = id, m
		}
	}
	if !(most > 0) {
		return 0
	}
	for i := range h.Mass {
		m := h.Mass[i] * w.part[i] / most
		if w.id[i] != best {
			m = 0
		}
		h.Mass[i] = m
	}
	return most
}

// SmoothAlong is Smooth along one way: h is what is known at the end of the tape
// of a vehicle that came by it (Restrict), ways what Ways returned.
func (t *Tape) SmoothAlong(h *Belief, ways []Way, w *Workspace, see func(turns int, h *Belief)) {
	t.smooth(h, ways, w, see)
}
