package server

import (
	"crypto/rand"
	"slices"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

var (
	errTooSlow           = refuse(leadlinev1.Reason_REASON_SERVER_FULL, about{"limit": "follower"}, "follow: so much waits for this stream that it is given up: follow again without a token, and read faster")
	errFollowedElsewhere = refuse(leadlinev1.Reason_REASON_TAKEN_OVER, nil, "follow: another stream has resumed this one: only one may read it")
)

// Bounds of a Follow request, beside those of Limits.
const (
	maxIntervalS   = 3600
	maxAreaCorners = 1000 // each belief is weighed against all of them
	maxAreaM       = 2e6  // from the first corner to any other
	defaultInside  = 0.05
	defaultRegion  = 0.95
)

// Follow tells of vehicles: see the .proto file.
func (s *Server) Follow(req *leadlinev1.FollowRequest, stream grpc.ServerStreamingServer[leadlinev1.FollowResponse]) error {
	if s.shared != nil && !forwarded(stream.Context()) {
		return s.followAll(req, stream)
	}
	return s.followHere(req, stream)
}

// followHere tells of the vehicles that this server has.
func (s *Server) followHere(req *leadlinev1.FollowRequest, stream grpc.ServerStreamingServer[leadlinev1.FollowResponse]) error {
	f, reader, err := s.hub.follow(req)
	if err != nil {
		return err
	}
	defer s.hub.leave(f, reader)
	alarms := &alarmReader{} // of nothing
	if req.GetAlarms() {
		r := s.alarms.read()
		defer s.alarms.leave(r)
		alarms = r
	}
	roads := &roadReader{}
	if req.GetRoads() {
		roads = s.roads.reader()
		defer roads.close()
	}
	token := req.GetResumeToken()
	ctx := stream.Context()
	timer := time.NewTimer(time.Hour)
	defer timer.Stop()
	for {
		select {
		case <-s.draining:
			return errStopping
		case <-reader:
			return errFollowedElsewhere
		default:
		}
		if a := s.alarms.take(alarms); a != nil {
			if err := stream.Send(&leadlinev1.FollowResponse{Vehicle: a.GetVehicle(), News: &leadlinev1.FollowResponse_Alarm{Alarm: a}, ResumeToken: token}); err != nil {
				return err
			}
			continue
		}
		if m := roads.take(); m != nil {
			if err := stream.Send(&leadlinev1.FollowResponse{Vehicle: m.GetVehicle(), Drive: m.GetDrive(), News: m.GetNews(), ResumeToken: token}); err != nil {
				return err
			}
			continue
		}
		u, again, err := s.hub.take(f, reader)
		if err != nil {
			return err
		}
		if u != nil {
			m := s.followed(f, u)
			token = m.GetResumeToken()
			s.cfg.Metrics.Skipped(u.skipped)
			if err := stream.Send(m); err != nil {
				return err
			}
			continue
		}
		wait := time.Hour
		if !again.IsZero() {
			wait = max(again.Sub(s.cfg.Now()), time.Millisecond)
		}
		timer.Reset(wait)
		select {
		case <-f.wake:
		case <-alarms.wake:
		case <-roads.wake:
		case <-timer.C:
		case <-reader:
			return errFollowedElsewhere
		case <-s.draining:
			return errStopping
		case <-ctx.Done():
			return status.FromContextError(ctx.Err()).Err()
		}
	}
}

// newFollower checks a request.
func (h *hub) newFollower(req *leadlinev1.FollowRequest) (*follower, error) {
	f := &follower{hub: h, request: proto.CloneOf(req), changesOnly: req.GetStatusChangesOnly(), wake: make(chan struct{}, 1), slots: map[string]*slot{}}
	f.request.ResumeToken = ""
	if n, most := len(req.GetVehicles()), h.limits.Vehicles; n > most {
		return nil, badField("vehicles", "follow: %d vehicles: at most %d; name none to follow all", n, most)
	}
	for _, v := range req.GetVehicles() {
		if v == "" {
			return nil, badField("vehicles", "follow: a vehicle has no name: give the name it is fed under, or name none to follow all")
		}
		if err := wire.Name("vehicles", v); err != nil {
			return nil, badField("vehicles", "follow: %v", err)
		}
		if f.vehicles == nil {
			f.vehicles = map[string]bool{}
		}
		f.vehicles[v] = true
	}
	s := req.GetMinIntervalS()
	if !(s >= 0 && s <= maxIntervalS) {
		return nil, badField("min_interval_s", "follow: min_interval_s %v: it must be from 0 to %d", s, maxIntervalS)
	}
	f.interval = time.Duration(s * 1e9)
	switch req.GetDetail() {
	case leadlinev1.Detail_DETAIL_UNSPECIFIED, leadlinev1.Detail_DETAIL_SUMMARY, leadlinev1.Detail_DETAIL_MODES:
	case leadlinev1.Detail_DETAIL_REGION:
		f.asking.fractions = []float64{defaultRegion}
	case leadlinev1.Detail_DETAIL_BELIEF:
		f.asking.belief = &usual
		if n := req.GetBeliefCells(); n > maxBeliefCells {
			return nil, badField("belief_cells", "follow: belief_cells %d: at most %d", n, maxBeliefCells)
		} else if n > 0 {
			f.asking.belief = &picture{gridCells: int(n), roadCells: min(int(n), maxRoadCells), packed: true}
		}
	default:
		return nil, badField("detail", "follow: detail %d is none: give one of the four", req.GetDetail())
	}
	if req.GetBeliefCells() > 0 && f.asking.belief == nil {
		return nil, badField("belief_cells", "follow: belief_cells without DETAIL_BELIEF: ask for that detail, or leave it out")
	}
	if fs := req.GetRegionFractions(); len(fs) > 0 {
		if f.asking.fractions == nil {
			return nil, badField("region_fractions", "follow: region_fractions without DETAIL_REGION: ask for that detail, or leave them out")
		}
		if n, most := len(fs), h.limits.Regions; n > most {
			return nil, badField("region_fractions", "follow: %d region_fractions: at most %d", n, most)
		}
		for _, v := range fs {
			if !(v > 0 && v < 1) {
				return nil, badField("region_fractions", "follow: region_fractions: %v: it must be above 0 and below 1", v)
			}
		}
		f.asking.fractions = slices.Clone(fs)
	}
	switch {
	case req.GetArea() != nil:
		a, err := newArea(req.GetArea())
		if err != nil {
			return nil, badField("area", "follow: area: %v", err)
		}
		if req.AreaProbability != nil {
			if a.least = req.GetAreaProbability(); !(a.least > 0 && a.least <= 1) {
				return nil, badField("area_probability", "follow: area_probability %v: it must be above 0 and at most 1", a.least)
			}
		}
		f.asking.area = a
	case req.AreaProbability != nil:
		return nil, badField("area_probability", "follow: area_probability without an area: give the area, or leave it out")
	}
	return f, nil
}

// follow makes a follower, or finds the one that a token tells of, and returns
// it with the channel that is closed when another stream takes over.
func (h *hub) follow(req *leadlinev1.FollowRequest) (*follower, chan struct{}, error) {
	f, err := h.newFollower(req)
	if err != nil {
		return nil, nil, err
	}
	reader := make(chan struct{})
	h.mu.Lock()
	defer h.mu.Unlock()
	h.expire()
	if req.GetResumeToken() != "" {
		f, err := h.resume(req.GetResumeToken(), f.request, reader)
		return f, reader, err
	}
	if err := h.mayRead(); err != nil {
		return nil, nil, err
	}
	_, _ = rand.Read(f.id[:])
	f.reader = reader
	h.reading++
	h.streams[f.id] = f
	if f.vehicles == nil {
		h.all = append(slices.Clip(h.all), f)
	}
	for v := range f.vehicles {
		h.named[v] = append(slices.Clip(h.named[v]), f)
	}
	now := h.now()
	for _, sub := range h.known(f) {
		f.meet(sub, now)
	}
	return f, reader, nil
}

// meet gives a new follower the present state of a drive.
func (f *follower) meet(sub *subject, now time.Time) {
	if sub.latest != nil {
		f.offer(sub.latest, now, true)
	}
	if s := f.slots[sub.vehicle]; s != nil && s.asked {
		f.ask(s)
	}
	if sub.end != nil {
		f.over(sub)
	}
}

func (h *hub) mayRead() error {
	if most := h.limits.Followers; h.reading >= most {
		return full("followers", most, "follow: the server has its %d followers: try later, or raise the limit", most)
	}
	return nil
}

// take returns what a follower is to be told next, to the stream that reads.
func (h *hub) take(f *follower, reader chan struct{}) (*update, time.Time, error) {
	h.mu.Lock()
	defer h.mu.Unlock()
	switch {
	case f.err != nil:
		return nil, time.Time{}, f.err
	case f.reader != reader:
		return nil, time.Time{}, errFollowedElsewhere
	}
	u, again := f.take(h.now())
	return u, again, nil
}

// followed makes the message of an update.
func (s *Server) followed(f *follower, u *update) *leadlinev1.FollowResponse {
	m := &leadlinev1.FollowResponse{
		Vehicle: u.of.vehicle, Drive: u.of.drive, Skipped: u.skipped, ResumeToken: s.hub.token(f.id, u.number),
	}
	switch n := u.posterior; {
	case n != nil:
		p := s.message(n.p, u.of.vehicle, u.of.onMap, n.malformed, s.cfg.Now())
		p.Recomputed = u.of.recomputed
		if d := f.request.GetDetail(); d == leadlinev1.Detail_DETAIL_UNSPECIFIED || d == leadlinev1.Detail_DETAIL_SUMMARY {
			p.Modes, p.Edges, p.Evidence = nil, nil, nil
		}
		if x := n.extra; x != nil {
			if p.Regions, m.Belief = x.regions, x.belief; x.belief != nil {
				m.Recent = u.of.recent.list()
			}
			if f.asking.area != nil {
				p.AreaProbability = proto.Float64(x.inside)
			}
		}
		m.News = &leadlinev1.FollowResponse_Posterior{Posterior: p}
	case u.withdrawn != nil:
		m.News = &leadlinev1.FollowResponse_Withdrawn{Withdrawn: withdrawn(u.withdrawn)}
	default:
		m.News = &leadlinev1.FollowResponse_Farewell{Farewell: u.farewell}
	}
	return m
}
