package roadfile

import (
	"cmp"
	"slices"
)

// applyCuts puts the cuts into the lines and replaces joined nodes.
func (s *stitcher) applyCuts() {
	slices.SortStableFunc(s.cuts, func(a, b cut) int {
		if c := cmp.Compare(a.line, b.line); c != 0 {
			return c
		}
		if c := cmp.Compare(a.segment, b.segment); c != 0 {
			return c
		}
		return cmp.Compare(a.at, b.at)
	})
	next := 0
	for i := range s.lines {
		l := &s.lines[i]
		first := next
		for next < len(s.cuts) && int(s.cuts[next].line) == i {
			next++
		}
		l.insert(s.cuts[first:next])
		kept, heights := l.nodes[:0], l.heightM[:0]
		for k, n := range l.nodes {
			n = s.find(n)
			if k > 0 && n == kept[len(kept)-1] {
				continue
			}
			kept = append(kept, n)
			if l.heightM != nil {
				heights = append(heights, l.heightM[k])
			}
		}
		l.nodes = kept
		if l.heightM != nil {
			l.heightM = heights
		}
	}
}

// insert puts nodes into the line, with heights interpolated.
func (l *line) insert(cuts []cut) {
	if len(cuts) == 0 {
		return
	}
	nodes := make([]int32, 0, len(l.nodes)+len(cuts))
	var heights []float64
	for k, n := range l.nodes {
		nodes = append(nodes, n)
		if l.heightM != nil {
			heights = append(heights, l.heightM[k])
		}
		for len(cuts) > 0 && int(cuts[0].segment) == k {
			nodes = append(nodes, cuts[0].node)
			if l.heightM != nil {
				heights = append(heights, l.heightM[k]+float64(cuts[0].at*(l.heightM[k+1]-l.heightM[k])))
			}
			cuts = cuts[1:]
		}
	}
	l.nodes = nodes
	if l.heightM != nil {
		l.heightM = heights
	}
}
