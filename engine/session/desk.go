package session

import (
	"sync"

	"leadline/engine/filter"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// desk is what a session works with beside its belief: memory whose content means
// nothing from one use to the next, but for what sum has seen (Session.fresh) and
// what the workspace records (filter.Workspace.Record).
type desk struct {
	work   filter.Workspace
	room   filter.Gaussians // for those of the belief; if they are lodged, what they were in
	lodged bool
	cloud  filter.Cloud
	ground filter.Columns // under the cloud, on a plane
	sum    summary.Summarizer
	// The motion's step, that of what is beside the belief, the comparison with the road.
	step, aside filter.Step
	alignment   sensor.Alignment
	widest      int // the most cells of a belief that it was used for
}

// Desks are what many sessions work with by turns, who all do little at a time: each
// takes one when it works, and gives it back by Rest. The zero value is ready.
type Desks struct{ pool sync.Pool }

// deskCells is up to how many cells the belief of one session may have had for others
// to go on with its desk: each that works at the same time has one as large.
const deskCells = 1 << 14

// desk is what the session works with until it rests.
func (s *Session) desk() *desk {
	if s.own != nil {
		return s.own
	}
	if s.desks != nil {
		s.own, _ = s.desks.pool.Get().(*desk)
	}
	if s.own == nil {
		s.own = new(desk)
	}
	s.fresh = false
	s.own.work.Depart(s.rates.off > 0)
	s.own.sum.Set(s.shown())
	if s.own.lodged = s.desks != nil && s.state.belief.Cells() <= deskCells; s.own.lodged {
		s.state.belief.Lodge(&s.own.room)
	}
	return s.own
}

// shown is how posteriors are summed up.
func (s *Session) shown() summary.Options {
	v := &s.suite.Vehicle
	return summary.Options{AlertLimitM: v.AlertLimitM, IntegrityRisk: v.IntegrityRisk, LateralSigmaM: v.LateralSigmaM}
}

// Rest gives back the memory that a session works with beside its belief, for
// who keeps many of them; it takes that again when it goes on, as it would have.
func (s *Session) Rest() {
	d := s.own
	if d == nil {
		return
	}
	if s.desks == nil {
		s.clearDesk()
		return
	}
	s.own = nil
	if d.lodged {
		s.state.belief.Lodge(&d.room)
	}
	s.state.belief.Clip()
	s.state.aside.loose.Clip()
	if d.widest <= deskCells {
		s.desks.pool.Put(d)
	}
}

// clearDesk gives back the memory on the desk, which stays the session's.
func (s *Session) clearDesk() {
	d := s.own
	d.work.Release()
	*d = desk{work: d.work} // which may record
	d.sum.Set(s.shown())
	s.fresh = false
}
