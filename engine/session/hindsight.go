package session

import (
	"errors"
	"slices"

	"leadline/engine/filter"
	"leadline/engine/summary"
)

// HindsightOptions say how a drive is looked back over.
type HindsightOptions struct {
	// Path asks for the most probable path.
	Path bool
	// TapeBytes is about how much of what the filter did is held at a time; 0 is
	// 128 MiB. What does not fit is computed again, from checkpoints.
	TapeBytes int
	// Give is given each time of a posterior, in order.
	Give func(Hindsight) error
	// Stop, if set, is asked now and then.
	Stop func() error
}

// Hindsight is what is known of a time once the drive is over.
type Hindsight struct {
	// Filtered is what was known then, Smoothed what is known given all that was
	// measured later, too. What was beside the roads then, off them or lost, stays as it was:
	// backward, the belief on the map alone is followed.
	Filtered, Smoothed *summary.Posterior
	// Path, if asked for, is the most probable path: on roads what is known of a
	// vehicle that took the likeliest sequence of roads; on a plane the likeliest sequence of
	// cells, each with its size.
	Path *summary.Posterior
}

const (
	defaultTapeBytes = 128 << 20
	mostCheckpoints  = 128
)

// LookBack runs the filter over the events of a drive, as a session took them
// (Settled, Held), and then backward (docs/smoothing.md). The filtered posteriors
// are the final ones of that session, bit for bit.
//
// Memory is bounded: the drive is cut where the tape of what the filter did is
// full, and of mostCheckpoints cuts, or of more than TapeBytes of them, every other one is given up. From the last
// cut to the first each stretch is computed again and run backward; then from the
// first to the last, to be given away. Of the events no more are held than the filter looks at.
func LookBack(c Config, events Events, o HindsightOptions) error {
	l, err := newLooker(c, o)
	if err != nil {
		return err
	}
	if events.Len() == 0 {
		return errors.New("there is no event to look back over")
	}
	l.all = events
	if err := l.fill(); err != nil {
		return err
	}
	l.s.begin()
	_, err = l.stretch(l.first(), events.Len(), nil, true)
	return err
}

// looker looks back.
type looker struct {
	s *Session
	HindsightOptions
	// all are the drive's events, if not all are in the log; base is the number of
	// the log's first one.
	all   Events
	base  int
	least int // leastAhead, less in tests
	tape  filter.Tape
	// The tape's beginning, and the posteriors along it.
	begin cut
	marks []mark
	steps int
}

// cut is a place where a drive is cut.
type cut struct {
	state state
	next  int         // number of the first event after it
	heard []source    // the last motion of each source before, where the log is read anew
	way   filter.Way  // on lines
	best  filter.Best // on a plane
}

// mark is a posterior, and after how many turns it was made.
type mark struct {
	turns int
	p     *summary.Posterior
	off   *summary.OffRoads
	lost  float64
	// What had been lost from the belief, and given to it from elsewhere.
	pruned, left, restarted float64
}

// known is what is known of a cut, given all that came later.
type known struct {
	smoothed, along *filter.Belief
	spot            filter.Spot
}

func newLooker(c Config, o HindsightOptions) (*looker, error) {
	s, err := New(c)
	if err != nil {
		return nil, err
	}
	if err := s.runsBackward(); err != nil {
		return nil, err
	}
	if o.TapeBytes == 0 {
		o.TapeBytes = defaultTapeBytes
	}
	return &looker{s: s, HindsightOptions: o, least: leastAhead}, nil
}

// runsBackward is nil if what the filter does can be run backward.
func (s *Session) runsBackward() error {
	if gridded(s.state.belief.Moved()) {
		return errors.New("a grid with velocity axes is not run backward: leave out the suite's velocity_grid to look back")
	}
	return nil
}

func (l *looker) first() cut {
	c := l.cut()
	switch b := l.s.state.belief; {
	case !l.Path:
	case l.s.lines != nil:
		c.way = b.Way()
	default:
		c.best = b.BestOf()
	}
	return c
}

