package summary

import (
	"math"

	"leadline/engine/geo"
)

// mostProbable finds the cell of the greatest density: mass over width on
// roads, where cells differ a little in width, and mass on a lattice. The
// Gaussians of one cell count together; the first of equals wins.
func (s *Summarizer) mostProbable(dst *Posterior, in *Input) {
	b, c := in.Belief, in.Cloud
	best, at, mass := -1.0, 0, 0.0
	to := 1
	for i := 0; i < s.cells; {
		j := i + 1
		if len(b.Key) > 0 {
			for j < s.cells && b.Key[j] == b.Key[i] {
				j++
			}
		}
		m := 0.0
		for _, v := range s.mass[i:j] {
			m += v
		}
		density := m
		if s.dim == 1 {
			density /= in.Lines.WidthM[c.Chart[i]]
		}
		if density > best {
			best, at, to, mass = density, i, j, m
		}
		i = j
	}
	// Its place is the mean of what it holds.
	var p geo.Point
	along := 0.0
	for e := at; e < to; e++ {
		w := 1.0
		if mass > 0 {
			w = s.mass[e] / mass
		}
		p.E += float64(w * (s.east[e] - s.east[at]))
		p.N += float64(w * (s.north[e] - s.north[at]))
		if s.dim == 1 {
			along += float64(w * (c.AlongM[e] - c.AlongM[at]))
		}
	}
	p = p.Add(geo.Point{E: s.east[at], N: s.north[at]})
	cell := Cell{Place: p, Position: s.frame.Inverse(p), Mass: mass}
	switch {
	case s.dim == 1:
		cell.Index = [2]int32{int32(b.Key[at] >> 32), int32(uint32(b.Key[at]))}
		cell.AlongM = c.AlongM[at] + along
		if in.Names != nil {
			cell.Name = in.Names.Name(c.Chart[at])
		}
	default:
		l := b.Lattice
		cell.Index = [2]int32{
			int32(math.Floor((p.E-l.Origin.E)/l.SpacingM + 0.5)),
			int32(math.Floor((p.N-l.Origin.N)/l.SpacingM + 0.5)),
		}
	}
	dst.MostProbable = cell
}

// listEdges sums the directed edges and lists the most probable ones.
func (s *Summarizer) listEdges(dst *Posterior, in *Input) {
	dst.Edges = dst.Edges[:0]
	dst.EdgeCount, dst.EdgeRest = 0, 0
	if s.dim != 1 {
		return
	}
	chart := in.Cloud.Chart
	for i := 0; i < len(chart); {
		j, m := i, 0.0
		for ; j < len(chart) && chart[j] == chart[i]; j++ {
			m += s.mass[j]
		}
		if m > 0 {
			dst.EdgeCount++
			var out float64
			dst.Edges, out = insert(dst.Edges, Edge{Chart: chart[i], Probability: m}, s.opt.MaxEdges)
			dst.EdgeRest += out
		}
		i = j
	}
	s.nameEdges(dst.Edges, in.Names)
}

// nameEdges looks the names of edges up.
func (s *Summarizer) nameEdges(edges []Edge, names Names) {
	for i := range edges {
		edges[i].Twin = -1
		if names != nil {
			edges[i].Name, edges[i].Twin = names.Name(edges[i].Chart), names.Twin(edges[i].Chart)
		}
	}
}

// insert puts an edge into a list by falling probability (the first of equals
// first) that holds at most n, and returns the probability that fell out.
func insert(list []Edge, e Edge, n int) ([]Edge, float64) {
	out := 0.0
	if len(list) < n {
		list = append(list, e)
	} else {
		if list[n-1].Probability >= e.Probability {
			return list, e.Probability
		}
		out = list[n-1].Probability
		list[n-1] = e
	}
	for i := len(list) - 1; i > 0 && list[i-1].Probability < list[i].Probability; i-- {
		list[i-1], list[i] = list[i], list[i-1]
	}
	return list, out
}
