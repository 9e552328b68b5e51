package session

import (
	"cmp"
	"reflect"
	"slices"

	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// release keeps a posterior, makes those final that no event can change, and
// reports whether it is news: computed for the first time, or not as before.
func (s *Session) release(p *summary.Posterior) bool {
	if s.final > 0 && p.TimeNS <= s.recent[s.final-1].TimeNS {
		return false // on the way from a snapshot to what a late event changes
	}
	news := true
	for n := len(s.superseded); n > 0 && s.superseded[n-1].TimeNS <= p.TimeNS; n-- {
		old := s.superseded[n-1]
		s.superseded = s.superseded[:n-1]
		if old.TimeNS < p.TimeNS {
			s.withdrawn = append(s.withdrawn, sensor.Time(old.TimeNS)) // passed over now
			continue
		}
		p.Revises = old.Revises
		if news = !sameAnswer(old, p); news {
			p.Revises = true
		}
	}
	s.recent = append(s.recent, p)
	n := s.final
	for n < len(s.recent)-1 && !s.inWindow(sensor.Time(s.recent[n].TimeNS)) {
		n++
	}
	s.finish(n)
	return news
}

// Withdrawn returns the times, in order, of posteriors that were released and
// that the last Add or Flush took back without another one in their place: a
// late event made the belief so wide that these times are passed over. Who
// keeps what is released, puts those that revise in place of the earlier ones
// and drops those that are withdrawn has, after Flush, exactly the posteriors
// that the hash is over. Add gives no time back in the call that withdraws it;
// a later one may, as a new posterior.
func (s *Session) Withdrawn() []sensor.Time { return s.withdrawn }

// inWindow reports whether an event may change what was at a time.
func (s *Session) inWindow(t sensor.Time) bool {
	return s.reached.Seconds(t) <= s.suite.Vehicle.LateWindowS
}

// sameAnswer compares all that two posteriors say, but for how many events
// there were: a radius may differ in its last bit where mean and covariance do
// not.
func sameAnswer(a, b *summary.Posterior) bool {
	p, q := *a, *b
	p.Revises, p.Counts.Accepted, p.Counts.Refused = q.Revises, q.Counts.Accepted, q.Counts.Refused
	return reflect.DeepEqual(p, q) // no figure is NaN
}

// keptFinal is how many posteriors that are final are let go of at once: the last one says
// until when.
const keptFinal = 8

// finish makes the recent posteriors below n final.
func (s *Session) finish(n int) {
	for ; s.final < n; s.final++ {
		s.hasher.Add(s.recent[s.final])
		if s.finals != nil {
			s.finals(s.recent[s.final])
		}
	}
	if drop := s.final - 1; drop > keptFinal {
		s.recent = slices.Delete(s.recent, 0, drop)
		s.final -= drop
	}
}

// snapshot keeps the state now and then, so that there is always one from
// before the window, and a few within the events that may be held; and some from
// as long ago as the session may be asked of (Earlier).
func (s *Session) snapshot() {
	window := s.suite.Vehicle.LateWindowS
	now := s.state.time
	n := len(s.snaps)
	if n == 0 || now.Seconds(s.snaps[n-1].time) >= window/2 ||
		s.state.processed-s.snaps[n-1].processed >= uint64(s.maxWaiting/4) {
		s.snaps = append(s.snaps, snapshot{time: now, state: s.state.clone()})
	}
	for back := s.lookBackS(); len(s.snaps) > 1 && now.Seconds(s.snaps[1].time) > back; {
		i := 0
		if s.snaps[1].hollow {
			i = 1 // the first is still needed
		}
		s.snaps = slices.Delete(s.snaps, i, i+1)
	}
	s.thin()
	s.log.drop(s.snaps[0].time, false, s.keepPast)
}

// rewind restores the last snapshot before a time.
func (s *Session) rewind(from sensor.Time) {
	n := len(s.snaps)
	for s.snaps[n-1].hollow || !s.snaps[n-1].precedes(from) {
		n--
	}
	snap := &s.snaps[n-1]
	clear(s.snaps[n:]) // they hold beliefs
	s.snaps = s.snaps[:n]
	s.state = s.stateOf(snap)
	s.fresh = false
	for s.log.next > 0 && (!snap.begun || s.log.events[s.log.next-1].Time > snap.time) {
		s.log.next--
	}
	for i := len(s.recent); i > s.final && (!snap.begun || s.recent[i-1].TimeNS > int64(snap.time)); i-- {
		s.superseded = append(s.superseded, s.recent[i-1])
		s.recent = s.recent[:i-1]
	}
	// The oldest last, to be taken off as time goes on.
	slices.SortStableFunc(s.superseded, func(a, b *summary.Posterior) int { return cmp.Compare(b.TimeNS, a.TimeNS) })
}

// relieve makes room when as many events are held as may be: it gives up the
// oldest of those that a late event could be replayed among, and, if that is
// not enough, stops waiting for motion sensors. Nothing is lost; late events
// are then refused as too much, before the window ends.
func (s *Session) relieve() []*summary.Posterior {
	var out []*summary.Posterior
	for len(s.log.events) >= s.maxWaiting {
		later := 1
		for later < len(s.snaps) && s.snaps[later].hollow {
			later++
		}
		switch {
		case later < len(s.snaps):
			s.snaps = slices.Delete(s.snaps, 0, later)
		case len(s.log.events)-s.log.next > s.maxWaiting/2:
			s.pressed = true
			out = append(out, s.run(false)...)
			s.pressed = false
		default:
			s.snaps = append(s.snaps[:0], snapshot{time: s.state.time, state: s.state.clone()})
		}
		s.log.drop(s.snaps[0].time, true, s.keepPast)
	}
	return out
}
