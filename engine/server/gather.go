package server

import (
	"cmp"
	"context"
	"encoding/base64"
	"slices"
	"sync"
	"time"

	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	"leadline/engine/server/share"
	leadlinev1 "leadline/proto/leadline/v1"
)

// whereElsewhere has other servers answer for the vehicles that they serve, and
// returns which are left for this one.
func (s *Server) whereElsewhere(ctx context.Context, req *leadlinev1.WhereRequest, answers []*leadlinev1.WhereAnswer) (here []int) {
	type part struct {
		at      share.Server
		indexes []int
	}
	parts := map[string]*part{}
	until := time.Now().Add(whoseWait)
	for i, vehicle := range req.GetVehicles() {
		at, err := s.whoseUntil(ctx, vehicle, until)
		switch {
		case err != nil:
			answers[i] = &leadlinev1.WhereAnswer{Vehicle: vehicle, Failure: failure(err)}
		case at == nil:
			here = append(here, i)
		default:
			p := parts[at.ID]
			if p == nil {
				p = &part{at: *at}
				parts[at.ID] = p
			}
			p.indexes = append(p.indexes, i)
		}
	}
	var all sync.WaitGroup
	for _, p := range parts {
		all.Go(func() {
			ask := proto.CloneOf(req)
			ask.Vehicles = nil
			for _, i := range p.indexes {
				ask.Vehicles = append(ask.Vehicles, req.GetVehicles()[i])
			}
			resp, err := s.whereAt(ctx, p.at, ask)
			for k, i := range p.indexes {
				if err == nil && k < len(resp.GetAnswers()) {
					answers[i] = resp.GetAnswers()[k]
				} else {
					answers[i] = &leadlinev1.WhereAnswer{Vehicle: ask.Vehicles[k], Failure: failure(err)}
				}
			}
		})
	}
	all.Wait()
	return here
}

func (s *Server) whereAt(ctx context.Context, at share.Server, req *leadlinev1.WhereRequest) (*leadlinev1.WhereResponse, error) {
	c, err := s.peer(ctx, at)
	if err != nil {
		return nil, err
	}
	resp, err := c.Where(onward(ctx), req)
	return resp, s.fromPeer(at, err)
}

// fromPeer words an error that another server has no words for: it cannot be
// reached.
func (s *Server) fromPeer(at share.Server, err error) error {
	if err == nil {
		return nil
	}
	if unreachable(err) {
		return refuse(leadlinev1.Reason_REASON_RECOVERING, nil, "the server at %s does not answer: %s: call again", at.Address, status.Convert(err).Message())
	}
	return err
}

// fromAll calls the other servers but one, where there are some and the call comes
// from none of them, and returns what they answer.
func fromAll[T any](ctx context.Context, s *Server, but string, call func(context.Context, leadlinev1.PositionServiceClient) (T, error)) ([]T, error) {
	j := s.joined()
	if j == nil || forwarded(ctx) {
		return nil, nil
	}
	others := slices.DeleteFunc(j.Others(), func(o share.Server) bool { return o.ID == but })
	out, errs := make([]T, len(others)), make([]error, len(others))
	var all sync.WaitGroup
	for i, at := range others {
		all.Go(func() {
			c, err := s.peer(ctx, at)
			if err == nil {
				out[i], err = call(onward(ctx), c)
			}
			errs[i] = s.fromPeer(at, err)
		})
	}
	all.Wait()
	for _, err := range errs {
		if err != nil {
			return out, err
		}
	}
	return out, nil
}

// seenElsewhere notes who has seen an alarm at the server that has it; nil if none
// does.
func (s *Server) seenElsewhere(ctx context.Context, req *leadlinev1.SeeAlarmRequest) (*leadlinev1.SeeAlarmResponse, error) {
	answers, err := fromAll(ctx, s, "", func(ctx context.Context, c leadlinev1.PositionServiceClient) (*leadlinev1.SeeAlarmResponse, error) {
		resp, err := c.SeeAlarm(ctx, req)
		if failure(err).GetReason() == leadlinev1.Reason_REASON_UNKNOWN_ALARM {
			return nil, nil
		}
		return resp, err
	})
	for _, a := range answers {
		if a != nil {
			return a, nil
		}
	}
	return nil, err
}

// mergeVehicles puts pages of several servers together, by name.
func mergeVehicles(pages []*leadlinev1.ListVehiclesResponse, size int) *leadlinev1.ListVehiclesResponse {
	resp := &leadlinev1.ListVehiclesResponse{}
	more := false
	for _, p := range pages {
		resp.Vehicles = append(resp.Vehicles, p.GetVehicles()...)
		more = more || p.GetNextPageToken() != ""
	}
	slices.SortStableFunc(resp.Vehicles, func(a, b *leadlinev1.Vehicle) int { return cmp.Compare(a.GetVehicle(), b.GetVehicle()) })
	// One that moves meanwhile may be at two.
	resp.Vehicles = slices.CompactFunc(resp.Vehicles, func(a, b *leadlinev1.Vehicle) bool { return a.GetVehicle() == b.GetVehicle() })
	if len(resp.Vehicles) > size {
		resp.Vehicles, more = resp.Vehicles[:size], true
	}
	if n := len(resp.Vehicles); more && n > 0 {
		resp.NextPageToken = base64.RawURLEncoding.EncodeToString([]byte(resp.Vehicles[n-1].GetVehicle()))
	}
	return resp
}
