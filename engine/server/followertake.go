package server

import (
	"time"

	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// sentMost is how many updates are remembered of those that were sent and may
// not have arrived: what a connection holds on its way.
const sentMost = 2048

// sentUpdate is what it takes to tell an update again that did not arrive.
type sentUpdate struct {
	number    uint64
	of        *subject
	slot      *slot // which may have been removed since
	time      int64 // of a posterior
	posterior bool
	first     bool // its time had not been told before
	withdrawn []sensor.Time
	farewell  bool
	skipped   uint64
	// As it was told before.
	status summary.Status
	inside bool
}

// take returns the next thing to tell, or nil and, unless zero, when to look
// again without being woken.
func (f *follower) take(now time.Time) (*update, time.Time) {
	if !f.nextDue.IsZero() && !now.Before(f.nextDue) {
		f.nextDue = time.Time{}
		for _, s := range f.slots {
			switch {
			case s.held == nil:
			case now.Before(s.due):
				f.wakeAt(s.due)
			default:
				f.release(s, now)
			}
		}
	}
	for len(f.ready) > 0 {
		s := f.ready[0]
		f.ready[0] = nil
		f.ready = f.ready[1:]
		s.listed = false
		u := f.next(s, now)
		if s.tellable() {
			f.list(s)
		}
		if u != nil {
			f.tidy(s.of.vehicle)
			return u, time.Time{}
		}
	}
	return nil, f.nextDue
}

// next takes what a slot has to tell; nil if that is nothing.
func (f *follower) next(s *slot, now time.Time) *update {
	if s.past != nil {
		if u := f.next(s.past, now); u != nil {
			return u
		}
		s.past = nil
	}
	u := &update{of: s.of}
	e := sentUpdate{slot: s, status: s.toldStatus, inside: s.toldInside}
	switch {
	case len(s.withdrawn) > 0:
		u.withdrawn, e.withdrawn = s.withdrawn, s.withdrawn
		s.withdrawn = nil
	case len(s.queue) > 0:
		if u.posterior = f.nextPosterior(s, now); u.posterior == nil {
			return nil
		}
		e.posterior, e.time = true, u.posterior.p.TimeNS
		e.first = s.remember(u.posterior.p)
	case s.end && !s.asked:
		u.farewell, e.farewell = s.of.end, true
		s.end, s.toldEnd = false, true
	default:
		return nil
	}
	u.skipped, s.skipped = s.skipped, 0
	f.count++
	u.number = f.count
	e.number, e.of, e.skipped = u.number, u.of, u.skipped
	if len(f.sent) >= sentMost {
		f.cut = f.sent[0].number
		f.sent = f.sent[1:]
	}
	f.sent = append(f.sent, e)
	return u
}

// nextPosterior takes the next posterior of a slot, unless it is none to tell
// any more.
func (f *follower) nextPosterior(s *slot, now time.Time) *bulletin {
	n := s.queue[0]
	if s.stale > 0 && !s.renewed {
		// It is old. The latest needs what the owner adds.
		s.skipped += s.stale
		s.queue, s.stale, s.renewed = nil, 0, true
		s.asWaiting()
		f.ask(s)
		return nil
	}
	s.queue[0] = nil
	s.queue = s.queue[1:]
	if f.changesOnly && f.asking.area == nil && n.p.Status == s.toldStatus {
		return nil // those between were skipped
	}
	s.toldStatus, s.toldInside = n.p.Status, false
	if a := f.asking.area; a != nil {
		if s.toldInside = n.extra.inside >= a.least; !s.toldInside {
			s.toldStatus = 0
		}
	}
	s.due = now.Add(f.every())
	if s.renewed = false; s.stale > 0 {
		s.skipped += s.stale - 1
		s.stale = 0
		f.ask(s)
	}
	return n
}
