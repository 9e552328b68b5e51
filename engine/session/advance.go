package session

import (
	"fmt"
	"math"
	"sort"

	"leadline/engine/filter"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// run computes as many times as are due, all if flush is set.
func (s *Session) run(flush bool) []*summary.Posterior {
	var out []*summary.Posterior
	for {
		t, end, ok := s.next(flush)
		if !ok {
			return out
		}
		p := s.step(t, end)
		if !s.unheard {
			s.snapshot()
		}
		if p != nil && s.release(p) {
			out = append(out, p)
		}
	}
}

// next is the time of the next step and the end of its events, if it is due.
func (s *Session) next(flush bool) (t sensor.Time, end int, ok bool) {
	if s.log.next >= s.horizon() {
		return 0, 0, false
	}
	t = s.log.events[s.log.next].Time
	if !flush && !s.due(t) {
		return 0, 0, false
	}
	if !s.state.begun {
		s.begin()
		if !flush && !s.due(t) {
			return 0, 0, false
		}
	}
	end, motionOnly := s.log.group(s.log.next)
	for stride := s.stride(); motionOnly && t.Seconds(s.state.time) < stride && s.silent(t); {
		if end == s.horizon() {
			if flush || s.pressed {
				break
			}
			return 0, 0, false
		}
		next := s.log.events[end].Time
		if !flush && !s.due(next) {
			return 0, 0, false
		}
		t = next
		end, motionOnly = s.log.group(end)
	}
	return t, end, true
}

// horizon is the index of the first event that is not to be computed.
func (s *Session) horizon() int {
	n := len(s.log.events)
	if s.until == 0 {
		return n
	}
	return sort.Search(n, func(i int) bool { return s.log.events[i].Time > s.until })
}

// due reports whether a time need not wait any longer: what was computed once
// is computed again at once, so that a late event does not take the vehicle
// back in time. The first time waits for hold_s in any case.
func (s *Session) due(t sensor.Time) bool {
	switch {
	case s.begunOnce && t <= s.reached:
		return true
	case s.pressed && len(s.log.events)-s.log.next > s.maxWaiting/2:
		return true
	case !s.state.begun:
		return s.log.latest > t+s.hold
	}
	return s.log.covered(t, s.hold)
}

// A wide belief is one that nobody reads in detail: it costs much and says
// little. Above wideSize cells or Gaussians, times at which nothing but motion
// came are passed over until the vehicle has moved strideShare of a cell, or
// strideM if that is more (a bend is averaged over 3 m in any case), at most
// maxStrideS; posteriors come at most every widePosteriorS, above
// hugeSize every hugePosteriorS. All of it follows from the events alone.
const (
	wideSize       = 4_000
	hugeSize       = 20_000
	strideShare    = 0.25
	strideM        = 2.0
	maxStrideS     = 1.0
	widePosteriorS = 1.0
	hugePosteriorS = 5.0
)

// stride is for how long, in seconds, motion may be gathered into one step.
func (s *Session) stride() float64 {
	if s.lines == nil || s.state.belief.Cells() < s.wideSize {
		return 0
	}
	if !s.state.speed.Known {
		return 0
	}
	v := math.Abs(s.state.speed.MPS)
	return math.Min(maxStrideS, math.Max(strideShare*s.cellM(), s.strideM)/math.Max(v, 1))
}

// silent reports whether the posterior at t is passed over for its width. A
// lattice is cheaper to read than roads, and is fine where it is located: it is
// never wide.
func (s *Session) silent(t sensor.Time) bool {
	if s.lines == nil {
		return false
	}
	since := t.Seconds(s.state.posedAt)
	switch n := s.state.belief.Cells(); {
	case n > s.hugeSize:
		return since < hugePosteriorS
	case n > s.wideSize:
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
	if len(s.snaps) == 0 {
		s.snaps = append(s.snaps, s.unbegun(t-1))
	}
	s.snaps[0].time = t - 1 // an earlier one may have come
	s.state.begun = true
	s.state.time = t
	if a := &s.state.aside; s.fromAnywhere {
		a.woke = t + sensor.Time(searchAgainS*1e9)
		a.searched = a.woke
	}
	s.state.posteriorAt = t - sensor.Time((max(hugePosteriorS, s.posteriorS)+1)*1e9) // the first is due
	s.state.posedAt = s.state.posteriorAt
	if !s.begunOnce {
		s.begunOnce, s.reached = true, t-1
	}
}

// step moves the belief to t, weighs it by the events up to index end, and
// makes the posterior: nil if it is passed over.
func (s *Session) step(t sensor.Time, end int) *summary.Posterior {
	st := &s.state
	s.poseFor(s.log.events[s.log.next:end]...)
	if t > st.time {
		s.move(t)
	}
	for _, ev := range s.log.events[s.log.next:end] {
		ls, err := sensor.Likelihoods(ev, s.context(ev))
		if err != nil {
			panic(fmt.Sprintf("session: %v", err)) // Add has tried it
		}
		for _, l := range ls {
			s.weigh(ev, l)
		}
		st.remember(ev)
		if v, ok := ev.Measurement.(sensor.Speed); ok {
			st.speed = summary.Speed{Known: true, MPS: v.MPS, SigmaMPS: v.SigmaMPS}
		}
	}
	st.processed += uint64(end - s.log.next)
	s.log.next = end
	st.time = t
	s.reached = max(s.reached, t)
	s.look()
	s.adapt()
	s.shed()
	if s.unheard {
		s.turnHere()
		return nil
	}
	st.unread, s.fresh = true, false
	switch {
	case s.silent(t):
		return nil
	case t.Seconds(st.posteriorAt) < s.posteriorS:
		s.pose()
		return nil
	}
	return s.summarise()
}

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
	if i, found := st.find(voiceOf(ev)); found {
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

// Cells of a wide belief on lines are coarse: below maxCells/refineShare a
// level finer is worth its cost (each level doubles the Gaussians at most), above
// maxCells a coarser one is needed. In a gap, which only widens a belief, cells
// are not refined.
const refineShare = 24

// adapt follows the belief's width with the resolution.
func (s *Session) adapt() {
	b := s.state.belief
	if s.lines == nil {
		for range maxAdaptations {
			// A lattice is changed by one halving or doubling a time.
			if !filter.Adapt(b, s.maxCells, &s.desk().work) || len(b.Quantities) == 0 {
				break
			}
		}
		return
	}
	n := b.Cells()
	switch {
	case n > s.maxCells && b.Level < s.lines.Levels()-1:
		filter.Relevel(b, s.lines, b.Level+1, &s.desk().work)
	case n < s.maxCells/refineShare && b.Level > 0 && s.state.gapAgeS == 0:
		filter.Relevel(b, s.lines, b.Level-1, &s.desk().work)
	}
}
