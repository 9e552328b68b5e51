package server

import (
	"slices"
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
	s.due = now.Add(f.interval)
	if s.renewed = false; s.stale > 0 {
		s.skipped += s.stale - 1
		s.stale = 0
		f.ask(s)
	}
	return n
}

// remember notes that a posterior is told, which may be withdrawn, and reports
// whether its time is new.
func (s *slot) remember(p *summary.Posterior) bool {
	t := p.TimeNS
	if latest, ok := s.outdated[t]; ok && (latest == nil || latest == p) {
		delete(s.outdated, t)
	}
	i, there := slices.BinarySearch(s.told, t)
	if there {
		return false
	}
	s.told = slices.Insert(s.told, i, t)
	// One from before the window may become the latest again.
	for last := s.told[len(s.told)-1]; len(s.told) > 1 && s.told[1] < last-s.of.lateNS; {
		s.forget()
	}
	if len(s.told) > remembered {
		s.forgotten = s.told[0]
		s.forget()
	}
	return true
}

// forget drops the first of the times told.
func (s *slot) forget() {
	delete(s.outdated, s.told[0])
	s.told = s.told[1:]
}

// rollBack makes all updates after a number untold, and reports whether that
// many are remembered.
func (f *follower) rollBack(number uint64, now time.Time) bool {
	if number > f.count || number < f.cut {
		return false
	}
	lost := map[*slot]int64{} // the last posterior of each that was lost
	for len(f.sent) > 0 && f.sent[len(f.sent)-1].number > number {
		e := f.sent[len(f.sent)-1]
		f.sent = f.sent[:len(f.sent)-1]
		s := f.slots[e.of.vehicle]
		if s == nil {
			if s = e.slot; s.of != e.of {
				s = &slot{of: e.of}
			}
			f.slots[e.of.vehicle] = s
		}
		s.skipped += e.skipped
		if e.posterior {
			s.skipped++
		}
		if s.of != e.of { // an earlier drive's
			if s.past == nil {
				s.past = &slot{of: e.of}
			}
			if s = s.past; s.of != e.of {
				continue
			}
		}
		switch {
		case e.farewell:
			s.end, s.toldEnd = true, false
		case e.posterior:
			s.toldStatus, s.toldInside = e.status, e.inside
			if e.first {
				s.untell(e.time)
			} else {
				s.outdate(e.time)
			}
			if _, ok := lost[s]; !ok {
				lost[s] = e.time
			}
		default:
			s.withdrawn = append(slices.Clip(e.withdrawn), s.withdrawn...)
		}
	}
	for _, s := range f.slots {
		if t, ok := lost[s]; ok {
			f.retell(s, t, now)
			// That it left the area was lost, and then the drive has ended.
			if s.toldInside && s.of.end != nil && !s.toldEnd {
				s.end = true
			}
		}
		if s.stale > 0 && len(s.queue) == 0 {
			s.skipped += s.stale - 1
			s.stale = 0
			f.ask(s)
		}
		if s.asked {
			f.ask(s)
		}
		if s.tellable() {
			f.list(s)
		}
	}
	return true
}

// outdate notes that what was told of a time is not what holds.
func (s *slot) outdate(t int64) {
	if s.outdated == nil {
		s.outdated = map[int64]*summary.Posterior{}
	}
	if _, known := s.outdated[t]; !known {
		s.outdated[t] = nil
	}
}

// retell offers the latest posterior of a drive in place of those that were
// lost, the last of them at a time.
func (f *follower) retell(s *slot, last int64, now time.Time) {
	n := s.of.latest
	s.asWaiting()
	s.due = time.Time{}
	if n == nil || s.has(n.p.TimeNS) || s.waits(n.p) || s.stale > 0 || f.asking.anything() && s.of.gone {
		return
	}
	if n.p.TimeNS == last {
		s.skipped--
	}
	f.offer(n, now, true)
	if s.asked {
		f.ask(s)
	}
}
