package session

import (
	"errors"

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
	s, l := b.l.s, b.l
	if len(s.log.events) == 0 {
		return nil, nil
	}
	if !b.from.state.begun {
		s.begin()
		b.from = l.first()
	}
	s.state, s.log.next, s.fresh = b.from.state.clone(), b.from.next, false
	s.desk().work.Record(nil, nil)
	until := b.last - b.lag
	var p *summary.Posterior
	for moved := false; ; moved = true {
		t, end, ok := s.next(true)
		if !ok || t > until {
			if !moved {
				return nil, nil
			}
			break
		}
		if p = s.step(t, end); p == nil {
			p = s.summarise() // a time that is passed over otherwise
		}
	}
	l.marks = nil
	l.mark(p)
	m := l.marks[0]
	s.log.drop(s.state.time, false, s.keepPast)
	b.from = l.first()
	if s.log.next == len(s.log.events) {
		return l.read(&m, s.state.belief.Clone()), nil
	}
	k, err := l.stretch(b.from, len(s.log.events), nil, false)
	if err != nil {
		return nil, err
	}
	return l.read(&m, k.smoothed), nil
}
