package replay

import (
	"leadline/engine/filter"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
)

// fixes gives each satellite fix away with what was known just before it.
type fixes struct {
	s    *session.Session
	sum  *summary.Summarizer
	give func(sensor.Event, *summary.Posterior)
	due  []sensor.Event // by time
	post summary.Posterior
}

// fixesBackS is how long a fix is kept in case that the session goes back.
const fixesBackS = 120

func newFixes(c session.Config, s *session.Session, give func(sensor.Event, *summary.Posterior)) (*fixes, error) {
	dim := 2
	if _, ok := c.Space.(filter.LineSpace); ok {
		dim = 1
	}
	suite := sensor.Default(dim)
	if c.Suite != nil {
		suite = c.Suite.For(dim)
	}
	v := suite.Vehicle
	sum, err := summary.New(summary.Options{AlertLimitM: v.AlertLimitM, IntegrityRisk: v.IntegrityRisk, LateralSigmaM: v.LateralSigmaM})
	return &fixes{s: s, sum: sum, give: give}, err
}

// expect notes an event that is about to be added.
func (f *fixes) expect(ev sensor.Event) {
	if ev.Measurement.Kind() != sensor.KindFix {
		return
	}
	old := 0
	for old < len(f.due) && ev.Time.Seconds(f.due[old].Time) > fixesBackS {
		old++
	}
	if old > 256 {
		f.due = append(f.due[:0], f.due[old:]...)
	}
	f.due = append(f.due, ev)
}

// watch looks at a belief that has moved to a fix's time.
func (f *fixes) watch(c session.Change) {
	if c.Likelihood != nil {
		return
	}
	read := false
	for i := len(f.due) - 1; i >= 0 && f.due[i].Time >= c.Time; i-- {
		if f.due[i].Time != c.Time {
			continue
		}
		if !read && f.s.Summarize(f.sum, &f.post) != nil {
			return
		}
		read, f.post.TimeNS = true, int64(c.Time)
		f.give(f.due[i], &f.post)
	}
}
