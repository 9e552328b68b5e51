package session

import (
	"fmt"

	"leadline/engine/exact"
	"leadline/engine/filter"
	"leadline/engine/sensor"
)

// Events are those of a drive, in order, as a session took them.
type Events interface {
	Len() int
	// Read returns some events from a number on, at least one. They are not kept.
	Read(from int) ([]sensor.Event, error)
}

// List is events in memory.
type List []sensor.Event

// Len is how many there are.
func (l List) Len() int { return len(l) }

// Read returns all from a number on.
func (l List) Read(from int) ([]sensor.Event, error) { return l[from:], nil }

// PackEvents and UnpackEvents turn events into bytes and back, every bit as it was.
func PackEvents(events []sensor.Event) []byte {
	c := exact.Writer()
	exact.Kinds(c, measurements)
	c.Value(&events)
	return c.Bytes()
}

// UnpackEvents reads what PackEvents wrote.
func UnpackEvents(b []byte) (events []sensor.Event, err error) {
	c := exact.Reader(b)
	exact.Kinds(c, measurements)
	c.Value(&events)
	return events, c.Done()
}

// What looking back has in the log of events that are still to come: all that can
// bear on the present time. An event bears on a time at most late_window_s before what
// the session has reached, which waits for it hold_s, and steps gather maxStrideS;
// leastAhead is for what comes seldom.
const leastAhead = 4096

// end is the number after the last event.
func (l *looker) end() int {
	if l.all == nil {
		return l.s.horizon()
	}
	return l.all.Len()
}

// fill reads events ahead.
func (l *looker) fill() error {
	if l.all == nil {
		return nil
	}
	s := l.s
	v := &s.suite.Vehicle
	for aheadS := v.LateWindowS + v.HoldS + 2*maxStrideS; ; {
		n := len(s.log.events)
		if l.base+n == l.all.Len() || n-s.log.next >= l.least && s.log.events[n-1].Time.Seconds(s.state.time) > aheadS {
			return nil
		}
		read, err := l.all.Read(l.base + n)
		if err != nil {
			return fmt.Errorf("looking back: reading event %d again: %w", l.base+n, err)
		}
		for _, ev := range read[:min(len(read), l.least)] {
			s.log.insert(len(s.log.events), ev, s.suite)
		}
	}
}

// forget drops events that are behind.
func (l *looker) forget() {
	if l.all == nil {
		return
	}
	held := len(l.s.log.events)
	l.s.log.drop(l.s.state.time, false, l.s.keepPast)
	l.base += held - len(l.s.log.events)
}

// cut is one here.
func (l *looker) cut() cut {
	c := cut{state: l.s.state.clone(), next: l.base + l.s.log.next}
	if l.all == nil {
		return c
	}
	for _, src := range l.s.log.sources {
		n := src.after(c.state.time)
		if n == 0 {
			continue
		}
		last := src.events[n-1]
		c.heard = append(c.heard, source{name: src.name, until: last.Time, events: []sensor.Event{last}})
	}
	return c
}

// reread has the log begin at a cut: with what came before as far as the filter looks
// at it.
func (l *looker) reread(c cut) error {
	s := l.s
	if l.all == nil {
		s.log.next = c.next
		return nil
	}
	clear(s.log.events)
	s.log.events, s.log.next, l.base = s.log.events[:0], 0, c.next
	s.log.sources = nil
	for _, src := range c.heard {
		s.log.sources = append(s.log.sources, source{name: src.name, until: src.until, events: []sensor.Event{src.events[0]}})
	}
	s.past = past{}
	if s.rates.lost != 0 || s.rates.moved != 0 { // for searches
		for at := max(0, c.next-maxSearched-maxSearched/4); at < c.next; {
			read, err := l.all.Read(at)
			if err != nil {
				return fmt.Errorf("looking back: reading event %d again: %w", at, err)
			}
			read = read[:min(len(read), c.next-at)]
			s.past.add(read)
			at += len(read)
		}
	}
	return l.fill()
}

// beliefBytes is about what a belief takes: of each Gaussian the mass, and mean and covariance of
// its quantities.
func beliefBytes(b *filter.Belief) int {
	q := len(b.Quantities)
	return 8 * b.Cells() * (2 + q*(q+3)/2)
}
