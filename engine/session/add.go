package session

import (
	"fmt"
	"reflect"

	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// Reason says in a word why a measurement was refused.
type Reason string

// The reasons.
const (
	Unusable    Reason = "unusable"    // a value no filter could use, or an unknown beacon or post
	TooLate     Reason = "too late"    // older than the suite's window
	TooEarly    Reason = "too early"   // so far ahead that a clock must be wrong
	Conflicting Reason = "conflicting" // another measurement has its time, sensor and number
	WrongSpace  Reason = "wrong space" // a kind that this map cannot use
	Impossible  Reason = "impossible"  // has no likelihood anywhere in the belief
	Overfull    Reason = "too much"    // more than a bound allows
)

// Refusal is the error of a measurement that was not accepted. The session is
// as it was.
type Refusal struct {
	Reason Reason
	Detail string // what, where, and what to do
}

func (r *Refusal) Error() string { return string(r.Reason) + ": " + r.Detail }

// Bounds on what a session holds.
const (
	// maxJumpS is how far an event's time may be ahead of the latest one.
	maxJumpS = 24 * 3600
	// maxWaiting bounds the events that are held: those within the window
	// and those that wait for a motion sensor.
	maxWaiting = 1 << 17
)

// Add takes one event and returns the posteriors that it releases, oldest
// first; one that supersedes an earlier posterior of the same time says so
// (Revises). A duplicate (same time, sensor, number and values) is accepted
// and changes nothing. An error is a *Refusal.
//
// A time is computed when every motion sensor seen so far covers it, or when
// events hold_s later have come without it.
func (s *Session) Add(ev sensor.Event) ([]*summary.Posterior, error) {
	ps, err := s.add(ev)
	if err != nil {
		s.refused++
	} else {
		s.accepted++
	}
	return ps, err
}

func (s *Session) add(ev sensor.Event) ([]*summary.Posterior, error) {
	ev, err := s.suite.Prepare(ev)
	if err != nil {
		return nil, &Refusal{Unusable, err.Error()}
	}
	if err := sensor.Supports(ev.Measurement, s.dim, s.state.belief.Quantities); err != nil {
		return nil, &Refusal{WrongSpace, err.Error()}
	}
	if _, err := sensor.Likelihoods(ev, s.context(ev)); err != nil {
		return nil, &Refusal{Unusable, err.Error()}
	}
	if !s.state.begun {
		if len(s.log.events) > 0 && s.log.latest.Seconds(ev.Time) > maxJumpS {
			return nil, &Refusal{TooLate, fmt.Sprintf("it is %.0f s before the latest event: check the sensor's clock", s.log.latest.Seconds(ev.Time))}
		}
	}
	from, late := s.affects(ev)
	if late && !s.reaches(from) {
		return nil, &Refusal{TooLate, fmt.Sprintf("it changes what was %.3f s before the vehicle's time and the window is %g s: send sooner, or raise late_window_s (or hold_s, for a sensor of long increments) in the suite",
			s.state.time.Seconds(from), s.suite.Vehicle.LateWindowS)}
	}
	if n := len(s.log.events); n > 0 && ev.Time.Seconds(s.log.latest) > maxJumpS {
		return nil, &Refusal{TooEarly, fmt.Sprintf("it is %.0f s ahead of the latest event: check the sensor's clock, or open a new session", ev.Time.Seconds(s.log.latest))}
	}
	i, found := s.log.find(ev)
	if found {
		if reflect.DeepEqual(s.log.events[i].Measurement, ev.Measurement) {
			return nil, nil
		}
		return nil, &Refusal{Conflicting, fmt.Sprintf("sensor %q already sent another measurement with this time and the number %d: number them", ev.Sensor, ev.Number)}
	}
	if len(s.log.events) >= maxWaiting {
		return nil, &Refusal{Overfull, fmt.Sprintf("%d events are waiting or within the window: lower the rate or late_window_s", maxWaiting)}
	}
	s.log.insert(i, ev)
	if late {
		s.rewind(from)
	}
	return s.run(false), nil
}

// affects returns the time from which an event changes what was computed, and
// whether anything was.
func (s *Session) affects(ev sensor.Event) (sensor.Time, bool) {
	if !s.state.begun {
		return 0, false
	}
	from := ev.Time
	if since, ok := sensor.Since(ev.Measurement); ok {
		from = min(from, since+1) // a segment that ends at since is not touched
	}
	return from, from <= s.state.time
}

// reaches reports whether a time is within the window and there is a snapshot
// from before it.
func (s *Session) reaches(from sensor.Time) bool {
	return s.state.time.Seconds(from) <= s.suite.Vehicle.LateWindowS && len(s.snaps) > 0 && s.snaps[0].time < from
}

// Flush computes what is left, waiting for nobody, and makes every posterior
// final: at the end of a drive.
func (s *Session) Flush() []*summary.Posterior {
	out := s.run(true)
	s.finish(len(s.recent))
	return out
}
