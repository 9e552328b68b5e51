package session

import (
	"slices"
	"sort"

	"leadline/engine/filter"
	"leadline/engine/sensor"
)

// When being lost is as likely as what located leaves open (searchFrom), so that
// nothing can be located, the alarm is raised and the whole map searched: a
// new belief, seeded anywhere, replays the last minutes of events, and then takes
// the share of the hypothesis that the vehicle is lost. What it found competes with
// what was there from then on; evidence decides. It may have lost the vehicle, too,
// over a road that the map lacks, say: that share stays lost, for the next search.
//
// The search is a function of the set of events. It covers searchBackS before the
// alarm, no more than maxSearched events of them, and nothing from before the end
// of the last long stop or silence, in which the vehicle may have been carried: of one
// that goes on, the present alone. On a plane nothing from before being lost was last as
// good as ruled out: a lattice follows everything that was possible until then, and what
// was on its way cannot be where the vehicle has been carried to.
// It enters enterAfterS after the alarm, by the events' time, and the session
// waits for it then: whoever runs it meanwhile elsewhere (Config.Begin) changes
// when the answer comes and not what it is. The next one begins searchAgainS
// later at the earliest, and each after that twice as much later as the one before, up to
// searchMostS: what the first ones did not find is hardly on the map, and other vehicles
// want the processors. That begins anew once the vehicle has been located, or drives on
// after a long stop. A session that itself began anywhere is as good as a search
// of the same events: its first one leaves the first searchAgainS out.
const (
	searchBackS  = 300.0
	maxSearched  = 1 << 14
	enterAfterS  = 5.0
	sureBelow    = 1e-6 // a thousand times what a second brings, and far below searchFrom
	searchFrom   = 0.05 // 1 less summary's share of a mode from which on a vehicle is located
	searchAgainS = 60.0
	searchMostS  = 480.0 // three doublings: a search of 15 s, as in a city, is then 3 % of a core
)

// search is one on its way. It is not changed once it is made.
type search struct {
	found *Session // what wait leaves: the belief at the time of the alarm
	wait  func()   // until it is done
	// What it is made of: the events up to a time, and when it enters.
	events       []sensor.Event
	until, enter sensor.Time
}

// keepPast keeps events that the log drops, for searches.
func (s *Session) keepPast(dropped []sensor.Event) {
	if s.settled != nil {
		s.settled(dropped)
	}
	if s.unheard || s.rates.lost == 0 && s.rates.moved == 0 {
		return
	}
	if s.past.add(dropped); len(dropped) > 0 {
		s.past.forget(dropped[len(dropped)-1].Time-sensor.Time(searchBackS*1e9), maxSearched)
	}
}

// look begins a search where one is due, and lets one in that is.
func (s *Session) look() {
	st := &s.state
	a := &st.aside
	if a.lost < sureBelow {
		a.sure = st.time
	}
	switch {
	case a.search != nil && st.time >= a.search.enter:
		s.letIn(a.search)
		a.search, a.searched = nil, st.time
	case s.unheard: // a search's own
	case a.search == nil && a.lost >= searchFrom && (a.searched == 0 || st.time.Seconds(a.searched) >= a.pauseS()):
		a.search, a.alarm = s.begins(), true
		a.tries++
	}
}

// pauseS is how long after a search the next one may begin.
func (a *aside) pauseS() float64 {
	pause := searchAgainS
	for range a.tries - 1 {
		if pause *= 2; pause >= searchMostS {
			return searchMostS
		}
	}
	return pause
}

// begins makes the search of the present time.
func (s *Session) begins() *search {
	st := &s.state
	from := max(st.time-sensor.Time(searchBackS*1e9), st.aside.woke)
	switch {
	case st.aside.quietS > quietAfterS:
		from = st.time - 1 // it may have been carried until now
	case s.lines == nil:
		from = max(from, st.aside.sure)
	}
	return s.search(s.events(from, st.time), st.time, st.time+sensor.Time(enterAfterS*1e9))
}

// search makes one over events up to a time, and has it run.
func (s *Session) search(events []sensor.Event, until, enter sensor.Time) *search {
	found := s.anywhere(events)
	x := &search{found: found, events: events, until: until, enter: enter}
	work := func() { found.runUntil(until) }
	if s.beginWork == nil {
		done := false
		x.wait = func() {
			if !done {
				work()
				done = true
			}
		}
		return x
	}
	x.wait = s.beginWork(work)
	return x
}

