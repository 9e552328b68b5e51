package server

import (
	"cmp"
	"context"
	"crypto/sha256"
	"encoding/base64"
	"encoding/hex"
	"fmt"
	"maps"
	"slices"
	"time"

	"leadline/engine/sensor"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"

	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"
)

// Sizes of a page of ListVehicles.
const (
	defaultPage = 100
	maxPage     = 1000
)

// ListVehicles says who is here: see the .proto file. Pages go by name, so that
// vehicles that come and go between two pages push no other out.
func (s *Server) ListVehicles(ctx context.Context, req *leadlinev1.ListVehiclesRequest) (*leadlinev1.ListVehiclesResponse, error) {
	size := cmp.Or(int(req.GetPageSize()), defaultPage)
	if size > maxPage {
		return nil, badField("page_size", "page_size %d: at most %d", size, maxPage)
	}
	after, err := base64.RawURLEncoding.DecodeString(req.GetPageToken())
	if err != nil || len(after) > wire.MaxName {
		return nil, refuse(leadlinev1.Reason_REASON_BAD_TOKEN, about{"field": "page_token"}, "page_token is none: give next_page_token of the page before, or leave it out")
	}
	if m := req.GetMap(); m != "" && len(s.atlas.describe(m)) == 0 {
		return nil, s.unknownMap(m)
	}
	pages, err := fromAll(ctx, s, "", func(ctx context.Context, c leadlinev1.PositionServiceClient) (*leadlinev1.ListVehiclesResponse, error) {
		return c.ListVehicles(ctx, req)
	})
	if err != nil {
		return nil, err
	}
	return mergeVehicles(append(pages, s.listHere(req, string(after), size)), size), nil
}

// listHere is a page of the vehicles that this server has.
func (s *Server) listHere(req *leadlinev1.ListVehiclesRequest, after string, size int) *leadlinev1.ListVehiclesResponse {
	resp := &leadlinev1.ListVehiclesResponse{}
	now := s.cfg.Now()
	s.mu.Lock()
	defer s.mu.Unlock()
	for _, name := range slices.Sorted(maps.Keys(s.owners)) {
		o := s.owners[name]
		if name <= after || req.GetMap() != "" && o.m.Name != req.GetMap() || req.GetTraffic() != o.header.GetTraffic() {
			continue
		}
		if len(resp.GetVehicles()) == size {
			resp.NextPageToken = base64.RawURLEncoding.EncodeToString([]byte(resp.GetVehicles()[size-1].GetVehicle()))
			break
		}
		resp.Vehicles = append(resp.Vehicles, o.describe(now))
	}
	return resp
}

// describe says what is known of a vehicle without asking its session, which
// may be busy. The server's lock is held.
func (o *owner) describe(now time.Time) *leadlinev1.Vehicle {
	v := &leadlinev1.Vehicle{
		Vehicle: o.vehicle, Drive: o.drive, Map: o.m.Name, MapFingerprint: o.m.fingerprint(),
		Suite: o.header.GetSuite(), OpenedAt: timestamppb.New(o.openedAt), Connected: o.streams > 0, Ended: o.finished,
		NewerMapFingerprint: o.srv.atlas.newer(o.m.Name, o.m.fingerprint()),
	}
	if p := o.latest.Load(); p != nil {
		v.Status, v.Time = statuses[p.Status], wire.FromTime(sensor.Time(p.TimeNS))
		v.AgeS = now.Sub(time.Unix(0, p.TimeNS)).Seconds()
	}
	return v
}

// EndDrive ends a drive in its vehicle's place: see the .proto file. A stream
// that feeds it gets the same word, and ends.
func (s *Server) EndDrive(ctx context.Context, req *leadlinev1.EndDriveRequest) (*leadlinev1.EndDriveResponse, error) {
	if req.GetVehicle() == "" {
		return nil, badField("vehicle", "vehicle is missing: give the name that it is fed under")
	}
	o, err := s.find(req.GetVehicle())
	if err != nil {
		return nil, err
	}
	if d := req.GetDrive(); d != "" && d != o.drive {
		return nil, refuse(leadlinev1.Reason_REASON_OTHER_DRIVE, o.about(), "vehicle %q is on drive %q, not %q: name that one, or none", o.vehicle, o.drive, clip(d))
	}
	type end struct {
		closed *leadlinev1.Closed
		err    error
	}
	ended := make(chan end, 1)
	err = o.do(ctx, func() {
		was := o.ended
		o.end(func(c *leadlinev1.Closed, err error) {
			if err != nil {
				ended <- end{err: o.journalRefusal(err)}
				return
			}
			if !was {
				o.say(&leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Closed{Closed: c}})
				o.hangup(nil)
			}
			ended <- end{closed: c}
		})
	})
	if err != nil {
		return nil, err
	}
	select {
	case e := <-ended:
		return &leadlinev1.EndDriveResponse{Closed: readable(ctx, o.vehicle, e.closed)}, e.err
	case <-o.dead:
		return nil, o.err
	case <-ctx.Done():
		return nil, status.FromContextError(ctx.Err()).Err()
	}
}

// readable is how a drive ended, for who asks: whoever may not ask where its vehicle
// is reads no position here either.
func readable(ctx context.Context, vehicle string, c *leadlinev1.Closed) *leadlinev1.Closed {
	caller := callerOf(ctx)
	if c == nil || caller == nil {
		return c
	}
	where := &leadlinev1.WhereRequest{Vehicles: []string{vehicle}}
	if allows(leadlinev1.PositionService_Where_FullMethodName, caller, where) == nil {
		return c
	}
	c = proto.CloneOf(c)
	c.Posterior, c.Traffic = nil, nil
	return c
}

// ListSuites lists the suites that drives may use: see the .proto file.
func (s *Server) ListSuites(context.Context, *leadlinev1.ListSuitesRequest) (*leadlinev1.ListSuitesResponse, error) {
	return &leadlinev1.ListSuitesResponse{Suites: slices.Sorted(maps.Keys(s.cfg.Suites))}, nil
}

// DescribeSuite says what a suite is: see the .proto file.
func (s *Server) DescribeSuite(_ context.Context, req *leadlinev1.DescribeSuiteRequest) (*leadlinev1.DescribeSuiteResponse, error) {
	name := req.GetSuite()
	if name == "" {
		return nil, badField("suite", "suite is missing: give the name of a suite")
	}
	suite := s.cfg.Suites[name]
	if suite == nil {
		return nil, s.unknownSuite(name)
	}
	dim := 1
	switch k := req.GetKind(); k {
	case leadlinev1.MapKind_MAP_KIND_UNSPECIFIED, leadlinev1.MapKind_MAP_KIND_ROADS:
	case leadlinev1.MapKind_MAP_KIND_HEIGHTS:
		dim = 2
	default:
		return nil, badField("kind", "kind %d is none: give one that map.proto names", k)
	}
	text, err := suite.YAML(dim)
	if err != nil { // no suite that was read is one that cannot be written
		panic(fmt.Sprintf("suite %q: %v", name, err))
	}
	sum := sha256.Sum256(text)
	return &leadlinev1.DescribeSuiteResponse{Name: name, Yaml: string(text), Fingerprint: hex.EncodeToString(sum[:])}, nil
}

func (s *Server) unknownSuite(name string) error {
	return refuse(leadlinev1.Reason_REASON_UNKNOWN_SUITE, about{"suite": name}, "there is no suite %q here: known are %s", clip(name), known(slices.Collect(maps.Keys(s.cfg.Suites))))
}
