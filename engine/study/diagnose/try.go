package diagnose

import (
	"math"
	"slices"
)

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
	const fine = 100 // steps of one
	steps := fine * (len(c.rounds) + len(searches) + 1)
	progress := func(done int) {
		if o.Progress != nil {
			o.Progress(done, steps)
		}
	}
	rounds := len(c.rounds)
	c.tick = func(round int, share float64) { progress(fine*round + int(fine*share)) }
	c.mayCut = true
	es := c.race(ms)
	c.tick, c.mayCut = func(int, float64) {}, false
	base := es[0]
	if base.err != nil {
		return base.err
	}
	tried, found := c.sortOut(es[1:])
	for i := range searches {
		progress(fine * (rounds + i))
		s := &searches[i]
		e := found[s.family]
		if e == nil {
			continue
		}
		// A value beyond half a step from none has a coarse one that is nearer.
		if s.broadens() && e.mistake.Value == 0 {
			continue
		}
		if c.left() && c.finished(e) && (s.broadens() || c.better(e, base)) {
			if fine := c.refine(s, e); fine != nil {
				e = fine
			}
		}
		tried = append(tried, e)
		if c.left() && c.finished(e) && e.run.latest != nil {
			known := ran(c.race(s.grids(o.Grids, e.run.latest.Mean)))
			r.Tried += len(known)
			tried = append(tried, known...)
		}
	}
	c.compare(r, base, tried)
	progress(steps - fine)
	if more := c.factors(r, base); len(more) > 0 {
		tried = append(tried, more...)
		c.compare(r, base, tried)
	}
	if c.cutShort() {
		base, tried = c.finals(r, base, tried)
		c.compare(r, base, tried)
	}
	progress(steps)
	return nil
}

// compare fills a report with those that were tried.
func (c *course) compare(r *Report, base *entrant, tried []*entrant) {
	r.NeededNats = needed(r.Tried)
	r.Fits = base.run.log.fits(c.start)
	r.BaseGivenUpAfter = c.givenUp(base)
	r.Candidates = c.candidates(base, tried)
	r.challenge()
	r.judge()
}

// factors searches for factors of no usual unit, where what they challenge would be
// named or nothing is although the log is suspect: a unit may fit better than the log as
// it stands only because it is nearer. These are many, and so they come last.
func (c *course) factors(r *Report, base *entrant) (found []*entrant) {
	searches := factorScans(c.voices, c.suite)
	none := !slices.ContainsFunc(r.Candidates, func(k Candidate) bool { return k.Named })
	if none && c.finished(base) && len(c.suspicions(base)) == 0 {
		return nil
	}
	for i := range searches {
		s := &searches[i]
		challenged := func(k Candidate) bool { return k.Named && s.challenges(k.mistake) }
		if !c.left() || !none && !slices.ContainsFunc(r.Candidates, challenged) {
			continue
		}
		ms := s.coarse()
		if len(r.Candidates) > 0 { // the best so far, to fall behind of
			ms = append(ms, *r.Candidates[0].mistake)
		}
		var best *entrant
		for _, e := range ran(c.race(ms)) {
			if e.mistake.search == s && c.better(e, best) {
				best = e
			}
		}
		if best == nil || s.broadens() && best.mistake.Value == 0 { // as in tryAll
			continue
		}
		if c.finished(best) {
			if fine := c.refine(s, best); fine != nil {
				best = fine
			}
		}
		found = append(found, best)
	}
	return found
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
			Mistake: m.Name, Sensor: m.Sensor, Value: m.shown(), Unit: m.Unit, Remedy: m.Remedy,
			GainNats: e.gain(base, best), GivenUpAfter: c.givenUp(e), mistake: m,
			eligible: c.finished(e) && (m.search == nil || math.Abs(m.Value) >= m.search.least),
		}
		if k.eligible {
			k.Suspect = c.suspicions(e)
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
