package diagnose

import "math"

// tryAll tries all mistakes that a log may hold, and fills the report.
func (c *course) tryAll(r *Report, o Options) error {
	discrete := catalogue(c.voices)
	ms := append([]Mistake{{}}, discrete...) // the log as it stands is the first
	searches := scans(c.voices, c.suite)
	r.Tried = len(discrete)
	for i := range searches {
		r.Tried += searches[i].values()
		ms = append(ms, searches[i].coarse()...)
	}
	done, steps := 0, len(c.rounds)+len(searches)
	progress := func() {
		if done++; o.Progress != nil {
			o.Progress(done, steps)
		}
	}
	c.tick = progress
	es := c.race(ms)
	c.tick = func() {}
	base := es[0]
	if base.err != nil {
		return base.err
	}
	tried, found := c.sortOut(es[1:])
	for i := range searches {
		progress()
		s := &searches[i]
		e := found[s.family]
		if e == nil {
			continue
		}
		// A value beyond half a step from none has a coarse one that is nearer.
		if s.broadens() && e.mistake.Value == 0 {
			continue
		}
		if c.finished(e) && (s.broadens() || c.better(e, base)) {
			if fine := c.refine(s, e); fine != nil {
				e = fine
			}
		}
		tried = append(tried, e)
		if c.finished(e) && e.run.latest != nil {
			known := ran(c.race(s.grids(o.Grids, e.run.latest.Mean)))
			r.Tried += len(known)
			tried = append(tried, known...)
		}
	}
	r.NeededNats = needed(r.Tried)
	r.Fits = base.run.log.fits(c.start)
	r.BaseGivenUpAfter = c.givenUp(base)
	r.Candidates = c.candidates(base, tried)
	r.judge()
	return nil
}

// ran leaves out who did not even begin.
func ran(es []*entrant) []*entrant {
	var out []*entrant
	for _, e := range es {
		if len(e.nats) > 0 {
			out = append(out, e)
		}
	}
	return out
}

// sortOut returns those that stand for themselves, in order, and the best of
// each family.
func (c *course) sortOut(es []*entrant) (tried []*entrant, found map[string]*entrant) {
	found = map[string]*entrant{} // looked up only
	for _, e := range ran(es) {
		switch {
		case e.mistake.search == nil:
			tried = append(tried, e)
		case c.better(e, found[e.mistake.family]):
			found[e.mistake.family] = e
		}
	}
	return tried, found
}

// candidates compares those tried with the log as it stands.
func (c *course) candidates(base *entrant, tried []*entrant) []Candidate {
	best := base
	for _, e := range tried {
		if c.better(e, best) {
			best = e
		}
	}
	var out []Candidate
	for _, e := range tried {
		m := e.mistake
		k := Candidate{
			Mistake: m.Name, Sensor: m.Sensor, Value: m.Value, Unit: m.Unit, Remedy: m.Remedy,
			GainNats: e.gain(base, best), GivenUpAfter: c.givenUp(e), mistake: m,
			eligible: c.finished(e) && (m.search == nil || math.Abs(m.Value) >= m.search.least),
		}
		for _, f := range e.run.log.fits(c.start) {
			if f.Bad {
				k.Bad = append(k.Bad, f.Sensor)
			}
		}
		out = append(out, k)
	}
	return out
}

// givenUp is when an entrant was dropped, nil if it was not.
func (c *course) givenUp(e *entrant) *float64 {
	if c.finished(e) {
		return nil
	}
	after := c.rounds[len(e.nats)-1].Seconds(c.start)
	return &after
}
