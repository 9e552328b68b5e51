package network

import (
	"slices"

	"leadline/engine/filter"
)

// links makes the turn table. From a chart's end a vehicle goes on into each
// chart that begins at that junction, with equal probability, but for
//
//   - its own twin: a U-turn, taken only where nothing else is left, with
//     probability 1, or everywhere with Options.UTurnWeight, if that is set;
//   - turns that a Ban forbids.
//
// If bans leave nothing and there is no twin, the bans of that chart do not
// count: a vehicle that is there leaves somehow. A chart from whose end no
// chart begins, nor its twin, is a trap: vehicles leave the map there.
func (b *builder) links() {
	d := b.d
	n := d.Charts()
	start, order := groupBy(d.From, int(b.junctions))
	banned := b.bannedTurns()
	d.LinkStart = make([]int32, 1, n+1)
	for c := range int32(n) {
		first := len(d.LinkTo)
		j := d.To[c]
		leaving := order[start[j]:start[j+1]]
		for _, to := range leaving {
			if to != d.Twin[c] && !banned.has(c, to) {
				d.LinkTo = append(d.LinkTo, to)
			}
		}
		if len(d.LinkTo) == first && d.Twin[c] < 0 {
			d.LinkTo = append(d.LinkTo, leaving...)
		}
		onward := len(d.LinkTo) - first
		u := b.opt.UTurnWeight
		switch {
		case d.Twin[c] < 0:
			u = 0
		case onward == 0:
			u = 1
		case d.Twin[c] >= 0 && banned.has(c, d.Twin[c]):
			u = 0
		}
		for range onward {
			d.LinkWeight = append(d.LinkWeight, (1-u)/float64(onward))
		}
		if u > 0 {
			d.LinkTo = append(d.LinkTo, d.Twin[c])
			d.LinkWeight = append(d.LinkWeight, u)
		}
		d.LinkStart = append(d.LinkStart, int32(len(d.LinkTo)))
	}
}

// groupBy lists the indices of keys, in order, by key: those with key k are
// order[start[k]:start[k+1]].
func groupBy(keys []int32, n int) (start, order []int32) {
	start = make([]int32, n+1)
	for _, k := range keys {
		start[k+1]++
	}
	for k := range n {
		start[k+1] += start[k]
	}
	next := slices.Clone(start[:n])
	order = make([]int32, len(keys))
	for i, k := range keys {
		order[next[k]] = int32(i)
		next[k]++
	}
	return start, order
}

// turnSet is a sorted set of (from chart, to chart).
type turnSet [][2]int32

func (s turnSet) has(from, to int32) bool {
	_, found := slices.BinarySearchFunc(s, [2]int32{from, to}, compareTurns)
	return found
}

func compareTurns(a, b [2]int32) int {
	if a[0] != b[0] {
		return int(a[0]) - int(b[0])
	}
	return int(a[1]) - int(b[1])
}

// bannedTurns translates bans of roads into bans of charts. A road that both
// begins and ends at the junction is banned in both directions.
func (b *builder) bannedTurns() turnSet {
	var s turnSet
	for _, ban := range b.graph.Bans {
		via := b.junction[ban.Via]
		for _, from := range [2]int32{b.forward[ban.From], b.backward[ban.From]} {
			for _, to := range [2]int32{b.forward[ban.To], b.backward[ban.To]} {
				if from >= 0 && to >= 0 && b.d.To[from] == via && b.d.From[to] == via {
					s = append(s, [2]int32{from, to})
				}
			}
		}
	}
	slices.SortFunc(s, compareTurns)
	return slices.Compact(s)
}

// reverseLinks derives the backward links: a vehicle that reverses over a
// chart's start enters the end of each chart that leads there, with
// probability proportional to that link's weight. That is the reversed chain
// if all those charts are equally likely to begin with.
func (m *Map) reverseLinks() {
	d := m.d
	n := d.Charts()
	m.forward = filter.Links{Start: d.LinkStart, To: d.LinkTo, Weight: d.LinkWeight}
	back := filter.Links{
		Start:  make([]int32, n+1),
		To:     make([]int32, len(d.LinkTo)),
		Weight: make([]float64, len(d.LinkTo)),
	}
	for _, to := range d.LinkTo {
		back.Start[to+1]++
	}
	for c := range n {
		back.Start[c+1] += back.Start[c]
	}
	next := slices.Clone(back.Start[:n])
	for c := range int32(n) {
		for i := d.LinkStart[c]; i < d.LinkStart[c+1]; i++ {
			at := &next[d.LinkTo[i]]
			back.To[*at], back.Weight[*at] = c, d.LinkWeight[i]
			*at++
		}
	}
	for c := range n {
		w := back.Weight[back.Start[c]:back.Start[c+1]]
		sum := 0.0
		for _, x := range w {
			sum += x
		}
		for i := range w {
			w[i] /= sum
		}
	}
	m.backward = back
}
