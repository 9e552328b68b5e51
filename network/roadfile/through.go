package roadfile

import "slices"

// joinThrough makes one road of two pieces that meet, and nothing else does,
// where they are alike in everything but the feature they came from. Features
// that turn restrictions name stay as they are.
func (p *pieces) joinThrough() {
	restricted := map[string]bool{}
	for _, b := range p.bans {
		restricted[b.from], restricted[b.to] = true, true
	}
	type end struct {
		piece int32
		last  bool
	}
	ends := make([][2]end, len(p.pos))
	degree := make([]uint8, len(p.pos))
	for i := range p.list {
		nodes := p.list[i].nodes
		for k, n := range [2]int32{nodes[0], nodes[len(nodes)-1]} {
			if degree[n] < 2 {
				ends[n][degree[n]] = end{int32(i), k == 1}
			}
			degree[n] = min(3, degree[n]+1)
		}
	}
	gone := make([]bool, len(p.list))
	// moved says which piece a piece has become part of.
	moved := make([]int32, len(p.list))
	for i := range moved {
		moved[i] = int32(i)
	}
	find := func(i int32) int32 {
		for moved[i] != i {
			moved[i] = moved[moved[i]]
			i = moved[i]
		}
		return i
	}
	for n := range ends {
		if degree[n] != 2 {
			continue
		}
		i, k := find(ends[n][0].piece), find(ends[n][1].piece)
		if i == k {
			continue // a ring
		}
		a, b := &p.list[i], &p.list[k]
		if a.attr != b.attr || a.feature != b.feature && (restricted[p.features[a.feature]] || restricted[p.features[b.feature]]) {
			continue
		}
		if (a.heightM == nil) != (b.heightM == nil) {
			continue
		}
		// Turn them so that a ends at n and b begins there. The longer one
		// keeps its direction and its memory, so that the work stays small.
		if len(b.nodes) > len(a.nodes) {
			a, b, i, k = b, a, k, i
		}
		aLast := a.nodes[len(a.nodes)-1] == int32(n)
		bFirst := b.nodes[0] == int32(n)
		if aLast != bFirst {
			b.reverse()
		}
		if a.dir != b.dir || a.nodes[0] == a.nodes[len(a.nodes)-1] || b.nodes[0] == b.nodes[len(b.nodes)-1] {
			continue
		}
		a.extend(b, aLast)
		gone[k] = true
		moved[k] = i
		p.notes.ThroughJoints++
	}
	kept := p.list[:0]
	for i, x := range p.list {
		if !gone[i] {
			kept = append(kept, x)
		}
	}
	p.list = kept
}

func (l *line) reverse() {
	l.nodes = slices.Clone(l.nodes) // pieces share their lines' memory
	slices.Reverse(l.nodes)
	if l.heightM != nil {
		l.heightM = slices.Clone(l.heightM)
		slices.Reverse(l.heightM)
	}
	l.dir = direction{l.dir.backward, l.dir.forward}
}

// extend adds b after l, or before it.
func (l *line) extend(b *line, after bool) {
	if after {
		l.nodes = append(l.nodes, b.nodes[1:]...)
		if l.heightM != nil {
			l.heightM = append(l.heightM, b.heightM[1:]...)
		}
		return
	}
	l.nodes = append(slices.Clone(b.nodes[:len(b.nodes)-1]), l.nodes...)
	if l.heightM != nil {
		l.heightM = append(slices.Clone(b.heightM[:len(b.heightM)-1]), l.heightM...)
	}
}
