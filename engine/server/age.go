package server

import (
	"time"

	leadlinev1 "leadline/proto/leadline/v1"
)

// ageSteps is in how many steps what is kept reaches its age.
const ageSteps = 16

// watchAge lets go what is older than it may be until the server stops; the
// journal does so by itself with what no drive needs.
func (s *Server) watchAge() {
	if s.cfg.KeepFor == 0 {
		return
	}
	tick := time.NewTicker(max(s.cfg.KeepFor/ageSteps, time.Millisecond))
	defer tick.Stop()
	for {
		select {
		case <-s.draining:
			return
		case <-tick.C:
			s.age(s.cfg.Now())
		}
	}
}

// age drops drives that nobody has fed for so long, and of the others what is
// too old.
func (s *Server) age(now time.Time) {
	s.mu.Lock()
	defer s.mu.Unlock()
	for vehicle, o := range s.owners {
		if o.streams > 0 || now.Sub(o.silentSince) < s.cfg.KeepFor {
			o.ageing.Store(true)
			o.rec.wake()
			continue
		}
		o.stop(refuse(leadlinev1.Reason_REASON_REPLACED, o.about(), "drive %q of vehicle %q has been silent for longer than the %v that anything is kept: open another drive", o.drive, vehicle, s.cfg.KeepFor))
		delete(s.owners, vehicle)
	}
	s.forgetEnded(func(d *endedDrive) bool { return now.Sub(d.silentSince) >= s.cfg.KeepFor })
	for vehicle, k := range s.kept {
		if now.Sub(k.lastAt) >= s.cfg.KeepFor {
			delete(s.kept, vehicle)
			s.dropLine(s.journal.Line(k.place))
		}
	}
}

// ageTrail takes out of a drive's past what is too old, by the drive's own time.
// It runs on the owner's goroutine.
func (o *owner) ageTrail() {
	if p := o.latest.Load(); p != nil && o.ageing.Swap(false) {
		o.trail.forget(p.TimeNS - int64(o.srv.cfg.KeepFor))
	}
}
