package network

import (
	"cmp"
	"slices"
)

// components are the connected parts of a map.
type components struct {
	weak, strong   []int32 // of each chart, numbered by falling length
	weakM, strongM []float64
}

// Components returns, for each chart, the number of its weakly and of its
// strongly connected component, and the directed length of each in metres.
// Components are numbered by falling length; among equals the one with the
// lowest chart comes first. Two charts are weakly connected if links, taken
// either way, join them, strongly if one can drive from each to the other.
// The slices must not be changed.
func (m *Map) Components() (weak, strong []int32, weakM, strongM []float64) {
	p := m.parts()
	return p.weak, p.strong, p.weakM, p.strongM
}

// Core returns the charts of the largest strongly connected component, in
// ascending order, and their directed length in metres.
func (m *Map) Core() (charts []int32, lengthM float64) {
	p := m.parts()
	for c, k := range p.strong {
		if k == 0 {
			charts = append(charts, int32(c))
		}
	}
	return charts, p.strongM[0]
}

func (m *Map) findComponents() *components {
	weak, n := m.weakComponents()
	strong, k := m.strongComponents()
	p := &components{}
	p.weak, p.weakM = m.byLength(weak, n)
	p.strong, p.strongM = m.byLength(strong, k)
	return p
}

// byLength renumbers components by falling length.
func (m *Map) byLength(of []int32, n int) ([]int32, []float64) {
	lengths := make([]float64, n)
	first := make([]int32, n)
	for c := len(of) - 1; c >= 0; c-- {
		lengths[of[c]] += m.LengthM(int32(c))
		first[of[c]] = int32(c)
	}
	order := make([]int32, n)
	for i := range order {
		order[i] = int32(i)
	}
	slices.SortFunc(order, func(a, b int32) int {
		if c := cmp.Compare(lengths[b], lengths[a]); c != 0 {
			return c
		}
		return cmp.Compare(first[a], first[b])
	})
	number := make([]int32, n)
	sorted := make([]float64, n)
	for i, k := range order {
		number[k] = int32(i)
		sorted[i] = lengths[k]
	}
	renumbered := make([]int32, len(of))
	for c, k := range of {
		renumbered[c] = number[k]
	}
	return renumbered, sorted
}

// weakComponents joins charts by their links and by their twins.
func (m *Map) weakComponents() ([]int32, int) {
	n := m.Charts()
	parent := make([]int32, n)
	for i := range parent {
		parent[i] = int32(i)
	}
	find := func(i int32) int32 {
		for parent[i] != i {
			parent[i] = parent[parent[i]]
			i = parent[i]
		}
		return i
	}
	join := func(a, b int32) {
		if a, b = find(a), find(b); a != b {
			parent[max(a, b)] = min(a, b)
		}
	}
	for c := range int32(n) {
		if t := m.d.Twin[c]; t >= 0 {
			join(c, t)
		}
		to, _ := m.forward.Of(c)
		for _, t := range to {
			join(c, t)
		}
	}
	of, count := make([]int32, n), 0
	for c := range int32(n) {
		if r := find(c); r == c {
			of[c] = int32(count)
			count++
		} else {
			of[c] = of[r]
		}
	}
	return of, count
}

// strongComponents is Tarjan's algorithm ("Depth-first search and linear graph
// algorithms", SIAM J. Comput. 1, 1972) with a stack of its own in place of
// recursion, as long roads make deep graphs.
func (m *Map) strongComponents() ([]int32, int) {
	n := m.Charts()
	const unseen = -1
	index, low, of := make([]int32, n), make([]int32, n), make([]int32, n)
	for i := range index {
		index[i], of[i] = unseen, unseen
	}
	type frame struct{ chart, next int32 }
	var calls []frame
	var open []int32
	var seen, count int32
	enter := func(c int32) {
		index[c], low[c] = seen, seen
		seen++
		open = append(open, c)
		calls = append(calls, frame{c, m.forward.Start[c]})
	}
	for root := range int32(n) {
		if index[root] != unseen {
			continue
		}
		enter(root)
		for len(calls) > 0 {
			f := &calls[len(calls)-1]
			c := f.chart
			if f.next < m.forward.Start[c+1] {
				to := m.forward.To[f.next]
				f.next++
				if index[to] == unseen {
					enter(to)
				} else if of[to] == unseen {
					low[c] = min(low[c], index[to])
				}
				continue
			}
			calls = calls[:len(calls)-1]
			if len(calls) > 0 {
				up := calls[len(calls)-1].chart
				low[up] = min(low[up], low[c])
			}
			if low[c] == index[c] {
				for {
					t := open[len(open)-1]
					open = open[:len(open)-1]
					of[t] = count
					if t == c {
						break
					}
				}
				count++
			}
		}
	}
	return of, int(count)
}
