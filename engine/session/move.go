package session

import (
	"fmt"
	"math"
	"slices"

	"leadline/engine/filter"
	"leadline/engine/sensor"
)

// roadSensor names the comparison of the vehicle's heading with the road's in
// a posterior's evidence.
const roadSensor = "road"

// move predicts the belief to a time. The stretch is cut where something that
// measures the motion begins or ends, so that neither a gap nor what several
// sensors say together depends on how other measurements cut it. Only a stride
// that is measured all the way stays whole.
func (s *Session) move(to sensor.Time) {
	s.followed = 0
	from := s.state.time
	if stride := s.log.events[s.log.next].Time < to; stride {
		s.gather(from, to)
		if s.motion.GapS() == 0 {
			s.predict()
			return
		}
	}
	s.cuts = append(s.cutsWithin(s.cuts[:0], from, to), to)
	for _, cut := range s.cuts {
		s.gather(from, cut)
		s.predict()
		from = cut
	}
}

// cutsWithin appends the times within (from, to), in order, at which something
// that measures the motion begins or ends.
func (s *Session) cutsWithin(dst []sensor.Time, from, to sensor.Time) []sensor.Time {
	add := func(t sensor.Time) {
		if t > from && t < to {
			dst = append(dst, t)
		}
	}
	s.spans(from, to, func(ev sensor.Event, begin sensor.Time) {
		add(begin)
		add(ev.Time)
	})
	slices.Sort(dst)
	return slices.Compact(dst)
}

// spans calls use for what measures motion within (from, to], with the time
// from which on it does.
func (s *Session) spans(from, to sensor.Time, use func(ev sensor.Event, begin sensor.Time)) {
	for i := range s.log.sources {
		src := &s.log.sources[i]
		for j := src.after(from); j < len(src.events); j++ {
			before, ok := src.before(j)
			begin := s.since(src.events[j], before, ok)
			if begin >= to {
				break // those of one sensor do not overlap
			}
			use(src.events[j], begin)
		}
	}
}

// since returns the time from which on an event of a motion speaks. An
// increment says so; a speed speaks since the same sensor's event before, at
// most hold_s, which is how long a time waits for it (the first one for
// nothing); a standstill likewise, at most standstillS or half of the late
// window. For everything else it is the event's own time.
func (s *Session) since(ev sensor.Event, before sensor.Time, hasBefore bool) sensor.Time {
	begin := ev.Time
	switch m := ev.Measurement.(type) {
	case sensor.Speed:
		if !hasBefore {
			return begin
		}
		begin -= s.hold
	case sensor.Standstill:
		begin -= s.still
	default:
		if since, ok := sensor.Since(m); ok {
			return since
		}
		return begin
	}
	if hasBefore {
		begin = max(begin, before)
	}
	return begin
}

// endOfFrameM is how far from the middle of its map a vehicle on a plane goes:
// the frame means something up to there, some 3000 km, and what has gone so far
// stays there.
const endOfFrameM = 3e6

// standstillS is for how long a standstill speaks (see sensor.Standstill).
const standstillS = 1.0

// gather collects the motion of a stretch of time.
func (s *Session) gather(from, to sensor.Time) {
	m, st := &s.motion, &s.state
	m.Reset(from, to)
	m.GapAgeS, m.HasVelocity, m.VelocityMPS, m.Bend = st.gapAgeS, st.hasVelocity, st.velocity, st.bend
	s.spans(from, to, m.Add)
}

// predict moves the belief by the motion that was gathered. A displacement over
// ground that reaches far on roads is taken in parts of time, since the road's
// direction decides how much of it is along the road.
func (s *Session) predict() {
	from, to := s.motion.From, s.motion.To
	step := s.motionStep()
	n := sensor.Time(1)
	if s.lines != nil && step.Local != nil {
		n = min(sensor.Time(math.Ceil(s.motion.TravelledM()/partShiftM)), maxShifts, to-from)
	}
	if s.suite.Vehicle.HasVelocity() && s.motion.GapS() > 0 {
		n = min(s.coasts(), maxShifts, to-from)
	}
	if n <= 1 {
		s.predictBy(step)
		return
	}
	since := from
	for i := sensor.Time(1); since < to; i++ {
		until := from + (to-from)*i/n
		if s.followed += s.part(0); s.followed > s.maxFollowed() {
			until = to // the rest at once
		}
		s.gather(since, until)
		s.predictBy(s.motionStep())
		since = until
	}
}

// motionStep is the step of the motion that was gathered, until the next call.
func (s *Session) motionStep() filter.Step {
	st, step := &s.state, &s.desk().step
	if err := s.motion.StepInto(step, st.belief.Moved(), s.dim, s.space.Frame(), st.pose); err != nil {
		panic(fmt.Sprintf("session: %v", err)) // Supports refuses what a step cannot take
	}
	return *step
}

// predictBy moves the belief by a step and keeps what the motion tells.
func (s *Session) predictBy(step filter.Step) {
	st, m := &s.state, &s.motion
	if s.lines == nil && st.pose.At.Norm() > endOfFrameM {
		step.Local = nil
		step.Add[0], step.Add[1] = 0, 0
	}
	s.spread(step)
	s.moveAside()
	s.watched(Change{From: m.From, Time: m.To})
	st.bend = m.BendAfter()
	travelledM := m.TravelledM()
	st.odometerM += travelledM
	if gap := m.GapS(); gap > 0 {
		st.gapS += gap
		st.gapAgeS += gap
		st.pace.stretches = st.pace.stretches[:0]
	} else {
		st.gapAgeS = 0
		dt := m.Seconds()
		st.hasVelocity = step.Local == nil
		for i := range s.dim {
			st.velocity[i] = step.Add[i] / dt
		}
		if p, ok := m.Pace(); ok {
			st.pace.add(p)
		}
	}
	st.speed = st.pace.speed(st.belief, s.suite.Vehicle.MaxAccelMPS2)
	s.learnVelocity()
	s.standStill()
	if l := s.followsRoad(travelledM); l != nil {
		s.weigh(sensor.Event{Time: m.To, Sensor: roadSensor, Measurement: sensor.Turn{}}, l)
	}
}

// followsRoad is what the last motion says about the road's direction; nil on
// a plane and where it says nothing.
func (s *Session) followsRoad(travelledM float64) filter.LinearLikelihood {
	if s.lines == nil {
		return nil
	}
	if l, ok := s.motion.CrossTrack(s.space.Frame(), s.state.pose); ok {
		return l
	}
	l, _ := s.desk().alignment.Road(s.state.belief.Quantities, travelledM)
	return l
}
