package server

import (
	"slices"
	"time"

	"leadline/engine/sensor"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Bounds of what waits for one follower.
const (
	// ahead is how many posteriors of a vehicle may wait; then all but the
	// latest are skipped.
	ahead = 64
	// remembered is how many times of told posteriors are kept, to know which
	// withdrawals concern a follower, and how many withdrawn ones may wait.
	remembered = 4096
)

// follower is a Follow call, or one whose stream broke and may be resumed. The
// hub's lock guards it; what stands above the gap does not change.
type follower struct {
	hub         *hub
	id          streamID
	request     *leadlinev1.FollowRequest // without its token
	vehicles    map[string]bool           // nil is all
	interval    time.Duration
	changesOnly bool
	asking      want
	wake        chan struct{} // of one: there may be something to tell

	reader  chan struct{} // of the stream that reads, closed when another takes over; nil without one
	leftAt  time.Time     // when the last stream left
	err     error         // why it cannot go on
	slots   map[string]*slot
	ready   []*slot   // with something to tell, in turn
	nextDue time.Time // when an interval is over that something waits for; zero if none is
	count   uint64    // updates told
	sent    []sentUpdate
	cut     uint64 // number of the last update that is no longer in sent
}

// slot returns the slot for a drive; nil if there is no room.
func (f *follower) slot(sub *subject) *slot {
	s := f.slots[sub.vehicle]
	if s == nil {
		if len(f.slots) >= 2*f.hub.limits.Vehicles {
			f.fail(errTooSlow)
			return nil
		}
		s = &slot{of: sub}
		f.slots[sub.vehicle] = s
	}
	if s.of != sub {
		// Of the drive before no posterior is told any more.
		old := &slot{of: s.of, withdrawn: s.withdrawn, end: s.end, told: s.told}
		*s = slot{of: sub, past: s.past, listed: s.listed, skipped: s.skipped + uint64(len(s.queue)) + s.stale}
		if old.tellable() {
			s.past = old
		}
	}
	return s
}

// offer brings a posterior. One that is not the latest may revise an earlier
// one, which is nothing for those who leave some out; and its belief is not
// there any more, for the owner to add.
func (f *follower) offer(n *bulletin, now time.Time, latest bool) {
	s := f.slot(n.of)
	if s == nil {
		return
	}
	t := n.p.TimeNS
	if n.p.Revises {
		s.revise(n.p)
	}
	advances := latest || t > s.newest
	s.newest = max(s.newest, t)
	asking, changed := f.asking.anything(), s.status == 0 || n.p.Status != s.status
	switch {
	case asking && !latest:
	case f.leavesOut() && !advances:
	case f.changesOnly && !changed && f.asking.area == nil:
	case f.every() > 0 && !changed && now.Before(s.due):
		f.pass(s)
		s.held = n
		f.wakeAt(s.due)
	case asking && (len(s.queue) > 0 || f.reader == nil):
		s.stale++
	case asking:
		if s.asked && !f.leavesOutByWish() {
			s.skipped++ // the one that it was asked for
		}
		s.asked = true
	default:
		f.push(s, n, now)
	}
}

// leavesOut reports whether the follower wants less than everything.
func (f *follower) leavesOut() bool { return f.every() > 0 || f.changesOnly }

// every is the least time between two posteriors of a vehicle: as the follower
// wants, or longer while the server has too much to do.
func (f *follower) every() time.Duration {
	if f.hub.thins() {
		return max(f.interval, thinnedTo)
	}
	return f.interval
}

// pass counts what is held and will not be told, if the follower wanted it.
func (f *follower) pass(s *slot) {
	if s.held != nil && !f.leavesOutByWish() {
		s.skipped++
	}
}

// leavesOutByWish reports whether it is the follower that wants less.
func (f *follower) leavesOutByWish() bool { return f.interval > 0 || f.changesOnly }

// push queues a posterior.
func (f *follower) push(s *slot, n *bulletin, now time.Time) {
	most := ahead
	if f.every() > 0 {
		most = 1
	}
	if s.held != n {
		f.pass(s)
	}
	if len(s.queue) >= most {
		s.skipped += uint64(len(s.queue))
		clear(s.queue)
		s.queue = s.queue[:0]
	}
	s.queue = append(s.queue, n)
	s.held, s.status, s.due = nil, n.p.Status, now.Add(f.every())
	f.list(s)
}

// asks reports whether the owner is to add something.
func (f *follower) asks(sub *subject) bool {
	s := f.slots[sub.vehicle]
	return s != nil && s.of == sub && s.asked && f.reader != nil && f.err == nil
}

// wants is what the owner is to add. Of a vehicle that was outside and still is
// nothing is told.
func (f *follower) wants(sub *subject) want {
	w := f.asking
	w.onlyInside = !f.slots[sub.vehicle].inside
	return w
}

// deliver brings a posterior to which the owner has added what was asked.
func (f *follower) deliver(n *bulletin, now time.Time) {
	s := f.slots[n.of.vehicle]
	if s == nil || s.of != n.of || !s.asked {
		return
	}
	if s.has(n.p.TimeNS) { // what came after it has been withdrawn
		f.dismiss(n.of)
		return
	}
	s.asked, s.held = false, nil
	changed := s.status == 0 || n.p.Status != s.status
	tell, in := true, false
	if f.asking.area != nil {
		in = n.extra.inside >= f.asking.area.least
		tell = in || s.inside
		changed = changed || !in
	}
	if tell && (changed || !f.changesOnly) {
		f.push(s, n, now)
		s.inside = in
		if f.asking.area != nil && !in {
			s.status = 0 // it is news when it comes back
		}
	}
	if n.of.end != nil && !s.toldEnd && (f.asking.area == nil || s.inside) {
		s.end = true
	}
	if s.tellable() {
		f.list(s)
	}
}

// dismiss answers a follower that asks with nothing.
func (f *follower) dismiss(sub *subject) {
	s := f.slots[sub.vehicle]
	s.asked, s.held = false, nil
	if s.tellable() {
		f.list(s)
	}
}

// ask has the owner add to its latest posterior.
func (f *follower) ask(s *slot) {
	if s.of.gone {
		return // there is nobody to ask
	}
	s.asked = true
	select {
	case s.of.poke <- struct{}{}:
	default: // it has been asked
	}
}

// withdraw takes a posterior back.
func (f *follower) withdraw(sub *subject, at sensor.Time) {
	t := int64(at)
	s := f.slots[sub.vehicle]
	if s == nil || s.of != sub {
		return
	}
	is := func(n *bulletin) bool { return n.p.TimeNS == t }
	if n := len(s.queue); n > 0 {
		if s.queue = slices.DeleteFunc(s.queue, is); len(s.queue) < n {
			s.asWaiting()
			if len(s.queue) == 0 && s.stale > 0 {
				s.skipped += s.stale - 1
				s.stale, s.asked = 0, true
			}
		}
	}
	if s.untell(t) || t <= s.forgotten {
		if len(s.withdrawn) == remembered {
			f.fail(errTooSlow)
			return
		}
		s.withdrawn = append(s.withdrawn, at)
		f.list(s)
	}
	if s.held != nil && is(s.held) {
		if s.held = sub.latest; s.held != nil && (s.has(s.held.p.TimeNS) || s.waits(s.held.p)) {
			s.held = nil
		}
	}
}

// fallBack offers the latest posterior although it was released before, since
// later ones have been withdrawn; unless it was told.
func (f *follower) fallBack(sub *subject, now time.Time) {
	s := f.slots[sub.vehicle]
	if s == nil || s.of != sub || s.held != nil || s.asked || s.stale > 0 || s.has(sub.latest.p.TimeNS) || s.waits(sub.latest.p) {
		return
	}
	if s.skipped > 0 && !f.leavesOut() {
		s.skipped-- // it was one of them
	}
	f.offer(sub.latest, now, true)
}

// hurry ends the wait for an interval, before a drive ends.
func (f *follower) hurry(sub *subject) {
	if s := f.slots[sub.vehicle]; s != nil && s.of == sub && s.held != nil {
		f.release(s, f.hub.now())
	}
}

// release lets go what was held.
func (f *follower) release(s *slot, now time.Time) {
	if f.asking.anything() {
		s.held = nil
		f.ask(s)
		return
	}
	f.push(s, s.held, now)
}

// over brings a drive's end. Who follows an area hears of those inside alone.
func (f *follower) over(sub *subject) {
	s := f.slots[sub.vehicle]
	if f.asking.area != nil && (s == nil || s.of != sub || !s.inside) {
		return
	}
	if s = f.slot(sub); s == nil {
		return
	}
	if s.held != nil && !f.asking.anything() {
		f.push(s, s.held, f.hub.now())
	}
	if !sub.end.GetEnded() {
		s.asked = false // there is nobody to ask
	}
	s.end = true
	f.list(s)
}

// tidy removes the slot of a vehicle that is gone, once all is told.
func (f *follower) tidy(vehicle string) {
	s := f.slots[vehicle]
	if s == nil || !s.of.gone {
		return
	}
	s.asked, s.held = false, nil
	if !s.tellable() {
		delete(f.slots, vehicle)
	} else if !s.listed {
		f.list(s)
	}
}

// list puts a slot in line.
func (f *follower) list(s *slot) {
	if !s.listed {
		s.listed = true
		f.ready = append(f.ready, s)
	}
	f.signal()
}

func (f *follower) signal() {
	select {
	case f.wake <- struct{}{}:
	default:
	}
}

func (f *follower) wakeAt(due time.Time) {
	if f.nextDue.IsZero() || due.Before(f.nextDue) {
		f.nextDue = due
		f.signal()
	}
}

// fail gives a follower up.
func (f *follower) fail(err error) {
	if f.err != nil {
		return
	}
	f.err = err
	if f.reader == nil {
		f.hub.drop(f)
	}
	f.signal()
}
