package server

import (
	"context"
	"errors"
	"io"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	"leadline/engine/server/share"
	leadlinev1 "leadline/proto/leadline/v1"
)

// forwardedHeader is in calls that another server has passed on: they go no
// further.
const forwardedHeader = "leadline-forwarded"

func forwarded(ctx context.Context) bool {
	return len(metadata.ValueFromIncomingContext(ctx, forwardedHeader)) > 0
}

// onward is the context of a call that is passed on, with what its caller has
// shown.
func onward(ctx context.Context) context.Context {
	md := metadata.Pairs(forwardedHeader, "1")
	if token := metadata.ValueFromIncomingContext(ctx, "authorization"); len(token) > 0 {
		md.Set("authorization", token...)
	}
	return metadata.NewOutgoingContext(ctx, md)
}

func gone(ctx context.Context) error { return status.FromContextError(ctx.Err()).Err() }

// peer is the service of another server, as this call's caller may use it.
func (s *Server) peer(ctx context.Context, at share.Server) (leadlinev1.PositionServiceClient, error) {
	if callerOf(ctx) != nil && len(metadata.ValueFromIncomingContext(ctx, "authorization")) == 0 {
		return nil, refuse(leadlinev1.Reason_REASON_NOT_OFFERED, nil, "a call that is known by its client certificate cannot be passed on to the server that it concerns: call that one, at %s, or show a token", at.Address)
	}
	c, err := s.shared.peers.conn(at.Address)
	if err != nil {
		return nil, err
	}
	return leadlinev1.NewPositionServiceClient(c), nil
}

// onePass passes one call on to another server.
type onePass func(ctx context.Context, c leadlinev1.PositionServiceClient, req any) (proto.Message, error)

func passing[Req, Resp proto.Message](call func(leadlinev1.PositionServiceClient, context.Context, Req, ...grpc.CallOption) (Resp, error)) onePass {
	return func(ctx context.Context, c leadlinev1.PositionServiceClient, req any) (proto.Message, error) {
		return call(c, ctx, req.(Req))
	}
}

// routed has calls that concern one vehicle answered by the server that serves it.
func (s *Server) routed(method string, handle grpc.UnaryHandler) grpc.UnaryHandler {
	if s.shared == nil {
		return handle
	}
	var pass onePass
	switch method {
	case leadlinev1.PositionService_Traffic_FullMethodName:
		pass = passing(leadlinev1.PositionServiceClient.Traffic)
	case leadlinev1.PositionService_Trail_FullMethodName:
		pass = passing(leadlinev1.PositionServiceClient.Trail)
	case leadlinev1.PositionService_AddSighting_FullMethodName:
		pass = passing(leadlinev1.PositionServiceClient.AddSighting)
	case leadlinev1.PositionService_EndDrive_FullMethodName:
		pass = passing(leadlinev1.PositionServiceClient.EndDrive)
	case leadlinev1.PositionService_EraseVehicle_FullMethodName:
		pass = passing(leadlinev1.PositionServiceClient.EraseVehicle)
	default:
		return handle
	}
	return func(ctx context.Context, req any) (any, error) {
		var vehicle string
		switch r := req.(type) {
		case interface{ GetVehicle() string }:
			vehicle = r.GetVehicle()
		case interface{ GetRoad() string }:
			vehicle = r.GetRoad()
		}
		if vehicle == "" {
			return handle(ctx, req) // which says so
		}
		if erase, ok := req.(*leadlinev1.EraseVehicleRequest); ok {
			if forwarded(ctx) && s.another(vehicle) {
				s.alarms.forget(vehicle) // from when it was here
				return new(leadlinev1.EraseVehicleResponse), nil
			}
			defer s.eraseElsewhere(ctx, erase)
		}
		var resp proto.Message
		here, err := s.elsewhere(ctx, vehicle, func(ctx context.Context, at share.Server) (bool, error) {
			c, err := s.peer(ctx, at)
			if err == nil {
				resp, err = pass(onward(ctx), c, req)
			}
			return unreachable(err), err
		})
		switch {
		case err != nil:
			return nil, err
		case here:
			return handle(ctx, req)
		}
		return resp, nil
	}
}

// another reports whether another server serves a vehicle.
func (s *Server) another(vehicle string) bool {
	j := s.joined()
	return j != nil && j.Where(s.journal.Partition(vehicle)).Server != nil
}

// eraseElsewhere has servers that served a vehicle before forget its alarms, which is
// all that they still have of it. One that cannot be reached has them until it is
// started anew, and the log says so.
func (s *Server) eraseElsewhere(ctx context.Context, req *leadlinev1.EraseVehicleRequest) {
	s.alarms.forget(req.GetVehicle())
	owner := "" // has done it, and may have another drive of it since
	if j := s.joined(); j != nil {
		if at := j.Where(s.journal.Partition(req.GetVehicle())); at.Server != nil {
			owner = at.Server.ID
		}
	}
	_, err := fromAll(ctx, s, owner, func(ctx context.Context, c leadlinev1.PositionServiceClient) (*leadlinev1.EraseVehicleResponse, error) {
		return c.EraseVehicle(ctx, req)
	})
	if err != nil {
		s.cfg.Log.Warn("another server may still have alarms of a vehicle that was erased", "error", err)
	}
}

