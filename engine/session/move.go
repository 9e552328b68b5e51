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

// standstillS is for how long a standstill speaks (see sensor.Standstill).
const standstillS = 1.0

// gather collects the motion of a stretch of time.
func (s *Session) gather(from, to sensor.Time) {
	m, st := &s.motion, &s.state
	m.Reset(from, to)
	m.GapAgeS, m.HasVelocity, m.VelocityMPS, m.Bend = st.gapAgeS, st.hasVelocity, st.velocity, st.bend
	s.spans(from, to, m.Add)
}

// predict moves the belief by the motion that was gathered.
func (s *Session) predict() {
	st, m := &s.state, &s.motion
	step, err := m.Step(st.belief.Quantities, s.dim, s.space.Frame(), st.pose)
	if err != nil {
		panic(fmt.Sprintf("session: %v", err)) // Supports refuses what a step cannot take
	}
	s.spread(step)
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
	if l := s.followsRoad(travelledM); l != nil {
		s.weigh(sensor.Event{Time: m.To, Sensor: roadSensor, Measurement: sensor.Turn{}}, l)
	}
}

// A step that would make a belief much wider is taken in parts, with the
// resolution adapted between them. At the fine spacing of a located belief a
// long gap would fill millions of cells of a lattice; it is spread by at most
// maxWidening of its own scale at once. On lines each Gaussian of a wide spread
// would follow every way through many junctions, whose number grows
// exponentially; in parts of partM, some three of which reach over a block of
// houses, the ways meet and merge. The parts add up to the whole, but for a
// spread on lines beyond sqrt(maxParts)·2·partM (5.4 km, after some half an
// hour without any event), which is taken as that.
const (
	maxWidening = 2.0
	partM       = 30.0
	fewParts    = 512 // beyond, they are up to twice as long
	maxParts    = 8192
	partShiftM  = 50.0
)

// spread predicts the belief by a step.
func (s *Session) spread(step filter.Step) {
	b := s.state.belief
	if s.lines != nil {
		step.Q[0] = math.Min(step.Q[0], maxParts*4*partM*partM)
	}
	whole := step.Local != nil || s.lines == nil && len(b.Quantities) > 0
	for left := 1.0; ; {
		share := left
		if !whole {
			share = math.Min(left, s.share(step))
		}
		filter.Predict(b, s.space, portion(step, share), &s.work)
		if share == left {
			return
		}
		left -= share
		if s.lines != nil { // now wide: coarse cells do, until adapt refines them
			for step.Q[0] > partM*partM && b.Level < s.lines.Levels()-1 && s.cellsM[b.Level+1] <= partM/2 {
				filter.Relevel(b, s.lines, b.Level+1, &s.work)
			}
			continue
		}
		for range maxAdaptations {
			if !filter.Adapt(b, s.maxCells, &s.work) {
				break
			}
		}
	}
}

// maxAdaptations bounds the halvings or doublings of a spacing at one time.
const maxAdaptations = 64

// share is how much of a step may be taken at once.
func (s *Session) share(step filter.Step) float64 {
	if s.lines != nil {
		part := min(max(partM*partM, step.Q[0]/fewParts), 4*partM*partM)
		return math.Min(part/step.Q[0], partShiftM/math.Abs(step.Add[0]))
	}
	scale := maxWidening * s.state.belief.ScaleM()
	return scale * scale / math.Max(step.Q[0], step.Q[2])
}

// portion is a part of a step. What F does to the positions comes from
// quantities that it leaves alone, so that parts of F - I add up as well.
func portion(step filter.Step, share float64) filter.Step {
	if share == 1 {
		return step
	}
	k := len(step.Add)
	part := filter.NewStep(k)
	for i, v := range step.Add {
		part.Add[i] = share * v
	}
	for i, v := range step.Q {
		part.Q[i] = share * v
	}
	for i, v := range step.F {
		if row, col := i/k, i%k; row != col && v != 0 {
			part.SetF(row, col, share*v)
		}
	}
	return part
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
	l, _ := sensor.RoadAlignment(s.state.belief.Quantities, travelledM)
	return l
}
