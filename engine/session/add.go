package session

import (
	"fmt"
	"math"
	"reflect"
	"slices"

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
	Conflicting Reason = "conflicting" // another measurement has its time, sensor and number, or covers its time
	WrongSpace  Reason = "wrong space" // a kind that this map cannot use
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
	// maxVoices bounds what is told apart by sensor, kind and post.
	maxVoices = 1024
)

// Add takes one event and returns the posteriors that it releases, oldest
// first; one that supersedes an earlier posterior of the same time says so
// (Revises). Those that it takes back are in Withdrawn. A duplicate (same time, sensor, number and values) is accepted
// and changes nothing. An error is a *Refusal.
//
// A time is computed when every motion sensor seen so far covers it, or when
// events hold_s later have come without it; and again when an event comes that
// changes it. Releases that were not changed are not repeated.
func (s *Session) Add(ev sensor.Event) ([]*summary.Posterior, error) {
	s.withdrawn = nil
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
	s.poseFor(ev)
	if _, err := sensor.Likelihoods(ev, s.context(ev)); err != nil {
		return nil, &Refusal{Unusable, err.Error()}
	}
	if err := s.plausible(ev); err != nil {
		return nil, err
	}
	if s.log.heard {
		ahead := ev.Time.Seconds(s.log.latest)
		if ahead > maxJumpS {
			return nil, &Refusal{TooEarly, fmt.Sprintf("it is %.0f s ahead of the latest event: check the sensor's clock, or open a new session", ahead)}
		}
		if !s.state.begun && -ahead > maxJumpS {
			return nil, &Refusal{TooLate, fmt.Sprintf("it is %.0f s before the latest event: check the sensor's clock", -ahead)}
		}
	}
	if s.isAhead(ev) {
		events, err := s.lead(ev)
		if err != nil {
			return nil, err
		}
		return s.take(events, ev)
	}
	if err := s.precede(ev); err != nil {
		return nil, err
	}
	_, again := s.log.find(ev)
	out, err := s.enter(ev)
	if err == nil && !again {
		s.goOn(ev.Sensor)
	}
	return out, err
}

// take adds events and returns what they release. The error is that of the event
// ev; others among them that are refused were accepted before.
func (s *Session) take(events []sensor.Event, ev sensor.Event) (out []*summary.Posterior, err error) {
	slices.SortStableFunc(events, sensor.Event.Compare)
	for _, e := range events {
		ps, refusal := s.enter(e)
		out = append(out, ps...)
		switch {
		case refusal == nil:
		case e.Compare(ev) == 0:
			err = refusal
		default:
			s.retract(1)
		}
	}
	return out, err
}

// enter puts an event into the log and computes what is due.
func (s *Session) enter(ev sensor.Event) ([]*summary.Posterior, error) {
	i, found := s.log.find(ev)
	if found {
		if reflect.DeepEqual(s.log.events[i].Measurement, ev.Measurement) {
			return nil, nil
		}
		return nil, &Refusal{Conflicting, fmt.Sprintf("sensor %q already sent another measurement with this time and the number %d: number them", ev.Sensor, ev.Number)}
	}
	from, err := s.affects(ev)
	if err != nil {
		return nil, err
	}
	if s.flushed && ev.Time > s.flushedAt {
		from = max(from, s.flushedAt+1)
	}
	if s.begunOnce && from <= s.reached {
		if err := s.reaches(from); err != nil {
			return nil, err
		}
	}
	if len(s.log.voices) >= maxVoices && !s.log.knows(voiceOf(ev)) {
		return nil, &Refusal{Overfull, fmt.Sprintf("sensor %q would be the session's %dth, and %d are allowed: give a sensor the same name in all its events", ev.Sensor, maxVoices+1, maxVoices)}
	}
	s.log.insert(i, ev, s.suite)
	if s.begunOnce && from <= s.state.time {
		s.rewind(from)
	}
	out := s.run(false)
	return append(out, s.relieve()...), nil
}

// TooFast is how many times max_speed_mps no vehicle goes, and tooFarM how far
// none goes in one increment: known places are at most so far from the middle of
// a map.
const (
	TooFast = 10
	tooFarM = 1.5e6
)

