package session

import (
	"errors"

	"leadline/engine/filter"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// Behind is what a session knows of a time some while ago, given all that was
// measured since: smoothing with a fixed lag. It runs beside the session, over the
// same events, and costs nothing where nobody makes one.
//
// Add and At are called by one goroutine.
type Behind struct {
	l   *looker
	lag sensor.Time
	// from is where the filter stands: not after any time that will be asked for.
	from cut
	last sensor.Time
}

// NewBehind starts one for a session of a configuration, with a lag in seconds.
// tapeBytes is as in HindsightOptions.
//
// Of memory it takes the events of the lag, and about tapeBytes; of time At takes the
// filter's own over the lag three to six times (docs/smoothing.md), and Add none.
func NewBehind(c Config, lagS float64, tapeBytes int) (*Behind, error) {
	if !(lagS > 0 && lagS <= 3600) {
		return nil, errors.New("a fixed lag is more than 0 and at most 3600 seconds")
	}
	l, err := newLooker(c, HindsightOptions{TapeBytes: tapeBytes})
	if err != nil {
		return nil, err
	}
	return &Behind{l: l, lag: sensor.Time(lagS * 1e9)}, nil
}

// Add takes events as the session has taken them (Settled, Held), in their order. An
// increment that is longer than the lag is counted from where the filter stands.
func (b *Behind) Add(events []sensor.Event) {
	s := b.l.s
	for _, ev := range events {
		s.log.insert(len(s.log.events), ev, s.suite)
		b.last = max(b.last, ev.Time)
	}
}

// At is what is known of the latest time that is at least the lag before the last
// event, given all events; nil if there is none yet, or none since At was asked last.
// It is, to the bit, what LookBack over the same events says of that time.
func (b *Behind) At() (*summary.Posterior, error) {
	s := b.l.s
	if len(s.log.events) == 0 {
		return nil, nil
	}
	if !b.from.state.begun {
		s.begin()
		b.from = b.l.first()
	}
	m, known, here, err := b.l.at(b.from, b.last-b.lag)
	if m == nil || err != nil {
		return nil, err
	}
	held := len(s.log.events)
	s.log.drop(here.state.time, false, s.keepPast)
	here.next -= held - len(s.log.events)
	b.from = here
	return b.l.read(m, known), nil
}

// at is what is known of the latest time that is not after another one, given all
// events up to the horizon: as a mark of that time, the belief, and where the drive is
// cut there. The mark is nil if there is none between from and then.
func (l *looker) at(from cut, until sensor.Time) (*mark, *filter.Belief, cut, error) {
	s := l.s
	s.state, s.log.next, s.fresh = from.state.clone(), from.next, false
	s.desk().work.Record(nil, nil)
	var p *summary.Posterior
	moved := false
	for ; ; moved = true {
		t, end, ok := s.next(true)
		if !ok || t > until {
			break
		}
		p = s.step(t, end)
	}
	if !moved {
		return nil, nil, from, nil
	}
	here := l.first()
	if p == nil { // this time is passed over otherwise: what follows must not know that it was not
		p = s.summarise()
	}
	l.marks = nil
	l.mark(p)
	m := l.marks[0]
	if here.next == s.horizon() {
		return &m, here.state.belief, here, nil
	}
	k, err := l.stretch(here, s.horizon(), nil, false)
	if err != nil {
		return nil, nil, from, err
	}
	return &m, k.smoothed, here, nil
}
