package server

import (
	"context"
	"fmt"
	"runtime/debug"

	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	"leadline/engine/filter"
	"leadline/engine/session"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// fingerprint is that of the map's space. A road's traffic has none: what it is on,
// its suite describes.
func (m Map) fingerprint() string {
	if m.Space == nil {
		return ""
	}
	return m.Space.Fingerprint()
}

// onRoads reports whether the map is made of roads, as a road's traffic is.
func (m Map) onRoads() bool {
	if m.Space == nil {
		return true
	}
	_, ok := m.Space.(filter.LineSpace)
	return ok
}

// open finds the owner of a drive, or makes one. The caller must give it back
// with leave.
func (s *Server) open(ctx context.Context, req *leadlinev1.Open) (*owner, error) {
	h, err := wire.ToHeader(req.GetHeader())
	if err != nil {
		return nil, badField("open.header", "open: header: %v", err)
	}
	if req.GetDrive() == "" {
		return nil, badField("open.drive", "open: drive is missing: give each drive a new name")
	}
	if err := wire.Name("drive", req.GetDrive()); err != nil {
		return nil, badField("open.drive", "open: %v", err)
	}
	if _, ok := leadlinev1.Reply_name[int32(req.GetReply())]; !ok {
		return nil, badField("open.reply", "open: reply is %d: give one of those that feed.proto names", req.GetReply())
	}
	m := &mapUse{sessions: 1} // of a road's traffic
	if !h.Traffic {
		if m = s.mapNamed(ctx, h.Map); m == nil {
			return nil, s.unknownMap(h.Map)
		}
	}
	defer s.releaseMap(m) // the owner holds it for itself
	suite := s.cfg.Suites[h.Suite]
	if h.Suite != "" && suite == nil {
		return nil, s.unknownSuite(h.Suite)
	}
	if o, err := s.resume(req); o != nil || err != nil {
		return o, err
	}
	if n := req.GetAcknowledged(); n > 0 {
		return nil, lostAcknowledged(about{"vehicle": h.Vehicle, "drive": req.GetDrive()}, n, 0)
	}
	if err := s.mayOpen(); err != nil {
		return nil, err
	}
	select {
	case s.openings <- struct{}{}:
	case <-ctx.Done():
		return nil, status.FromContextError(ctx.Err()).Err()
	case <-s.draining:
		return nil, errStopping
	}
	opened, err := s.opening(req, m)
	if err != nil {
		return nil, badField("open", "open: %v", err)
	}
	beside := &searches{slots: s.searching, waiting: &s.searchesWaiting}
	sess, err := s.newSession(h.Traffic, session.Config{
		Vehicle: h.Vehicle, Space: m.Space, Names: m.Names, Suite: suite,
		Start: start(h.Start), PosteriorS: h.PosteriorS, MaxCells: s.cfg.MaxCells, Begin: beside.begin, Desks: &s.desks,
	})
	<-s.openings
	if err != nil {
		return nil, err
	}
	return s.admit(req, m, sess, beside, opened)
}

// newSession makes a session, and turns whatever goes wrong into a status.
func (s *Server) newSession(road bool, c session.Config) (sess Session, err error) {
	defer func() {
		if r := recover(); r != nil {
			s.cfg.Log.Error("session cannot be made", "vehicle", c.Vehicle, "panic", r, "stack", string(debug.Stack()))
			err = refuse(leadlinev1.Reason_REASON_SESSION_FAILED, about{"vehicle": c.Vehicle}, "open: the session of vehicle %q failed: report it with the server's log", c.Vehicle)
		}
	}()
	if road {
		sess, err = newRoadSession(c.Suite)
	} else {
		sess, err = s.cfg.NewSession(c)
	}
	if err != nil {
		return nil, refuse(leadlinev1.Reason_REASON_BAD_START, about{"vehicle": c.Vehicle}, "open: header: %v", err)
	}
	return sess, nil
}

func start(w wire.Start) session.Start {
	s := session.Start{Kind: session.Anywhere, Point: w.Point, SigmaM: w.SigmaM, Area: w.Area}
	switch {
	case w.SigmaM > 0:
		s.Kind = session.AtPoint
	case len(w.Area) > 0:
		s.Kind = session.InArea
	}
	return s
}

// resume returns the owner of a drive that is open already; nil if there is
// none and one may be made.
func (s *Server) resume(req *leadlinev1.Open) (*owner, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.resumeLocked(req)
}

func (s *Server) resumeLocked(req *leadlinev1.Open) (*owner, error) {
	if s.closed {
		return nil, errStopping
	}
	if !s.has(req.GetHeader().GetVehicle()) {
		return nil, errMoved
	}
	o := s.owners[req.GetHeader().GetVehicle()]
	switch {
	case o == nil && s.kept[req.GetHeader().GetVehicle()] != nil && !req.GetReplace():
		return nil, s.kept[req.GetHeader().GetVehicle()].err
	case o == nil:
		return nil, nil
	case o.drive == req.GetDrive():
		if !proto.Equal(o.header, req.GetHeader()) {
			return nil, refuse(leadlinev1.Reason_REASON_OTHER_HEADER, o.about(), "open: drive %q of vehicle %q was opened with another header: give the same one, or the drive another name", o.drive, o.vehicle)
		}
		o.streams++
		return o, nil
	case !o.finished && !req.GetReplace():
		return nil, refuse(leadlinev1.Reason_REASON_OTHER_DRIVE, o.about(), "open: vehicle %q has an unfinished drive %q: end that one, or set replace to give it up", o.vehicle, o.drive)
	}
	return nil, nil
}

// admit makes an owner of a session, unless another stream was faster.
func (s *Server) admit(req *leadlinev1.Open, m *mapUse, sess Session, beside *searches, opened openedRecord) (*owner, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if o, err := s.resumeLocked(req); o != nil || err != nil {
		return o, err
	}
	vehicle := req.GetHeader().GetVehicle()
	if old := s.owners[vehicle]; old != nil {
		s.keepEnded(old)
		old.stop(refuse(leadlinev1.Reason_REASON_REPLACED, old.about(), "vehicle %q has opened drive %q in place of drive %q", vehicle, req.GetDrive(), old.drive))
	} else if len(s.owners) >= s.cfg.Limits.Vehicles && !s.makeRoom() {
		return nil, full("vehicles", s.cfg.Limits.Vehicles, "open: the server has its %d vehicles, all of them on a drive: try later, or raise the limit", s.cfg.Limits.Vehicles)
	}
	o := newOwner(s, req, m, sess, beside)
	if old := s.owners[vehicle]; old != nil {
		o.pace = old.pace // another drive is no way to be faster
	}
	s.record(o, opened)
	s.owners[vehicle] = o
	s.atlas.hold(m)
	s.begins(o)
	s.ended.Add(1)
	o.log.Info("drive opened", "map", m.Name, "suite", req.GetHeader().GetSuite())
	s.runs(o)
	return o, nil
}

// makeRoom drops the session that has been idle longest, if one may go.
func (s *Server) makeRoom() bool {
	now := s.cfg.Now()
	var oldest *owner
	for _, o := range s.owners {
		if o.streams > 0 || !o.finished && now.Sub(o.idleSince) < s.cfg.Limits.IdleTimeout {
			continue
		}
		if oldest == nil || o.idleSince.Before(oldest.idleSince) {
			oldest = o
		}
	}
	if oldest == nil {
		return false
	}
	how := "was idle, and dropped to make room: open another drive"
	if oldest.finished {
		s.keepEnded(oldest)
		how = "had ended, and makes room for another vehicle's"
	}
	oldest.stop(refuse(leadlinev1.Reason_REASON_REPLACED, oldest.about(), "drive %q of vehicle %q %s", oldest.drive, oldest.vehicle, how))
	delete(s.owners, oldest.vehicle)
	return true
}

// leave gives back an owner that open returned.
func (s *Server) leave(o *owner) {
	s.mu.Lock()
	defer s.mu.Unlock()
	o.streams--
	o.idleSince = s.cfg.Now()
	o.silentSince = o.idleSince
}

// finish notes that a drive has ended, and what it was like.
func (s *Server) finish(o *owner, past []byte) {
	s.mu.Lock()
	defer s.mu.Unlock()
	o.finished, o.past = true, past
}

// forget takes an owner out, if it is still the vehicle's.
func (s *Server) forget(o *owner) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.owners[o.vehicle] == o {
		delete(s.owners, o.vehicle)
	}
}

// find returns the owner of a vehicle.
func (s *Server) find(vehicle string) (*owner, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	o := s.owners[vehicle]
	if o == nil {
		what := fmt.Sprintf("there is no vehicle %q here", clip(vehicle))
		if n := len(s.owners); n == 0 {
			what += " and no other"
		}
		return nil, refuse(leadlinev1.Reason_REASON_UNKNOWN_VEHICLE, about{"vehicle": vehicle}, "%s: feed it first, under the same name", what)
	}
	return o, nil
}