// plausible refuses a motion that no vehicle makes: on roads, following it would
// lead through every way of a map many times over; on a plane, it would leave
// every map.
func (s *Session) plausible(ev sensor.Event) error {
	since, _ := sensor.Since(ev.Measurement)
	span := ev.Time.Seconds(since)
	var d, sigma float64
	switch m := ev.Measurement.(type) {
	case sensor.Travel:
		d, sigma = math.Abs(m.DistanceM), m.SigmaM
	case sensor.BodyDisplacement:
		d, sigma = math.Max(math.Abs(m.ForwardM), math.Abs(m.RightM)), math.Max(m.SigmaForwardM, m.SigmaRightM)
	case sensor.Displacement:
		d, sigma = math.Max(math.Abs(m.EastM), math.Abs(m.NorthM)), math.Sqrt(m.CovM2[0]+m.CovM2[2])
	case sensor.Speed:
		d, sigma, span = math.Abs(m.MPS), m.SigmaMPS, 1
	default:
		return nil
	}
	// 100 m more, for increments of a few milliseconds.
	if most := TooFast*s.suite.Vehicle.MaxSpeedMPS*span + 100; d > most || sigma > most {
		return &Refusal{Unusable, fmt.Sprintf("sensor %q: %s: %.0f m with a sigma of %.0f m in %.3f s is beyond %d times the suite's max_speed_mps, %g: check its unit and that nothing that counts up is taken for increments, leave out what tells nothing, or raise max_speed_mps",
			ev.Sensor, ev.Measurement.Kind(), d, sigma, span, TooFast, s.suite.Vehicle.MaxSpeedMPS)}
	}
	if d > tooFarM || sigma > tooFarM {
		return &Refusal{Unusable, fmt.Sprintf("sensor %q: %s: %.0f m with a sigma of %.0f m is beyond %.0f km, farther than any map reaches: check its unit, or leave out what tells nothing",
			ev.Sensor, ev.Measurement.Kind(), d, sigma, tooFarM/1000)}
	}
	return nil
}

// affects returns the time from which on an event changes the belief. An
// increment that overlaps another one of its sensor would be counted twice:
// that is an error.
func (s *Session) affects(ev sensor.Event) (sensor.Time, error) {
	if !sensor.IsMotion(ev.Measurement.Kind()) {
		return ev.Time, nil
	}
	name := sourceName(ev, s.suite)
	var src source
	if i, found := s.log.findSource(name); found {
		src = s.log.sources[i]
	}
	named := ev
	named.Sensor = name
	i, _ := slices.BinarySearchFunc(src.events, named, sensor.Event.Compare)
	before, hasBefore := src.before(i)
	since := s.since(ev, before, hasBefore)
	if _, ok := sensor.Since(ev.Measurement); ok {
		for _, o := range src.events[max(i-1, 0):min(i+1, len(src.events))] {
			if other, ok := sensor.Since(o.Measurement); ok && overlap(since, ev.Time, other, o.Time) {
				return 0, &Refusal{Conflicting, fmt.Sprintf("sensor %q already covers %.3f s of this increment by another one: let each begin where the one before ended, and name two sensors differently",
					ev.Sensor, min(ev.Time, o.Time).Seconds(max(since, other)))}
			}
		}
	}
	return min(ev.Time, since+1), nil // a segment that ends at since is not touched
}

// overlap reports whether two increments cover the same time: more than a
// hundredth of the shorter one, which is what rounded times may do.
func overlap(since1, at1, since2, at2 sensor.Time) bool {
	both := min(at1, at2) - max(since1, since2)
	return both > min(at1-since1, at2-since2)/100
}

// reaches is nil if the session can go back to before a time, otherwise why
// it cannot.
func (s *Session) reaches(from sensor.Time) error {
	switch {
	case s.flushed && from <= s.flushedAt:
		return &Refusal{TooLate, "the drive was ended at a later time, and what was then is final: open a new session"}
	case !s.inWindow(from):
		return &Refusal{TooLate, fmt.Sprintf("it changes what was %.3f s before the vehicle's time and the window is %g s: send sooner, or raise late_window_s (or hold_s, for a sensor of long increments) in the suite",
			s.reached.Seconds(from), s.suite.Vehicle.LateWindowS)}
	case !s.snaps[0].precedes(from):
		return &Refusal{Overfull, fmt.Sprintf("it changes what was %.3f s before the vehicle's time; it is within the window, but no more than %d events are held to go back among: lower the rate, late_window_s or hold_s",
			s.reached.Seconds(from), s.maxWaiting)}
	}
	return nil
}

// Flush computes what is left, waiting for nobody, and makes every posterior
// final: at the end of a drive. The last time is never passed over. Events
// after it go on from there, counting for their part after it; events before
// it are refused.
func (s *Session) Flush() []*summary.Posterior {
	s.withdrawn = nil
	out, _ := s.take(s.letAllGo(), sensor.Event{})
	out = append(out, s.run(true)...)
	if s.state.unread {
		if p := s.summarise(); s.release(p) {
			out = append(out, p)
		}
	}
	for i := len(s.superseded) - 1; i >= 0; i-- {
		s.withdrawn = append(s.withdrawn, sensor.Time(s.superseded[i].TimeNS))
	}
	s.superseded = nil
	s.finish(len(s.recent))
	if s.state.begun {
		s.flushed, s.flushedAt = true, s.state.time
		clear(s.snaps)
		s.snaps = append(s.snaps[:0], snapshot{time: s.state.time, state: s.state.clone()})
		s.log.drop(s.state.time, false, s.keepPast)
	}
	return out
}
