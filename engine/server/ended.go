package server

import (
	"cmp"
	"context"
	"encoding/base64"
	"slices"
	"strings"
	"time"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"

	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Bounds of what is kept of drives that have ended and made room for others.
const (
	maxEnded       = 1000
	maxTrailAlarms = 100
)

// endedDrive is a drive that has ended, and made room for another.
type endedDrive struct {
	about *leadlinev1.EndedDrive
	trail []byte // its TrailResponse, packed
	// silentSince is when the last measurement may have come.
	silentSince time.Time
}

// order is by vehicle, and then by when they were opened.
func (d *endedDrive) order() string {
	return d.about.GetVehicle() + "\x00" + d.about.GetOpenedAt().AsTime().UTC().Format("2006-01-02T15:04:05.000000000") + "\x00" + d.about.GetDrive()
}

// packTrail is what a drive was like, as it is written down.
func packTrail(m *leadlinev1.TrailResponse) []byte {
	data, err := proto.Marshal(m)
	if err != nil {
		panic("server: " + err.Error()) // names have been checked
	}
	return packer().EncodeAll(data, nil)
}

func unpackTrail(data []byte) (*leadlinev1.TrailResponse, error) {
	text, err := unpacker().DecodeAll(data, nil)
	if err != nil {
		return nil, err
	}
	m := new(leadlinev1.TrailResponse)
	return m, proto.Unmarshal(text, m)
}

// keepEnded keeps what a drive was like that has ended and makes room for another. s.mu is
// held.
func (s *Server) keepEnded(o *owner) {
	if o.past == nil {
		return
	}
	d := &leadlinev1.EndedDrive{Vehicle: o.vehicle, Drive: o.drive, Map: o.m.Name, OpenedAt: timestamppb.New(o.openedAt)}
	if p := o.latest.Load(); p != nil {
		d.Time = timestamppb.New(time.Unix(0, p.TimeNS))
	}
	s.addEnded(&endedDrive{d, o.past, o.silentSince})
}

// addEnded puts a drive in its place. Where there are too many the one goes that was opened
// first. s.mu is held.
func (s *Server) addEnded(d *endedDrive) {
	i, there := slices.BinarySearchFunc(s.past, d.order(), func(e *endedDrive, at string) int { return cmp.Compare(e.order(), at) })
	if there {
		return
	}
	s.past = slices.Insert(s.past, i, d)
	if len(s.past) <= maxEnded {
		return
	}
	first := slices.MinFunc(s.past, func(a, b *endedDrive) int {
		return a.about.GetOpenedAt().AsTime().Compare(b.about.GetOpenedAt().AsTime())
	})
	s.forgetEnded(func(e *endedDrive) bool { return e == first })
}

// forgetEnded takes drives out. s.mu is held.
func (s *Server) forgetEnded(which func(*endedDrive) bool) {
	s.past = slices.DeleteFunc(s.past, which)
}

// findEnded keeps what a drive of the journal was like, if it had ended and says so.
func (s *Server) findEnded(h *history) {
	if h.open == nil || h.check == nil || !h.check.Ended || h.check.Trail == nil {
		return
	}
	d := &leadlinev1.EndedDrive{
		Vehicle: h.vehicle(), Drive: h.open.GetDrive(), Map: h.open.GetHeader().GetMap(), OpenedAt: timestamppb.New(h.opened.OpenedAt),
	}
	m, err := unpackTrail(h.check.Trail)
	if err != nil {
		s.cfg.Log.Error("what an ended drive was like cannot be read", "vehicle", h.vehicle(), "drive", d.GetDrive(), "error", err)
		return
	}
	if n := len(m.GetPoints()); n > 0 {
		d.Time = m.GetPoints()[n-1].GetTime()
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	s.addEnded(&endedDrive{d, h.check.Trail, h.lastAt})
}

// endedTrail says what a drive was like that has ended.
func (s *Server) endedTrail(vehicle, drive string) (*leadlinev1.TrailResponse, error) {
	s.mu.Lock()
	var packed []byte
	for _, d := range s.past { // the last one of the name
		if d.about.GetVehicle() == vehicle && d.about.GetDrive() == drive {
			packed = d.trail
		}
	}
	s.mu.Unlock()
	if packed == nil {
		return nil, refuse(leadlinev1.Reason_REASON_UNKNOWN_DRIVE, about{"vehicle": vehicle, "drive": drive}, "drive %q of vehicle %q is not kept any more, or was never here: ListEndedDrives says which are", clip(drive), clip(vehicle))
	}
	return unpackTrail(packed)
}

// ListEndedDrives says which drives have ended that are told of: see the .proto file.
func (s *Server) ListEndedDrives(ctx context.Context, req *leadlinev1.ListEndedDrivesRequest) (*leadlinev1.ListEndedDrivesResponse, error) {
	size := cmp.Or(int(req.GetPageSize()), defaultPage)
	if size > maxPage {
		return nil, badField("page_size", "page_size %d: at most %d", size, maxPage)
	}
	after, err := base64.RawURLEncoding.DecodeString(req.GetPageToken())
	if err != nil || len(after) > 3*wire.MaxName {
		return nil, refuse(leadlinev1.Reason_REASON_BAD_TOKEN, about{"field": "page_token"}, "page_token is none: give next_page_token of the page before, or leave it out")
	}
	pages, err := fromAll(ctx, s, "", func(ctx context.Context, c leadlinev1.PositionServiceClient) (*leadlinev1.ListEndedDrivesResponse, error) {
		return c.ListEndedDrives(ctx, req)
	})
	if err != nil {
		return nil, err
	}
	var all []*leadlinev1.EndedDrive
	more := false
	for _, p := range pages {
		all, more = append(all, p.GetDrives()...), more || p.GetNextPageToken() != ""
	}
	s.mu.Lock()
	here := 0
	for _, d := range s.past {
		if d.order() > string(after) && here <= size {
			all = append(all, d.about)
			here++
		}
	}
	s.mu.Unlock()
	order := func(d *leadlinev1.EndedDrive) string { return (&endedDrive{about: d}).order() }
	slices.SortFunc(all, func(a, b *leadlinev1.EndedDrive) int { return strings.Compare(order(a), order(b)) })
	out := &leadlinev1.ListEndedDrivesResponse{Drives: all}
	if len(all) > size {
		out.Drives, more = all[:size], true
	}
	if n := len(out.Drives); more && n > 0 {
		out.NextPageToken = base64.RawURLEncoding.EncodeToString([]byte(order(out.Drives[n-1])))
	}
	return out, nil
}
