package forecast

import (
	"container/heap"
	"errors"
	"fmt"
	"math"
	"slices"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// A route is matched to the roads by the most probable sequence of places, one
// for each spot of the route: a place is as likely as a normal error of its
// distance from the route and of its direction, the way between two places as
// likely as an exponential one of how much its length along the roads differs
// from that along the route.
//
// Source: Newson & Krumm, Hidden Markov map matching through noise and
// sparseness, ACM GIS 2009.
const (
	matchStepM    = 10.0 // between spots
	matchReachM   = 30.0 // a road must come this near
	matchSigmaM   = 4.0
	matchDetourM  = 3.0  // mean difference of the lengths
	matchMostM    = 80.0 // longer ways between two spots are not looked for
	mostNearby    = 12   // places of a spot
	matchAngleRad = 0.5
)

// spot is a place on the drawn route.
type spot struct {
	at      geo.Point
	heading float64
	wayM    float64 // along the drawn route, in the frame
	point   int     // of the route, or -1 between
}

// spots cuts a route.
func spots(points []geo.Point) []spot {
	var out []spot
	way := 0.0
	for i, q := range points {
		if i == 0 {
			out = append(out, spot{at: q, point: 0})
			continue
		}
		d := q.Sub(points[i-1])
		n := max(1, int(math.Ceil(d.Norm()/matchStepM)))
		for j := 1; j <= n; j++ {
			f := float64(j) / float64(n)
			s := spot{at: geo.Point{E: points[i-1].E + f*d.E, N: points[i-1].N + f*d.N}, wayM: way + f*d.Norm(), point: -1}
			if j == n {
				s.point = i
			}
			out = append(out, s)
		}
		way += d.Norm()
	}
	for i := range out { // the direction over a step each way
		a, b := out[max(i-1, 0)], out[min(i+1, len(out)-1)]
		out[i].heading = geo.Heading(b.at.Sub(a.at))
	}
	return out
}

// candidate is a place where a spot may be, with the best way there.
type candidate struct {
	chart  int32
	alongM float64
	cost   float64
	before int     // candidate of the spot before
	via    []int32 // the charts from that one on, this one's last; nil on one chart
	wayM   float64
}

// match finds the charts of a route.
func (p *Path) match(lines filter.Nearby, points []geo.Point) (wayM []float64, err error) {
	topology := lines.Lines(0)
	all := spots(points)
	layers := make([][]candidate, len(all))
	for i, s := range all {
		layers[i] = candidates(lines, s)
		if len(layers[i]) == 0 {
			lon, lat := lines.Frame().Inverse(s.at).Degrees()
			return nil, fmt.Errorf("%.0f m along it (lon %.5f, lat %.5f) no road lies within %.0f m: draw it along the map's roads", s.wayM, lon, lat, matchReachM)
		}
		if i == 0 {
			continue
		}
		way := s.wayM - all[i-1].wayM
		reached := false
		for j := range layers[i] {
			layers[i][j].before = -1
		}
		for b := range layers[i-1] {
			from := &layers[i-1][b]
			if math.IsInf(from.cost, 1) {
				continue
			}
			reach := reachable(topology, from.chart, from.alongM)
			for j := range layers[i] {
				to := &layers[i][j]
				via, m, ok := reach(to.chart, to.alongM)
				if !ok {
					continue
				}
				cost := from.cost + math.Abs(m-way)/matchDetourM
				if to.before < 0 || cost+to.wayM < to.cost { // wayM holds its own cost meanwhile
					to.before, to.via, to.cost = b, via, cost+to.wayM
					reached = true
				}
			}
		}
		for j := range layers[i] {
			if layers[i][j].before < 0 {
				layers[i][j].cost = math.Inf(1)
			}
		}
		if !reached {
			lon, lat := lines.Frame().Inverse(s.at).Degrees()
			return nil, fmt.Errorf("%.0f m along it (lon %.5f, lat %.5f) no road leads on: is it drawn against a one-way road, or over a gap of the map?", s.wayM, lon, lat)
		}
	}
	return p.trace(topology, all, layers)
}

// candidates are the places near a spot, with the cost of being there.
func candidates(lines filter.Nearby, s spot) []candidate {
	near := lines.NearLines(nil, s.at, matchReachM)
	near = near[:min(len(near), mostNearby)]
	out := make([]candidate, len(near))
	at := filter.Columns{Wants: filter.WantPosition | filter.WantHeading}
	for i, n := range near {
		lines.Sample(&at, []int32{n.Chart}, []float64{n.AlongM}, 1)
		turn := 1 - math.Cos(at.Heading[0]-s.heading)
		cost := n.DistM*n.DistM/(2*matchSigmaM*matchSigmaM) + turn/(matchAngleRad*matchAngleRad)
		out[i] = candidate{chart: n.Chart, alongM: n.AlongM, cost: cost, wayM: cost, before: -1}
	}
	return out
}

// trace follows the best way back and makes the legs.
func (p *Path) trace(topology *filter.Lines, all []spot, layers [][]candidate) (wayM []float64, err error) {
	last := len(layers) - 1
	best := -1
	for j, c := range layers[last] {
		if !math.IsInf(c.cost, 1) && (best < 0 || c.cost < layers[last][best].cost) {
			best = j
		}
	}
	if best < 0 {
		return nil, errors.New("it leads nowhere on the map")
	}
	chain := make([]candidate, len(layers))
	for i := last; i >= 0; i-- {
		chain[i] = layers[i][best]
		best = chain[i].before
	}
	p.legs = []leg{{chart: chain[0].chart, from: chain[0].alongM, to: chain[0].alongM}}
	for i, c := range chain {
		if i > 0 {
			for _, next := range c.via {
				l := &p.legs[len(p.legs)-1]
				l.to = topology.LengthM[l.chart]
				p.legs = append(p.legs, leg{chart: next, beforeM: l.beforeM + l.to - l.from})
			}
		}
		l := &p.legs[len(p.legs)-1]
		l.to = math.Max(l.to, c.alongM)
		p.lengthM = l.beforeM + l.to - l.from
		if all[i].point >= 0 {
			wayM = append(wayM, p.lengthM)
		}
	}
	p.legs = slices.DeleteFunc(p.legs, func(l leg) bool { return !(l.to > l.from) })
	if len(p.legs) == 0 {
		return nil, errors.New("it has no length on the map")
	}
	return wayM, nil
}

// reachable returns what leads from a place to another one within matchMostM,
// and how long that is. A few metres back on one chart count as standing: a
// drawn route wavers.
func reachable(topology *filter.Lines, chart int32, alongM float64) func(to int32, at float64) (via []int32, m float64, ok bool) {
	begin := topology.LengthM[chart] - alongM
	type entry struct {
		m    float64
		from int32 // entered from, -1: from the first chart
	}
	found := map[int32]entry{} // the way to the start of a chart
	q := &queue{}
	push := func(c int32, m float64, from int32) {
		if e, ok := found[c]; m > matchMostM || ok && e.m <= m {
			return
		}
		found[c] = entry{m, from}
		heap.Push(q, queued{c, m})
	}
	next, _ := topology.Forward.Of(chart)
	for _, c := range next {
		push(c, begin, -1)
	}
	for q.Len() > 0 {
		e := heap.Pop(q).(queued)
		if e.m > found[e.chart].m {
			continue
		}
		next, _ := topology.Forward.Of(e.chart)
		for _, c := range next {
			push(c, e.m+topology.LengthM[e.chart], e.chart)
		}
	}
	return func(to int32, at float64) ([]int32, float64, bool) {
		if to == chart && at >= alongM-5 {
			return nil, math.Max(at-alongM, 0), true
		}
		e, ok := found[to]
		if !ok {
			return nil, 0, false
		}
		via := []int32{to}
		for c := e; c.from >= 0 && len(via) <= len(found); c = found[c.from] {
			via = append(via, c.from)
		}
		slices.Reverse(via)
		return via, e.m + at, true
	}
}

type queued struct {
	chart int32
	m     float64
}

// queue is a heap by distance, then chart.
type queue []queued

func (q queue) Len() int { return len(q) }
func (q queue) Less(i, j int) bool {
	return q[i].m < q[j].m || q[i].m == q[j].m && q[i].chart < q[j].chart
}
func (q queue) Swap(i, j int) { q[i], q[j] = q[j], q[i] }
func (q *queue) Push(x any)   { *q = append(*q, x.(queued)) }
func (q *queue) Pop() any {
	old := *q
	x := old[len(old)-1]
	*q = old[:len(old)-1]
	return x
}
