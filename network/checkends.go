package network

import (
	"math"
	"slices"
)

// checkEnds finds dead ends, and those of them that nearly touch another road.
func (m *Map) checkEnds(r *Report) {
	d := m.d
	junctions := int(max(slices.Max(d.From), slices.Max(d.To))) + 1
	var ends []int32 // of roads, both of each: chart<<1, +1 for the end
	var at []int32
	for c := range int32(m.Charts()) {
		if m.first(c) {
			at = append(at, d.From[c], d.To[c])
			ends = append(ends, c<<1, c<<1|1)
		}
	}
	start, order := groupBy(at, junctions)
	for j := range int32(junctions) {
		here := order[start[j]:start[j+1]]
		if len(here) != 1 {
			continue
		}
		r.DeadEnds++
		c := ends[here[0]] >> 1
		p, q := m.Ends(c)
		if ends[here[0]]&1 == 1 {
			p = q
		}
		places := m.Near(p, NearMissM)
		var own map[int32]bool
		for _, x := range places {
			if own == nil {
				own = m.reach(j, 3*NearMissM, start, order, ends)
			}
			if own[x.Chart] || !m.first(x.Chart) || d.Layer[x.Chart] != d.Layer[c] ||
				(d.Flags[x.Chart]^d.Flags[c])&(FlagTunnel|FlagBridge) != 0 {
				continue
			}
			s := m.spot(c, p, x.DistM)
			s.Other = m.Feature(x.Chart)
			r.NearMisses.add(s)
			break
		}
	}
}

// reach returns the charts of the roads that can be reached from a junction
// within a distance, in either direction.
func (m *Map) reach(junction int32, withinM float64, start, order, ends []int32) map[int32]bool {
	charts := map[int32]bool{}
	dist := map[int32]float64{junction: 0}
	for queue := []int32{junction}; len(queue) > 0; queue = queue[1:] {
		j := queue[0]
		for _, e := range order[start[j]:start[j+1]] {
			c := ends[e] >> 1
			charts[c] = true
			if t := m.d.Twin[c]; t >= 0 {
				charts[t] = true
			}
			far := m.d.To[c]
			if far == j {
				far = m.d.From[c]
			}
			along := dist[j] + m.LengthM(c)
			if old, seen := dist[far]; along <= withinM && (!seen || along < old) {
				dist[far] = along
				queue = append(queue, far)
			}
		}
	}
	return charts
}

// checkDuplicates finds roads between the same junctions with the same points.
func (m *Map) checkDuplicates(r *Report) {
	d := m.d
	type key struct {
		a, b   int32
		n      int32
		length float64 // rounded: a reversed sum differs by roundings
	}
	seen := map[key][]int32{}
	for c := range int32(m.Charts()) {
		if !m.first(c) {
			continue
		}
		k := key{min(d.From[c], d.To[c]), max(d.From[c], d.To[c]), d.VertexStart[c+1] - d.VertexStart[c], math.Round(m.LengthM(c) * 1000)}
		for _, o := range seen[k] {
			if m.samePoints(c, o) {
				p, _ := m.Ends(c)
				s := m.spot(c, p, m.LengthM(c))
				s.Other = m.Feature(o)
				r.Duplicates.add(s)
				break
			}
		}
		seen[k] = append(seen[k], c)
	}
}

// samePoints compares polylines with equally many vertices, either way round.
func (m *Map) samePoints(a, b int32) bool {
	ae, an := m.Polyline(a)
	be, bn := m.Polyline(b)
	same, reversed := true, true
	for i := range ae {
		k := len(be) - 1 - i
		same = same && ae[i] == be[i] && an[i] == bn[i]
		reversed = reversed && ae[i] == be[k] && an[i] == bn[k]
	}
	return same || reversed
}