// unreachable reports whether an error is that nobody answers.
func unreachable(err error) bool {
	st := status.Convert(err)
	return st.Code() == codes.Unavailable && len(st.Details()) == 0
}

// elsewhere has the server that serves a vehicle do something, unless it is this
// one (here). One that cannot be reached may be dead: then, if it can be done again,
// another one's turn is waited for. The context that do gets ends when somebody else
// serves the vehicle: one that is cut off says nothing, and its connection does not
// break for a while.
func (s *Server) elsewhere(ctx context.Context, vehicle string, do func(context.Context, share.Server) (again bool, err error)) (here bool, err error) {
	for until := time.Now().Add(whoseWait); ; {
		at, err := s.whoseUntil(ctx, vehicle, until)
		if err != nil || at == nil {
			return err == nil, err
		}
		stays, cancel := s.untilMoved(ctx, vehicle, *at)
		again, err := do(stays, *at)
		if err != nil && hasMoved(stays) {
			err = errMoved
		}
		cancel()
		if !again || time.Now().After(until) {
			return false, s.fromPeer(*at, err)
		}
		select {
		case <-time.After(lookAgain):
		case <-s.draining:
			return false, errStopping
		case <-ctx.Done():
			return false, gone(ctx)
		}
	}
}

// untilMoved is a context that ends when somebody else than a server serves a
// vehicle.
func (s *Server) untilMoved(ctx context.Context, vehicle string, at share.Server) (context.Context, context.CancelFunc) {
	ctx, cancel := context.WithCancelCause(ctx)
	j, i := s.joined(), s.journal.Partition(vehicle)
	go func() {
		for {
			now := j.Where(i)
			if now.Server == nil || now.Server.ID != at.ID {
				cancel(errMoved)
				return
			}
			select {
			case <-now.Changed:
			case <-ctx.Done():
				return
			}
		}
	}()
	return ctx, func() { cancel(nil) }
}

// hasMoved reports whether that is why the context has ended.
func hasMoved(ctx context.Context) bool { return errors.Is(context.Cause(ctx), errMoved) }

// lookAgain is after how long it is looked who serves a vehicle whose server cannot
// be reached.
const lookAgain = 100 * time.Millisecond

// forwardFeed passes a stream on to the server that serves its vehicle, until one
// side ends it. It may be done again where that server has not answered.
func (s *Server) forwardFeed(ctx context.Context, at share.Server, stream feedStream, open *leadlinev1.Open, requests <-chan received) (again bool, err error) {
	c, err := s.peer(ctx, at)
	if err != nil {
		return false, err
	}
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	there, err := c.Feed(onward(ctx))
	if err != nil {
		return unreachable(err) || hasMoved(ctx), err
	}
	if err := there.Send(&leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_Open{Open: open}}); err != nil && !errors.Is(err, io.EOF) {
		return unreachable(err) || hasMoved(ctx), err
	}
	first, err := there.Recv()
	if err != nil {
		return unreachable(err) || hasMoved(ctx), err
	}
	if err := stream.Send(first); err != nil {
		return false, err
	}
	sent := make(chan error, 1)
	go func() { sent <- s.passOn(ctx, there, requests) }()
	var last error
	for {
		m, err := there.Recv()
		if err != nil {
			if last = err; errors.Is(err, io.EOF) {
				last = nil
			}
			break
		}
		if err := stream.Send(m); err != nil {
			last = err
			break
		}
	}
	cancel()
	if err := <-sent; last == nil && err != nil {
		return false, err
	}
	return false, last
}

// passOn sends what comes until the stream's sending side is over, or this server
// stops: then what has come is still answered.
func (s *Server) passOn(ctx context.Context, there grpc.BidiStreamingClient[leadlinev1.FeedRequest, leadlinev1.FeedResponse], requests <-chan received) error {
	for {
		select {
		case r := <-requests:
			if r.err != nil {
				_ = there.CloseSend()
				if errors.Is(r.err, io.EOF) {
					return nil
				}
				return r.err
			}
			err := there.Send(r.message)
			if errors.Is(err, io.EOF) {
				return nil // Recv has why
			}
			if err != nil && ctx.Err() == nil {
				return err
			}
		case <-s.draining:
			_ = there.CloseSend()
			return errStopping
		case <-s.cutOff():
			_ = there.CloseSend()
			return errCutOff
		case <-ctx.Done():
			return nil
		}
	}
}
