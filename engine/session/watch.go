package session

import (
	"leadline/engine/filter"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// Change is one thing that happened to the belief: it moved, or it was
// weighed.
type Change struct {
	// From and Time are the stretch of time of a move; a weighing has its Time
	// alone.
	From, Time sensor.Time
	// Event is what weighed the belief and Likelihood what it said: one of
	// sensor.Likelihoods or, of the sensor "road", the comparison with the road, of
	// the kind standstill what a gyro said of its bias while the vehicle stood. A move
	// has neither.
	Event      sensor.Event
	Likelihood any
	// LogEvidence is -Inf where the event is impossible everywhere in the
	// belief, which it then left alone.
	LogEvidence float64
	// Fell is where it fell in what was expected, if the monitor looked at it.
	Fell filter.Predictive
	// Cells is how many cells or Gaussians carry mass after it: about what it
	// cost.
	Cells int
}

// Rewinds reports whether the session went back before a change, last being the
// time of the change before it, and until when what was seen still holds. It
// goes back to a time and moves on from there; or to before its first time,
// where it weighs without having moved.
func (c Change) Rewinds(last sensor.Time) (until sensor.Time, yes bool) {
	if c.Likelihood == nil {
		return c.From, c.From < last
	}
	return c.Time - 1, c.Time < last
}

// Watch has f called after each move and each weighing of the belief, as they
// happen: for studies. f may read the belief (ReadBelief, Size) and must do
// nothing else with the session. What a late event has computed again is seen
// again.
func (s *Session) Watch(f func(Change)) { s.watch = f }

// Finals has f called with each posterior once no event can change it any more,
// in the order of their times: those that the hash is over, for who keeps or
// writes a run of any length. f may keep a posterior and must not change it.
func (s *Session) Finals(f func(*summary.Posterior)) { s.finals = f }

// Settled has f called with the events that nothing goes back among any more, as the
// session takes them, in order: what is left at the end of a drive is in Held. f
// must not keep the slice.
func (s *Session) Settled(f func([]sensor.Event)) { s.settled = f }

// Held are the events that the session holds, in order; they must not be changed.
func (s *Session) Held() []sensor.Event { return s.log.events }

// Summarize makes the posterior of the present belief, for who watches it, and
// changes nothing else.
func (s *Session) Summarize(sum *summary.Summarizer, dst *summary.Posterior) error {
	return s.read(sum, dst)
}

func (s *Session) watched(c Change) {
	if s.watch != nil {
		c.Cells = s.Size()
		s.watch(c)
	}
}
