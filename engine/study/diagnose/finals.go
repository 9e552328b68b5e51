package diagnose

// finalists is how many go on to the whole opening where the others had to stop
// before: the budget is for all, and a few cost little.
const finalists = 6

// finals runs the log as it stands and the best of those who were stopped short
// of the opening's end over all of it; it returns the former and the others with
// the latter in their places. A start anywhere tells little in its first minute:
// whoever is ahead there may be in the wrong place, and fall behind where the log
// as it is meant would be located.
func (c *course) finals(r *Report, base *entrant, tried []*entrant) (*entrant, []*entrant) {
	ms := []Mistake{*base.mistake}
	for i := range r.Candidates { // best first
		if k := &r.Candidates[i]; k.GivenUpAfter == nil && len(ms) <= finalists {
			ms = append(ms, *k.mistake)
		}
	}
	c.rounds = c.whole
	es := c.race(ms)
	if len(es[0].nats) >= len(base.nats) {
		base = es[0]
	}
	var out []*entrant
	for _, e := range tried {
		if !again(ms, e.mistake) {
			out = append(out, e)
		}
	}
	return base, append(out, ran(es[1:])...)
}

// again reports whether a mistake, its value included, is among some.
func again(ms []Mistake, m *Mistake) bool {
	for i := range ms {
		if ms[i].Name == m.Name && ms[i].Sensor == m.Sensor && ms[i].Value == m.Value {
			return true
		}
	}
	return false
}