// stretch goes from a cut to an event, and returns what is known of the cut given
// what is known of the event, nil being the drive's end. It gives the times
// between away if told to.
func (l *looker) stretch(from cut, until int, later *known, give bool) (*known, error) {
	cuts := []cut{from}
	if err := l.resume(from); err != nil {
		return nil, err
	}
	for every, n, held := 1, 0, beliefBytes(from.state.belief); l.base+l.s.log.next < until; {
		if err := l.fill(); err != nil {
			return nil, err
		}
		t, end, _ := l.s.next(true)
		p := l.s.step(t, end)
		at := l.base + l.s.log.next
		if p == nil && at == until && at == l.end() {
			p = l.s.summarise() // the last time is never passed over
		}
		l.mark(p)
		if l.steps++; l.Stop != nil && l.steps%64 == 0 {
			if err := l.Stop(); err != nil {
				return nil, err
			}
		}
		l.forget()
		if l.tape.Bytes() <= l.TapeBytes || at == until {
			continue
		}
		l.fold()
		if n++; n%every == 0 {
			cuts = append(cuts, l.begin)
			held += beliefBytes(l.begin.state.belief)
		}
		if len(cuts) > mostCheckpoints || len(cuts) > 3 && held > l.TapeBytes {
			every *= 2
			kept := cuts[:1]
			for i := 2; i < len(cuts); i += 2 {
				kept = append(kept, cuts[i])
			}
			clear(cuts[len(kept):])
			cuts, held = kept, 0
			for _, c := range cuts {
				held += beliefBytes(c.state.belief)
			}
		}
	}
	if len(cuts) == 1 && l.begin.next == from.next {
		return l.back(later, give)
	}
	// What is known of each cut, then what lies between.
	after := make([]*known, len(cuts))
	after[len(cuts)-1] = later
	var err error
	ends := append(slices.Clone(cuts[1:]), cut{next: until})
	for i := len(cuts) - 1; i > 0; i-- {
		if after[i-1], err = l.stretch(cuts[i], ends[i].next, after[i], false); err != nil {
			return nil, err
		}
	}
	var first *known
	for i := range cuts {
		if i > 0 && !give {
			break
		}
		k, err := l.stretch(cuts[i], ends[i].next, after[i], give)
		if err != nil {
			return nil, err
		}
		if i == 0 {
			first = k
		}
	}
	return first, nil
}

// resume puts the session where a drive was cut, and begins a tape there.
func (l *looker) resume(c cut) error {
	s := l.s
	s.state, s.fresh = c.state.clone(), false
	if err := l.reread(c); err != nil {
		return err
	}
	s.desk().work.Release()
	l.begin, l.marks = c, nil
	s.desk().work.Record(&l.tape, s.state.belief)
	return nil
}

// fold cuts the drive here and begins another tape.
func (l *looker) fold() {
	b := l.s.state.belief
	next := l.cut()
	switch {
	case !l.Path:
	case l.s.lines != nil:
		ways := l.tape.Ways(l.begin.way)
		next.way = ways[len(ways)-1]
	default:
		all := l.tape.Best(l.begin.best, b)
		next.best = all[len(all)-1]
	}
	l.begin, l.marks = next, nil
	l.s.desk().work.Record(&l.tape, b)
}

// mark keeps a posterior, if there is one.
func (l *looker) mark(p *summary.Posterior) {
	if p == nil {
		return
	}
	b := l.s.state.belief
	m := mark{turns: l.tape.Turns(), p: p, lost: l.s.state.aside.lost, pruned: b.Pruned, left: b.LeftMap, restarted: b.Restarted}
	if a := &l.s.state.aside; a.off > 0 {
		loose := a.loose.Clone()
		m.off = &summary.OffRoads{Probability: a.off, Loose: &loose}
	}
	l.marks = append(l.marks, m)
}