// events returns those after from, up to until, at most maxSearched of them, as searches
// take them.
func (s *Session) events(from, until sensor.Time) []sensor.Event {
	all := s.past.between(nil, from, until)
	evs := s.log.events
	a := sort.Search(len(evs), func(i int) bool { return evs[i].Time > from })
	b := sort.Search(len(evs), func(i int) bool { return evs[i].Time > until })
	for _, ev := range evs[a:max(a, b)] {
		all = append(all, searched(ev))
	}
	return all[max(0, len(all)-maxSearched):]
}

// anywhere returns a session that is to follow events from anywhere on the map,
// for nobody to read: it makes no posteriors and keeps no snapshots.
func (s *Session) anywhere(events []sensor.Event) *Session {
	maxCells := s.maxCells
	if s.points() {
		maxCells /= PointsPerGaussian // which New takes times that
	}
	f, err := New(Config{Vehicle: s.vehicle, Space: s.space, Names: s.names, Suite: s.suite, MaxCells: maxCells, Unguarded: s.unguarded})
	if err != nil {
		panic("session: " + err.Error()) // it has been made before
	}
	f.unheard = true
	for _, ev := range events {
		f.log.insert(len(f.log.events), ev, f.suite)
	}
	return f
}

// runUntil computes all events up to a time.
func (s *Session) runUntil(t sensor.Time) {
	s.until = t
	s.run(true)
}

// turnHere keeps the place at which directions are turned into the frame's, which
// posteriors keep otherwise.
func (s *Session) turnHere() {
	st := &s.state
	if st.time.Seconds(st.posedAt) < turnEveryS {
		return
	}
	_, at, _ := st.belief.Moments(s.space, &s.desk().work)
	st.pose = sensor.Pose{At: at, HeadingVar: sensor.NoHeading}
	st.evidence, st.posedAt, st.poseDue = nil, st.time, false
}

// turnEveryS: the frame's north turns by less than 0.01° over a kilometre.
const turnEveryS = 10.0

// fork returns a copy of a search's session that shares nothing that changes.
func (s *Session) fork() *Session {
	c := *s
	c.state = s.state.clone()
	c.log.events = slices.Clone(s.log.events)
	c.log.spoke, c.log.voices = slices.Clone(s.log.spoke), slices.Clone(s.log.voices)
	c.log.sources = slices.Clone(s.log.sources)
	for i := range c.log.sources {
		c.log.sources[i].events = slices.Clone(s.log.sources[i].events)
	}
	c.own, c.desks, c.snaps, c.cuts = nil, nil, nil, nil
	c.motion = sensor.Motion{Suite: c.suite}
	return &c
}

// letIn gives what a search has found the share of being lost.
func (s *Session) letIn(x *search) {
	x.wait()
	st := &s.state
	a := &st.aside
	f := x.found.fork()
	if len(f.log.events) == 0 {
		return
	}
	for _, ev := range s.events(x.found.until, st.time) {
		f.log.insert(len(f.log.events), ev, f.suite)
	}
	f.runUntil(st.time)
	if b := f.state.belief; s.lines != nil && b.Level != st.belief.Level {
		level := max(b.Level, st.belief.Level)
		filter.Relevel(b, s.lines, level, &s.desk().work)
		filter.Relevel(st.belief, s.lines, level, &s.desk().work)
	}
	on, lost := a.on(), a.lost
	found := &f.state.aside
	if gain := lost * found.off; gain > 0 && found.loose.Len() > 0 {
		a.loose.Mix(&found.loose, gain/(a.off+gain), mostLoose, &s.desk().work)
		a.off += gain
	}
	gain := lost * found.on()
	if share := gain / (on + gain); s.lines != nil {
		filter.Blend(st.belief, f.state.belief, share, s.lines, &s.desk().work)
	} else {
		filter.BlendPlane(st.belief, f.state.belief, share, s.maxCells, &s.desk().work)
	}
	a.lost = lost * found.lost
	st.pace.stretches = st.pace.stretches[:0] // the scale is another one, perhaps
}
