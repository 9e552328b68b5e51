package session

import (
	"cmp"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"leadline/engine/filter"
	"leadline/engine/geo"
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
	speed       summary.Speed
	odometerM   float64 // distance measured since the start
	// Since the last posterior: evidence (at most maxEvidence), gaps, and when
	// that was.
	evidence    []summary.Evidence
	gapS        float64
	posteriorAt sensor.Time
	// previous holds the last processed event of each sensor, by name.
	previous          []lastEvent
	accepted, refused uint64
}

type lastEvent struct {
	sensor    string
	time      sensor.Time
	odometerM float64
}

func (st *state) clone() state {
	c := *st
	c.belief = st.belief.Clone()
	c.previous = slices.Clone(st.previous)
	c.evidence = slices.Clone(st.evidence)
	return c
}

// last returns the time of a sensor's last processed event, and whether there
// was one.
func (st *state) last(name string) (sensor.Time, bool) {
	i, found := st.find(name)
	if !found {
		return 0, false
	}
	return st.previous[i].time, true
}

func (st *state) find(name string) (int, bool) {
	return slices.BinarySearchFunc(st.previous, name, func(l lastEvent, n string) int { return strings.Compare(l.sensor, n) })
}

func (st *state) remember(ev sensor.Event) {
	i, found := st.find(ev.Sensor)
	if !found {
		st.previous = slices.Insert(st.previous, i, lastEvent{sensor: ev.Sensor})
	}
	st.previous[i].time, st.previous[i].odometerM = ev.Time, st.odometerM
}

// snapshot is the state before the events that follow time.
type snapshot struct {
	time sensor.Time
	state
}

// run computes as many times as are covered, all if flush is set.
func (s *Session) run(flush bool) []*summary.Posterior {
	var out []*summary.Posterior
	hold := sensor.Time(s.suite.Vehicle.HoldS * 1e9)
	for s.log.next < len(s.log.events) {
		t := s.log.events[s.log.next].Time
		if !s.state.begun {
			if !flush && s.log.latest <= t+hold {
				return out
			}
			s.begin()
		}
		if !flush && !s.log.covered(t, hold) {
			return out
		}
		end, motionOnly := s.log.group(s.log.next)
		for stride := s.stride(); motionOnly && t.Seconds(s.state.time) < stride; {
			if end == len(s.log.events) {
				if flush {
					break
				}
				return out
			}
			next := s.log.events[end].Time
			if !flush && !s.log.covered(next, hold) {
				return out
			}
			t = next
			end, motionOnly = s.log.group(end)
		}
		if p := s.step(t, end, flush && end == len(s.log.events)); p != nil && s.release(p) {
			out = append(out, p)
		}
	}
	return out
}

// A wide belief is one that nobody reads in detail: it costs much and says
// little. Above wideSize cells or Gaussians, times at which nothing but motion
// came are passed over until the vehicle has moved strideShare of a cell, at
// most maxStrideS; posteriors come at most every widePosteriorS, above
// hugeSize every hugePosteriorS. All of it follows from the events alone.
const (
	wideSize       = 4_000
	hugeSize       = 20_000
	strideShare    = 0.25
	maxStrideS     = 1.0
	widePosteriorS = 1.0
	hugePosteriorS = 5.0
)

// stride is for how long, in seconds, motion may be gathered into one step.
func (s *Session) stride() float64 {
	if s.lines == nil || s.state.belief.Cells() < wideSize {
		return 0
	}
	v := math.Abs(s.state.speed.MPS)
	if !s.state.speed.Known {
		return 0
	}
	return math.Min(maxStrideS, strideShare*s.cellM()/math.Max(v, 1))
}

// silent reports whether the posterior at t is passed over. A lattice is
// cheaper to read than roads, and is fine where it is located: it is never
// wide.
func (s *Session) silent(t sensor.Time) bool {
	if s.lines == nil {
		return false
	}
	since := t.Seconds(s.state.posteriorAt)
	switch n := s.state.belief.Cells(); {
	case n > hugeSize:
		return since < hugePosteriorS
	case n > wideSize:
		return since < widePosteriorS
	}
	return false
}

// begin sets the start time: that of the first event, or of the beginning of
// its increment.
func (s *Session) begin() {
	t := s.log.events[0].Time
	for _, ev := range s.log.events {
		if since, ok := sensor.Since(ev.Measurement); ok {
			t = min(t, since)
		}
	}
	s.state.begun = true
	s.state.time = t
	s.snaps = append(s.snaps, snapshot{t - 1, s.state.clone()})
}

