package server

import (
	"context"
	"encoding/json"
	"errors"

	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	"leadline/engine/journal"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// EraseVehicle erases what is kept of a vehicle: see the .proto file. Once it has
// begun it goes on without its caller, and if the server stops meanwhile it is
// done when it starts again: what is to go is written down first.
func (s *Server) EraseVehicle(ctx context.Context, req *leadlinev1.EraseVehicleRequest) (*leadlinev1.EraseVehicleResponse, error) {
	vehicle := req.GetVehicle()
	if vehicle == "" {
		return nil, badField("vehicle", "vehicle is missing: give the name that it was fed under")
	}
	if err := wire.Name("vehicle", vehicle); err != nil {
		return nil, badField("vehicle", "erase: %v", err)
	}
	o, marker, err := s.giveUp(vehicle)
	if err != nil {
		return nil, err
	}
	type end struct {
		resp *leadlinev1.EraseVehicleResponse
		err  error
	}
	ended := make(chan end, 1)
	go func() {
		defer s.ended.Done()
		whole, cancel := s.untilDraining(context.WithoutCancel(ctx))
		defer cancel()
		resp, err := s.erase(whole, vehicle, o, marker)
		if err != nil {
			s.cfg.Log.Error("vehicle cannot be erased", "vehicle", vehicle, "error", err)
		} else {
			s.cfg.Log.Info("vehicle erased", "vehicle", vehicle, "by", clip(by(ctx, "")), "drives", resp.GetDrives(), "records", resp.GetRecords())
		}
		ended <- end{resp, err}
	}()
	select {
	case e := <-ended:
		return e.resp, e.err
	case <-ctx.Done():
		return nil, status.FromContextError(ctx.Err()).Err()
	}
}

// giveUp takes a vehicle out of the server, whose drive ends at once, and begins
// the line of the journal that says so. Drives that are opened from then on are
// not erased. The caller owes s.ended a Done.
func (s *Server) giveUp(vehicle string) (*owner, *journal.Line, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.closed {
		return nil, nil, errStopping
	}
	if !s.has(vehicle) {
		return nil, nil, errMoved
	}
	s.ended.Add(1)
	o := s.owners[vehicle]
	if o != nil {
		o.stop(refuse(leadlinev1.Reason_REASON_ERASED, o.about(), "what was kept of vehicle %q has been erased, with its drive %q: open another drive", vehicle, o.drive))
	}
	delete(s.owners, vehicle)
	delete(s.kept, vehicle)
	s.forgetEnded(func(d *endedDrive) bool { return d.about.GetVehicle() == vehicle })
	if s.journal == nil {
		return o, nil, nil
	}
	return o, s.journal.Begin(vehicle), nil
}

// erase erases a vehicle that has been given up.
func (s *Server) erase(ctx context.Context, vehicle string, o *owner, marker *journal.Line) (*leadlinev1.EraseVehicleResponse, error) {
	resp := new(leadlinev1.EraseVehicleResponse)
	if o != nil {
		<-o.dead
		s.hub.erase(o.subject)
		resp.Drives = 1
	}
	s.alarms.forget(vehicle)
	if marker == nil {
		return resp, nil
	}
	written := make(chan error, 1)
	marker.Append(kindErase, []byte(vehicle), true, func(_ journal.At, err error) { written <- err })
	err := <-written
	if err == nil {
		var e journal.Erased
		e, err = s.eraseRecords(ctx, vehicle, marker)
		resp.Drives, resp.Records = uint32(e.Lines-1), uint64(e.Records-1) // without the marker
	}
	switch {
	case err == nil:
		return resp, nil
	case ctx.Err() != nil, errors.Is(err, journal.ErrClosed):
		return nil, errStopping
	case errors.Is(err, journal.ErrFull):
		return nil, refuse(leadlinev1.Reason_REASON_JOURNAL_FULL, about{"vehicle": vehicle}, "the server has no room to erase vehicle %q: %v: make room and ask again; its drive is given up", clip(vehicle), err)
	}
	return nil, refuse(leadlinev1.Reason_REASON_JOURNAL_DOWN, about{"vehicle": vehicle}, "the records of vehicle %q cannot be erased: %v: ask again later, or restart the server, which goes on with it; its drive is given up", clip(vehicle), err)
}

// eraseRecords erases all of a vehicle's lines that began before a marker, and
// the marker.
func (s *Server) eraseRecords(ctx context.Context, vehicle string, marker *journal.Line) (journal.Erased, error) {
	return s.journal.Erase(ctx, marker, func(r journal.Record) bool {
		var opened openedRecord
		switch r.Kind {
		case kindErase: // one that was asked before
			return string(r.Data) == vehicle
		case kindOpened:
			if json.Unmarshal(r.Data, &opened) != nil {
				return false // it is damaged, and named when the journal is opened
			}
		case kindCheckpoint, kindWholeCheck:
			check, _, err := checkpointOf(r.Data)
			if err != nil {
				return false
			}
			opened = check.Opened
		default:
			return false
		}
		open := new(leadlinev1.Open)
		return proto.Unmarshal(opened.Open, open) == nil && open.GetHeader().GetVehicle() == vehicle
	})
}
