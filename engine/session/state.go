package session

import (
	"fmt"
	"slices"

	"leadline/engine/filter"
	"leadline/engine/monitor"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// state is everything that a snapshot holds.
type state struct {
	begun       bool
	time        sensor.Time
	belief      *filter.Belief
	logEvidence float64
	pose        sensor.Pose
	// gapAgeS is for how long nothing has measured the motion, velocity what
	// it was before.
	gapAgeS     float64
	hasVelocity bool
	velocity    [2]float64
	bend        sensor.Bend
	pace        pace
	speed       summary.Speed // now: of pace, or what a sensor of speed said
	odometerM   float64       // distance measured since the start
	// Since the last posterior: evidence (at most maxEvidence), gaps, when
	// that was, and whether there has been a step.
	evidence    []summary.Evidence
	gapS        float64
	posteriorAt sensor.Time
	unread      bool
	// posedAt is when the pose was taken: with a posterior, or where one was passed
	// over because nobody wanted it (Config.PosteriorS).
	posedAt sensor.Time
	// poseDue says that the pose is still to be taken, of the present belief.
	poseDue bool
	// previous holds the last processed event of each voice, in order.
	previous  []lastEvent
	processed uint64 // events
	// stood is what the gyro has said since the vehicle stands and has not been weighed.
	stood   sensor.Stood
	monitor *monitor.Monitor
	aside   aside
}

type lastEvent struct {
	voice
	time      sensor.Time
	odometerM float64
}

func (st *state) clone() state {
	c := *st
	c.belief = st.belief.Clone()
	c.aside.loose = st.aside.loose.Clone()
	c.previous = slices.Clone(st.previous)
	c.evidence = slices.Clone(st.evidence)
	c.pace.stretches = slices.Clone(st.pace.stretches)
	c.monitor = st.monitor.Clone()
	return c
}

func (st *state) find(v voice) (int, bool) {
	return slices.BinarySearchFunc(st.previous, v, func(l lastEvent, v voice) int { return l.compare(v) })
}

func (st *state) remember(ev sensor.Event) {
	v := voiceOf(ev)
	i, found := st.find(v)
	if !found {
		st.previous = slices.Insert(st.previous, i, lastEvent{voice: v})
	}
	st.previous[i].time, st.previous[i].odometerM = ev.Time, st.odometerM
}

// maxEvidence bounds the single evidences that a posterior lists; the running
// sum has them all.
const maxEvidence = 64

// record keeps one evidence. Several of one event count as one.
func (st *state) record(e summary.Evidence) {
	n := len(st.evidence)
	if n > 0 {
		if l := &st.evidence[n-1]; l.Sensor == e.Sensor && l.Number == e.Number && l.Kind == e.Kind {
			l.LogEvidence += e.LogEvidence
			return
		}
	}
	if n == maxEvidence {
		st.evidence = slices.Delete(st.evidence, 0, 1)
	}
	st.evidence = append(st.evidence, e)
}

// snapshot is the state before the events that follow time. The first one is
// that of a session that has not begun.
type snapshot struct {
	time sensor.Time
	state
	// hollow is that of the state only the number of processed events is there: a
	// checkpoint leaves out what can be computed again from an earlier one. It
	// keeps the later ones at the times that they would have had.
	hollow bool
}

// unbegun is the snapshot from before the session has begun.
func (s *Session) unbegun(at sensor.Time) snapshot {
	if s.seed == nil {
		return snapshot{time: at, state: s.state.clone()}
	}
	st := s.state
	st.belief = new(filter.Belief)
	n := snapshot{time: at, state: st.clone()}
	n.belief = nil
	return n
}

// seeded says that the belief of a snapshot is the one with which the session began.
func (s *snapshot) seeded() bool { return s.belief == nil && !s.hollow }

// stateOf copies the state of a snapshot that is not hollow.
func (s *Session) stateOf(n *snapshot) state {
	if !n.seeded() {
		return n.clone()
	}
	b, err := s.seed()
	if err != nil {
		panic(fmt.Sprintf("session: %v", err)) // it has been made before
	}
	st := n.state
	st.belief = new(filter.Belief)
	st = st.clone()
	st.belief = b
	return st
}

// precedes reports whether what happens from a time on can be computed again
// from the snapshot.
func (s *snapshot) precedes(from sensor.Time) bool { return !s.begun || s.time < from }
