package server

import (
	"leadline/engine/sensor"
	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// What an owner tells those who follow its vehicle.

// newSubject is a drive as followers will see it.
func (o *owner) newSubject() *subject {
	dim := 2
	if o.m.onRoads() {
		dim = 1
	}
	suite := o.srv.cfg.Suites[o.header.GetSuite()]
	if suite == nil {
		suite = &sensor.Suite{}
	}
	v := suite.For(dim).Vehicle
	sub := &subject{
		vehicle: o.vehicle, drive: o.drive, onMap: o.m.Map, poke: make(chan struct{}, 1),
		// Within the window, and as long as what is computed again then may
		// take; twice that, since it costs little.
		lateNS: int64(2e9 * (v.LateWindowS + v.HoldS)),
	}
	if o.isRoad() {
		sub.gone, sub.end = true, &leadlinev1.Farewell{} // those who follow vehicles hear nothing of it
	}
	return sub
}

// begins has those who follow hear of a drive.
func (s *Server) begins(o *owner) {
	if o.isRoad() {
		s.roads.put(o, false)
	} else if !o.subject.gone {
		s.hub.begin(o.subject)
	}
}

// told hears what the session has released, and what it has taken back: times
// that were released before. It runs on the owner's goroutine after each
// measurement, in order.
func (o *owner) told(released []*summary.Posterior, withdrawn []sensor.Time) {
	o.srv.hub.told(o.subject, released, withdrawn, o.sess.Latest(), o.malformed, o.extras)
}

// farewell hears once that the drive has ended, or that its owner stops before
// that, and why. It runs on the owner's goroutine.
func (o *owner) farewell(ended bool, hash, why string) {
	fw := &leadlinev1.Farewell{Ended: ended, PosteriorSha256: hash, Reason: why}
	if ended && o.isRoad() {
		o.srv.roads.put(o, true)
	}
	if ended {
		o.srv.hub.farewell(o.subject, fw, o.extras)
	} else {
		o.srv.hub.farewell(o.subject, fw, nil)
	}
}
