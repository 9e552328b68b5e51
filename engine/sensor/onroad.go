package sensor

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// onRoad weighs positions by whether they are on one of a named road's lines.
// Positions on roads lie on a line exactly, up to rounding, so that another
// road is taken for the named one only where the two cross, within onRoadM.
type onRoad struct {
	segments []segment
	box      geo.Box
	in, out  float64
}

type segment struct{ a, b geo.Point }

const onRoadM = 0.05

var _ filter.Likelihood = (*onRoad)(nil)

func newOnRoad(roads Named, charts []int32, in, out float64) *onRoad {
	l := &onRoad{box: geo.EmptyBox(), in: in, out: out}
	for _, c := range charts {
		e, n := roads.Polyline(c)
		for i := range e {
			p := geo.Point{E: e[i], N: n[i]}
			l.box = l.box.Extend(p)
			if i > 0 {
				l.segments = append(l.segments, segment{geo.Point{E: e[i-1], N: n[i-1]}, p})
			}
		}
	}
	l.box.Min = l.box.Min.Sub(geo.Point{E: onRoadM, N: onRoadM})
	l.box.Max = l.box.Max.Add(geo.Point{E: onRoadM, N: onRoadM})
	return l
}

// Wants implements filter.Likelihood.
func (l *onRoad) Wants() filter.Wants { return filter.WantPosition }

// LogLikelihood implements filter.Likelihood. It takes positions × segments
// steps within the road's box: a sighting is rare.
func (l *onRoad) LogLikelihood(dst []float64, at *filter.Columns) {
	for i := range dst {
		if l.on(geo.Point{E: at.East[i], N: at.North[i]}) {
			dst[i] += l.in
		} else {
			dst[i] += l.out
		}
	}
}

func (l *onRoad) on(p geo.Point) bool {
	if !l.box.Contains(p) {
		return false
	}
	for _, s := range l.segments {
		if p.E < math.Min(s.a.E, s.b.E)-onRoadM || p.E > math.Max(s.a.E, s.b.E)+onRoadM ||
			p.N < math.Min(s.a.N, s.b.N)-onRoadM || p.N > math.Max(s.a.N, s.b.N)+onRoadM {
			continue
		}
		d, q := s.b.Sub(s.a), p.Sub(s.a)
		t := 0.0
		if l2 := float64(d.E*d.E) + float64(d.N*d.N); l2 > 0 {
			t = math.Max(0, math.Min(1, (float64(q.E*d.E)+float64(q.N*d.N))/l2))
		}
		if hypot(q.E-float64(t*d.E), q.N-float64(t*d.N)) <= onRoadM {
			return true
		}
	}
	return false
}