// back runs the tape backward.
func (l *looker) back(later *known, give bool) (*known, error) {
	b := l.s.state.belief
	out := make([]Hindsight, len(l.marks))
	see := func(put func(i int, h *filter.Belief)) func(int, *filter.Belief) {
		i := len(l.marks) - 1
		return func(turns int, h *filter.Belief) {
			for ; i >= 0 && l.marks[i].turns == turns; i-- {
				if give {
					put(i, h)
				}
			}
		}
	}
	k := &known{}
	k.smoothed = l.known(later, func(k *known) *filter.Belief { return k.smoothed })
	var at []*filter.Belief // of each mark, where a path wants it
	l.tape.Smooth(k.smoothed, &l.s.desk().work, see(func(i int, h *filter.Belief) {
		m := &l.marks[i]
		out[i].Filtered, out[i].Smoothed = m.p, l.read(m, h)
		if l.Path && l.s.lines == nil {
			at = append(at, h.Clone())
		}
	}))
	switch {
	case !l.Path:
	case l.s.lines != nil:
		ways := l.tape.Ways(l.begin.way)
		k.along = l.known(later, func(k *known) *filter.Belief { return k.along })
		if later == nil {
			ways[len(ways)-1].Restrict(k.along)
		}
		l.tape.SmoothAlong(k.along, ways, &l.s.desk().work, see(func(i int, h *filter.Belief) {
			out[i].Path = l.read(&l.marks[i], h)
		}))
	default:
		all := l.tape.Best(l.begin.best, b)
		if later != nil {
			k.spot = later.spot
		} else {
			k.spot = b.End(all[len(all)-1])
		}
		put := 0
		at1 := see(func(i int, h *filter.Belief) {
			out[i].Path = l.read(&l.marks[i], h)
			put++
		})
		k.spot = l.tape.Trace(all, k.spot, b, func(turns int, spot filter.Spot) {
			if give && put < len(at) {
				at1(turns, spot.Alone(at[put]))
			}
		})
	}
	if !give {
		return k, nil
	}
	for _, h := range out {
		if err := l.Give(h); err != nil {
			return nil, err
		}
	}
	return k, nil
}

// known is a copy of what is known at the end of the tape.
func (l *looker) known(later *known, which func(*known) *filter.Belief) *filter.Belief {
	if later == nil {
		return l.s.state.belief.Clone()
	}
	return which(later).Clone()
}

// read makes a posterior of what is known later of a mark.
func (l *looker) read(m *mark, h *filter.Belief) *summary.Posterior {
	return l.readBy(&l.s.desk().sum, m, h)
}

func (l *looker) readBy(sum *summary.Summarizer, m *mark, h *filter.Belief) *summary.Posterior {
	s := l.s
	b := h.Present()
	b.Pruned, b.LeftMap, b.Restarted = m.pruned, m.left, m.restarted
	d := s.desk()
	b.Read(&d.cloud, s.space, &d.work)
	in := summary.Input{
		TimeNS: m.p.TimeNS, Frame: s.space.Frame(), Belief: b, Cloud: &d.cloud,
		Speed: m.p.Speed, LogEvidence: m.p.LogEvidence, Accepted: m.p.Counts.Accepted, Refused: m.p.Counts.Refused,
		RestartMass: b.Restarted, Contradicted: m.p.Status == summary.Contradicted, Alarms: m.p.Alarms, Sensors: m.p.Sensors,
		Off: m.off, Lost: m.lost,
	}
	if p, ok := s.space.(filter.PlaneSpace); ok {
		in.OffMapMass = s.beyond(p)
	}
	if s.lines != nil {
		in.Lines = s.lines.Lines(b.Level)
	}
	if s.names != nil {
		in.Names = s.names
	}
	p := &summary.Posterior{}
	if err := sum.Summarize(p, &in); err != nil {
		panic("session: " + err.Error()) // a belief is never empty
	}
	p.GapS, p.LostAlarm = m.p.GapS, m.p.LostAlarm
	return p
}