// step moves the belief to t, weighs it by the events up to index end, and
// makes the posterior: nil if it is passed over, which the last one never is.
func (s *Session) step(t sensor.Time, end int, last bool) *summary.Posterior {
	st := &s.state
	evidence := st.evidence
	weigh := func(ev sensor.Event, kind string, l any) {
		e, err := filter.UpdateWithin(st.belief, s.space, l, s.maxCells, &s.work)
		if errors.Is(err, filter.ErrContradiction) {
			e = math.Inf(-1)
		} else {
			st.logEvidence += e
		}
		if n := len(evidence); n > 0 && evidence[n-1].Sensor == ev.Sensor && evidence[n-1].Number == ev.Number && evidence[n-1].Kind == kind {
			evidence[n-1].LogEvidence += e
			return
		}
		if len(evidence) == maxEvidence {
			evidence = slices.Delete(evidence, 0, 1)
		}
		evidence = append(evidence, summary.Evidence{Sensor: ev.Sensor, Number: ev.Number, Kind: kind, LogEvidence: e})
	}
	if t > st.time {
		travelled := s.move(t)
		st.gapS += s.motion.GapS()
		if l := s.followsRoad(travelled); l != nil {
			weigh(sensor.Event{Sensor: roadSensor}, sensor.KindTurn, l)
		}
	}
	for _, ev := range s.log.events[s.log.next:end] {
		ls, err := sensor.Likelihoods(ev, s.context(ev))
		if err != nil {
			panic(fmt.Sprintf("session: %v", err)) // Add has tried it
		}
		for _, l := range ls {
			weigh(ev, ev.Measurement.Kind(), l)
		}
		st.remember(ev)
		if v, ok := ev.Measurement.(sensor.Speed); ok {
			st.speed = summary.Speed{Known: true, MPS: v.MPS, SigmaMPS: v.SigmaMPS}
		}
	}
	st.accepted += uint64(end - s.log.next)
	s.log.next = end
	st.time = t
	s.adapt()
	var p *summary.Posterior
	if st.evidence = evidence; last || !s.silent(t) {
		p = s.summarise()
		st.evidence, st.gapS, st.posteriorAt = nil, 0, t
	}
	s.snapshot()
	return p
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

// maxEvidence bounds the single evidences that a posterior lists; the running
// sum has them all.
const maxEvidence = 64

// roadSensor names the comparison of the vehicle's heading with the road's in
// a posterior's evidence.
const roadSensor = "road"

// context is what a likelihood of ev needs to know.
func (s *Session) context(ev sensor.Event) sensor.Context {
	st := &s.state
	c := sensor.Context{
		Suite: s.suite, Frame: s.space.Frame(), Dim: s.dim, Quantities: st.belief.Quantities, Pose: st.pose,
		CellM: s.cellM(), SincePreviousS: math.Inf(1), TravelledM: math.Inf(1),
	}
	if s.names != nil {
		c.Roads = s.names
	}
	if p, ok := s.space.(filter.PlaneSpace); ok {
		c.Plane = p
	}
	if i, found := st.find(ev.Sensor); found {
		c.SincePreviousS = ev.Time.Seconds(st.previous[i].time)
		c.TravelledM = st.odometerM - st.previous[i].odometerM
	}
	return c
}

// cellM is the width of the belief's cells: on lines the widest there may be.
func (s *Session) cellM() float64 {
	if s.lines == nil {
		return s.state.belief.Lattice.SpacingM
	}
	return s.cellsM[s.state.belief.Level]
}

// move predicts the belief to t and returns the distance travelled.
func (s *Session) move(t sensor.Time) (travelledM float64) {
	st := &s.state
	m := &s.motion
	m.Reset(st.time, t)
	m.GapAgeS, m.HasVelocity, m.VelocityMPS = st.gapAgeS, st.hasVelocity, st.velocity
	for i := s.log.next; i < len(s.log.events); i++ {
		ev := s.log.events[i]
		if !sensor.IsMotion(ev.Measurement.Kind()) {
			continue
		}
		m.Add(ev, s.before(i))
	}
	step, err := m.Step(st.belief.Quantities, s.dim, s.space.Frame(), st.pose)
	if err != nil {
		panic(fmt.Sprintf("session: %v", err)) // Usable refuses what a step cannot take
	}
	filter.Predict(st.belief, s.space, step, &s.work)
	travelledM = m.TravelledM()
	st.odometerM += travelledM
	if gap := m.GapS(); gap > 0 {
		st.gapAgeS += gap
		st.speed = summary.Speed{}
	} else {
		st.gapAgeS = 0
		dt := m.Seconds()
		st.hasVelocity = step.Local == nil
		for i := range s.dim {
			st.velocity[i] = step.Add[i] / dt
		}
		st.speed = summary.Speed{Known: true, MPS: travelledM / dt, SigmaMPS: math.Sqrt(step.Q[0]) / dt}
	}
	return travelledM
}

// before returns the time of the event before the i-th of the log by the same
// sensor; its own time if there is none.
func (s *Session) before(i int) sensor.Time {
	ev := s.log.events[i]
	for j := i - 1; j >= s.log.next; j-- {
		if s.log.events[j].Sensor == ev.Sensor {
			return s.log.events[j].Time
		}
	}
	if last, ok := s.state.last(ev.Sensor); ok {
		return last
	}
	return ev.Time
}

// Cells of a wide belief on lines are coarse: below refineBelow Gaussians a
// level finer is affordable (each level doubles their number at most), above
// maxCells a coarser one is needed.
const refineShare = 8

// adapt follows the belief's width with the resolution.
func (s *Session) adapt() {
	b := s.state.belief
	if s.lines == nil {
		filter.Adapt(b, s.maxCells, &s.work)
		return
	}
	n := b.Cells()
	switch {
	case n > s.maxCells && b.Level < s.lines.Levels()-1:
		filter.Relevel(b, s.lines, b.Level+1, &s.work)
	case n < s.maxCells/refineShare && b.Level > 0:
		filter.Relevel(b, s.lines, b.Level-1, &s.work)
	}
}

// summarise makes the posterior of the present state and takes the pose from
// it.
func (s *Session) summarise() *summary.Posterior {
	st := &s.state
	b := st.belief
	b.Read(&s.cloud, s.space, &s.work)
	p := &summary.Posterior{}
	in := summary.Input{
		TimeNS: int64(st.time), Frame: s.space.Frame(), Belief: b, Cloud: &s.cloud,
		Speed: st.speed, Evidence: st.evidence, LogEvidence: st.logEvidence,
		Accepted: st.accepted, Refused: s.refused,
	}
	if s.lines != nil {
		in.Lines = s.lines.Lines(b.Level)
	}
	if s.names != nil {
		in.Names = s.names
	}
	err := s.sum.Summarize(p, &in)
	if err != nil {
		panic(fmt.Sprintf("session: %v", err)) // a belief is never empty
	}
	p.GapS = st.gapS
	st.pose = sensor.Pose{At: p.MeanFrame, HeadingVar: sensor.NoHeading}
	if p.Heading.Known {
		g, _ := s.space.Frame().Convergence(p.MeanFrame)
		st.pose.HeadingRad = geo.WrapPi(p.Heading.TrueRad - g)
		st.pose.HeadingVar = p.Heading.SigmaRad * p.Heading.SigmaRad
	}
	return p
}

// release keeps a posterior, makes those final that no event can change, and
// reports whether it is news: computed for the first time, or not as before.
func (s *Session) release(p *summary.Posterior) bool {
	if s.final > 0 && p.TimeNS <= s.recent[s.final-1].TimeNS {
		return false // on the way from a snapshot to what a late event changes
	}
	news := true
	for n := len(s.superseded); n > 0 && s.superseded[n-1].TimeNS <= p.TimeNS; n-- {
		old := s.superseded[n-1]
		s.superseded = s.superseded[:n-1]
		if old.TimeNS == p.TimeNS {
			p.Revises = old.Revises
			if news = !sameAnswer(old, p); news {
				p.Revises = true
			}
		}
	}
	s.recent = append(s.recent, p)
	n := s.final
	for n < len(s.recent)-1 && s.state.time.Seconds(sensor.Time(s.recent[n].TimeNS)) > s.suite.Vehicle.LateWindowS {
		n++
	}
	s.finish(n)
	return news
}

// sameAnswer compares what enters the hash.
func sameAnswer(a, b *summary.Posterior) bool {
	return a.Status == b.Status && a.MeanFrame == b.MeanFrame && a.CovFrame == b.CovFrame && a.LogEvidence == b.LogEvidence
}

// finish makes the recent posteriors below n final.
func (s *Session) finish(n int) {
	for ; s.final < n; s.final++ {
		s.hasher.Add(s.recent[s.final])
	}
	if drop := s.final - 1; drop > 256 {
		s.recent = slices.Delete(s.recent, 0, drop)
		s.final -= drop
	}
}

// snapshot keeps the state now and then, so that there is always one from
// before the window.
func (s *Session) snapshot() {
	window := s.suite.Vehicle.LateWindowS
	now := s.state.time
	if n := len(s.snaps); n == 0 || now.Seconds(s.snaps[n-1].time) >= window/2 {
		s.snaps = append(s.snaps, snapshot{now, s.state.clone()})
	}
	for len(s.snaps) > 1 && now.Seconds(s.snaps[1].time) > window {
		s.snaps = slices.Delete(s.snaps, 0, 1)
	}
	s.log.drop(s.snaps[0].time)
}

// rewind restores the last snapshot before a time.
func (s *Session) rewind(from sensor.Time) {
	n := len(s.snaps)
	for s.snaps[n-1].time >= from {
		n--
	}
	snap := s.snaps[n-1]
	s.snaps = s.snaps[:n]
	s.state = snap.clone()
	for s.log.next > 0 && s.log.events[s.log.next-1].Time > snap.time {
		s.log.next--
	}
	for i := len(s.recent); i > s.final && s.recent[i-1].TimeNS > int64(snap.time); i-- {
		s.superseded = append(s.superseded, s.recent[i-1])
		s.recent = s.recent[:i-1]
	}
	// The oldest last, to be taken off as time goes on.
	slices.SortStableFunc(s.superseded, func(a, b *summary.Posterior) int { return cmp.Compare(b.TimeNS, a.TimeNS) })
}
