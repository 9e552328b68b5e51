package server

import (
	"slices"
	"time"

	"leadline/engine/sensor"
	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// slot is what a follower has of one vehicle.
type slot struct {
	of *subject

	// What is to be told, in this order: of the drive before, if that is not
	// over; times of posteriors that hold no more; posteriors; the drive's end.
	past      *slot
	withdrawn []sensor.Time
	queue     []*bulletin
	end       bool

	newest  int64     // time of the latest one that was offered
	held    *bulletin // waits until the interval is over
	asked   bool      // the owner is to call present
	stale   uint64    // posteriors that came after the one that waits, where the owner adds to them
	renewed bool      // the one that waits was asked for in place of a stale one
	skipped uint64
	listed  bool // in ready

	// As of what waits, or else what was told: the status, 0 if whatever comes
	// is a change; whether the vehicle is in the area; when the interval is over.
	status summary.Status
	inside bool
	due    time.Time
	// As of what was told.
	toldStatus summary.Status
	toldInside bool
	toldEnd    bool
	told       []int64 // times that may still be withdrawn, ascending
	forgotten  int64   // the latest one that told had no room for
	// outdated are those of told, or waiting, that have been revised, with the
	// latest revision; nil where only the time is known.
	outdated map[int64]*summary.Posterior
}

// erase lets go of the posteriors of a drive.
func (s *slot) erase(sub *subject) {
	if s.past != nil {
		s.past.erase(sub)
	}
	if s.of == sub {
		s.queue, s.held, s.stale, s.outdated = nil, nil, 0, nil
	}
}

// has reports whether the posterior of a time has been told as it is now.
func (s *slot) has(t int64) bool {
	_, told := slices.BinarySearch(s.told, t)
	_, outdated := s.outdated[t]
	return told && !outdated
}

// waits reports whether a posterior waits to be told.
func (s *slot) waits(p *summary.Posterior) bool {
	return slices.ContainsFunc(s.queue, func(n *bulletin) bool { return n.p == p })
}

// revise notes a revision of what has been told or waits.
func (s *slot) revise(p *summary.Posterior) {
	_, told := slices.BinarySearch(s.told, p.TimeNS)
	if told || slices.ContainsFunc(s.queue, func(n *bulletin) bool { return n.p.TimeNS == p.TimeNS }) {
		if s.outdated == nil {
			s.outdated = map[int64]*summary.Posterior{}
		}
		s.outdated[p.TimeNS] = p
	}
}

// untell takes a time out of those told, and reports whether it was there.
func (s *slot) untell(t int64) bool {
	delete(s.outdated, t)
	i, told := slices.BinarySearch(s.told, t)
	if told {
		s.told = slices.Delete(s.told, i, i+1)
	}
	return told
}

// update is what is told at once.
type update struct {
	of        *subject
	posterior *bulletin
	withdrawn []sensor.Time
	farewell  *leadlinev1.Farewell
	skipped   uint64
	number    uint64
}

// asWaiting sets status and inside to those of the last posterior that waits,
// or else of the last one told.
func (s *slot) asWaiting() {
	s.status, s.inside = s.toldStatus, s.toldInside
	if k := len(s.queue); k > 0 {
		s.status = s.queue[k-1].p.Status
	}
}

// tellable reports whether something is to be told.
func (s *slot) tellable() bool {
	return s.past != nil && s.past.tellable() || len(s.withdrawn) > 0 || len(s.queue) > 0 || s.end && !s.asked
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

// outdate notes that what was told of a time is not what holds.
func (s *slot) outdate(t int64) {
	if s.outdated == nil {
		s.outdated = map[int64]*summary.Posterior{}
	}
	if _, known := s.outdated[t]; !known {
		s.outdated[t] = nil
	}
}
