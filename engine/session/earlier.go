package session

import (
	"errors"
	"fmt"
	"slices"
	"sort"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// Earlier is a copy of what a session has done lately: it tells what is known of a
// time then, given all that was measured since. The session does not change with it,
// nor it with the session: another goroutine may have it.
//
// Nothing is kept for it beyond what a session holds to go back for late events,
// unless the suite's look_back_s is longer than its late_window_s: then the events
// of that time, and at most mostEarlier beliefs.
type Earlier struct {
	l     *looker
	from  cut
	until sensor.Time // the time that was asked for
	now   sensor.Time // that of the last event
	// What was found.
	mark  *mark
	known *filter.Belief
}

const (
	// mostEarlier bounds the snapshots from before the window for late events.
	mostEarlier = 8
	// earlierTapeBytes is what a question may hold of what the filter did; the rest
	// is computed again.
	earlierTapeBytes = 32 << 20
	// earlierLeadS is how long before the time asked for the filter begins, if it
	// can: steps gather at most maxStrideS, so that one ends between.
	earlierLeadS = 2 * maxStrideS
)

// lookBackS is how far back a session can be asked.
func (s *Session) lookBackS() float64 {
	return max(s.suite.Vehicle.LookBackS, s.suite.Vehicle.LateWindowS)
}

// Earlier copies what tells of the time so many seconds before the latest that was
// computed. An error says why nothing does.
func (s *Session) Earlier(agoS float64) (*Earlier, error) {
	if err := s.runsBackward(); err != nil {
		return nil, err
	}
	switch most := s.lookBackS(); {
	case !(agoS > 0 && agoS <= most):
		return nil, fmt.Errorf("%g s ago is asked for: give more than 0 and at most the suite's look_back_s, %g s", agoS, most)
	case !s.state.begun:
		return nil, errors.New("there is no posterior yet")
	case s.flushed && s.state.time == s.flushedAt:
		return nil, errors.New("the drive has ended, and what led there is not held any more: replay it with --smooth")
	}
	now := s.state.time
	e := &Earlier{until: now - sensor.Time(agoS*1e9), now: now}
	events := s.log.events[:s.log.next]
	k := sort.Search(len(events), func(i int) bool { return events[i].Time > e.until })
	if k == 0 || !s.snaps[0].precedes(events[k-1].Time) {
		return nil, fmt.Errorf("nothing that is held tells of %g s ago: the drive was %.3f s old then at most, or more was measured since than is held",
			agoS, max(0, e.until.Seconds(s.snaps[0].time)))
	}
	copied := s.fork()
	copied.past, copied.beginWork, copied.leads = s.past.clone(), nil, nil
	copied.watch, copied.finals, copied.settled = nil, nil, nil
	copied.until = now
	e.l = &looker{s: copied, HindsightOptions: HindsightOptions{TapeBytes: earlierTapeBytes}}
	last := events[k-1].Time
	snap := s.before(last - sensor.Time(earlierLeadS*1e9))
	if snap == nil {
		snap = s.before(last)
	}
	e.from.state = s.stateOf(snap)
	if snap.begun {
		e.from.next = sort.Search(len(events), func(i int) bool { return events[i].Time > snap.time })
		return e, nil
	}
	copied.state = e.from.state.clone()
	copied.begin()
	e.from.state = copied.state.clone()
	return e, nil
}

// before is the last whole snapshot before a time, nil if there is none.
func (s *Session) before(t sensor.Time) *snapshot {
	for i := len(s.snaps) - 1; i >= 0; i-- {
		if n := &s.snaps[i]; !n.hollow && n.precedes(t) {
			return n
		}
	}
	return nil
}

// Look returns what is known of the latest time that is not after the one asked for.
// It takes the filter's own time over what was measured since, three to six times;
// stop, if it is not nil, is asked now and then.
func (e *Earlier) Look(stop func() error) (_ *summary.Posterior, err error) {
	e.l.Stop = stop
	if e.mark, e.known, _, err = e.l.at(e.from, e.until); err != nil {
		return nil, err
	}
	if e.mark == nil {
		return nil, fmt.Errorf("no time shortly before %.3f s ago was computed", e.now.Seconds(e.until))
	}
	return e.l.read(e.mark, e.known), nil
}

// Now is the time of the last measurement that Look makes use of.
func (e *Earlier) Now() sensor.Time { return e.now }

// Region is Session.Region of what Look found.
func (e *Earlier) Region(fraction float64) (*summary.Region, error) {
	return e.l.s.desk().sum.Region(fraction)
}

// Inside is Session.Inside of what Look found.
func (e *Earlier) Inside(polygon [][]geo.LonLat) (float64, error) {
	return e.l.s.desk().sum.Inside(polygon)
}

// Protection is Session.Protection of what Look found.
func (e *Earlier) Protection(risk float64) (summary.Protection, error) {
	o := e.l.s.shown()
	o.IntegrityRisk = risk
	sum, err := summary.New(o)
	if err != nil {
		return summary.Protection{}, err
	}
	return e.l.readBy(sum, e.mark, e.known).Protection, nil
}

// thin gives up snapshots from before the window for late events, so that any three of
// them span more than a quarter of the time to look back: at most mostEarlier stay.
func (s *Session) thin() {
	now, least := s.state.time, s.lookBackS()/(mostEarlier/2)
	for i := 1; i+1 < len(s.snaps) && now.Seconds(s.snaps[i+1].time) > s.suite.Vehicle.LateWindowS; i++ {
		if s.snaps[i+1].time.Seconds(s.snaps[i-1].time) <= least {
			s.snaps = slices.Delete(s.snaps, i, i+1)
			i--
		}
	}
}
