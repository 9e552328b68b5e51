package forecast

import (
	"errors"
	"math"

	"leadline/engine/filter"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
)

// Alike says how alike other places are to the last stretch of a path.
type Alike struct {
	// FromM and ToM are the stretch, along the path.
	FromM float64 `json:"from_m"`
	ToM   float64 `json:"to_m"`
	// Ambiguity is the probability of being elsewhere: farther than the limit from
	// the true place at the stretch's end. It is that of the filter itself, the
	// mixture over all places and ways, which at the stretch's beginning knew the
	// place to SearchM an axis and is given what is expected to be measured.
	Ambiguity float64 `json:"ambiguity"`
	// LocatedM and LocatedS are after how much of the way and time it is first
	// located, and rightly so; null if not within four stretches or the path.
	LocatedM *float64 `json:"located_m"`
	LocatedS *float64 `json:"located_s"`
}

// locateStretches is how many stretches are tried to locate.
const locateStretches = 4

// alike looks at the stretch that begins at a place.
func (p *Plan) alike(fromM, stretchM, searchM, limitM float64, maxCells int) (Alike, error) {
	out := Alike{FromM: fromM, ToM: math.Min(fromM+stretchM, p.Path.lengthM)}
	w := p.worldFrom(p.Path.timeAt(fromM))
	began := w.t
	start := session.Start{Kind: session.AtPoint, Point: p.Path.lonLat(w.now), SigmaM: searchM}
	s, err := p.session(start, maxCells)
	if err != nil {
		return out, err
	}
	places := map[int64]place{}
	look := func(ps []*summary.Posterior) {
		for _, q := range ps {
			where, ok := places[q.TimeNS]
			if !ok || out.LocatedM != nil || q.Status != summary.Located || q.MeanFrame.Sub(where.at).Norm() > limitM {
				continue
			}
			m, t := where.wayM-fromM, float64(q.TimeNS-int64(at(began)))/1e9
			out.LocatedM, out.LocatedS = &m, &t
		}
	}
	until := math.Min(fromM+locateStretches*stretchM, p.Path.lengthM)
	judged := false
	for w.more() && w.now.wayM < until {
		n := len(w.events)
		if err := w.step(); err != nil {
			return out, err
		}
		places[int64(at(w.t))] = w.now
		for _, ev := range w.events[n:] {
			ps, err := s.Add(raw(p.Suite.Sensor(ev.Sensor, ev.Measurement.Kind()), ev))
			var refused *session.Refusal
			if err != nil && !errors.As(err, &refused) {
				return out, err
			}
			look(ps)
		}
		if t, _ := w.due(); !judged && p.Path.wayAt(t) > out.ToM {
			look(s.Flush())
			out.Ambiguity, judged = elsewhere(s, w.now, limitM), true
		}
		if judged && out.LocatedM != nil {
			return out, nil
		}
	}
	look(s.Flush())
	if !judged {
		out.Ambiguity = elsewhere(s, w.now, limitM)
	}
	return out, nil
}

// worldFrom is the expected world from a time on.
func (p *Plan) worldFrom(t float64) *world {
	w := p.world(nil)
	w.t, w.now = t, p.Path.place(p.Path.wayAt(t))
	w.face()
	for i, d := range p.sensors {
		w.next[i] = int(math.Ceil(t * d.hz))
		if sensor.IsMotion(d.Kind) && d.Kind != sensor.KindSpeed {
			w.next[i] = tickAfter(t, d.hz)
		}
		w.acc[i] = gathered{sinceS: t}
	}
	for w.fixes < len(w.fixesS) && w.fixesS[w.fixes] < t {
		w.fixes++
	}
	return w
}

// leastIncrementS is the least time that an increment is given: far more than what
// rounding makes of a time that falls on a tick, and far less than a tick.
const leastIncrementS = 1e-6

// tickAfter is the first tick at which a sensor speaks that gathers from a time on.
func tickAfter(t, hz float64) int {
	n := int(math.Floor(t*hz)) + 1
	if float64(n)/hz-t < leastIncrementS {
		n++
	}
	return n
}

// elsewhere is the part of a session's belief farther than the limit from a place.
func elsewhere(s *session.Session, here place, limitM float64) float64 {
	var c filter.Cloud
	s.ReadBelief(&c)
	sum := 0.0
	for i, m := range c.Mass {
		if math.Hypot(c.East[i]-here.at.E, c.North[i]-here.at.N) > limitM {
			sum += m
		}
	}
	return math.Min(sum, 1)
}
