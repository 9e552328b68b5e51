package server

import (
	"context"
	"errors"
	"io"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/status"

	"leadline/engine/server/share"
	leadlinev1 "leadline/proto/leadline/v1"
)

type feedStream = grpc.BidiStreamingServer[leadlinev1.FeedRequest, leadlinev1.FeedResponse]

// received is what a stream brought.
type received struct {
	arrival
	err error
}

// Feed is the vehicle's stream: see the .proto file.
func (s *Server) Feed(stream feedStream) error {
	if n, most := s.streams.Add(1), int64(s.cfg.Limits.Streams); n > most {
		s.streams.Add(-1)
		return full("streams", int(most), "the server has its %d streams: try later, or raise the limit", most)
	}
	defer s.streams.Add(-1)
	ctx := stream.Context()
	requests := make(chan received)
	go receive(ctx, stream, requests) // ends with the stream's context

	open, err := s.first(ctx, requests)
	if err != nil {
		return err
	}
	if vehicle := open.GetHeader().GetVehicle(); vehicle != "" {
		here, err := s.elsewhere(ctx, vehicle, func(ctx context.Context, at share.Server) (bool, error) {
			return s.forwardFeed(ctx, at, stream, open, requests)
		})
		if !here || err != nil {
			return err
		}
	}
	o, err := s.open(ctx, open)
	if err != nil {
		return err
	}
	defer s.leave(o)
	a := &attachment{
		reply: open.GetReply(), acknowledged: open.GetAcknowledged(),
		in:   make(chan work, s.cfg.Limits.QueueBatches),
		out:  make(chan item),
		gone: make(chan struct{}), taken: make(chan struct{}),
	}
	defer close(a.gone)
	select {
	case o.attach <- a:
	case <-o.dead:
		return o.err
	case <-ctx.Done():
		return status.FromContextError(ctx.Err()).Err()
	}
	return s.carry(ctx, stream, requests, o, a)
}

// receive passes on what the stream brings until it brings an error. A message
// over the limit ends the stream with gRPC's own words, which cannot be changed;
// opened tells the limit beforehand.
func receive(ctx context.Context, stream feedStream, to chan<- received) {
	for {
		var a arrival
		err := stream.RecvMsg(&a)
		select {
		case to <- received{a, err}:
		case <-ctx.Done():
			return
		}
		if err != nil {
			return
		}
	}
}

// first waits for what must come first.
func (s *Server) first(ctx context.Context, requests <-chan received) (*leadlinev1.Open, error) {
	late := time.NewTimer(s.cfg.Limits.OpenTimeout)
	defer late.Stop()
	select {
	case r := <-requests:
		if errors.Is(r.err, io.EOF) {
			return nil, refuse(leadlinev1.Reason_REASON_WRONG_MESSAGE, nil, "the stream ended without a message: send open first")
		}
		if r.err != nil {
			return nil, r.err
		}
		if m := r.message.GetOpen(); m != nil {
			return m, nil
		}
		return nil, refuse(leadlinev1.Reason_REASON_WRONG_MESSAGE, nil, "the first message is not open: send open first")
	case <-late.C:
		return nil, refuse(leadlinev1.Reason_REASON_SILENT, nil, "no message for %v: send open first", s.cfg.Limits.OpenTimeout)
	case <-s.draining:
		return nil, errStopping
	case <-ctx.Done():
		return nil, status.FromContextError(ctx.Err()).Err()
	}
}

// carry moves messages between a stream and its owner until one of them is
// done. It holds at most one message; while the owner's queue is full it reads
// no further.
func (s *Server) carry(ctx context.Context, stream feedStream, requests <-chan received, o *owner, a *attachment) error {
	var held *work
	cameAt := map[uint64]time.Time{} // batches without a receipt: those that wait at the owner, and the held one
	draining := s.draining
	stopping := false
	paused := false // the held batch came too fast
	pause := time.NewTimer(time.Hour)
	defer pause.Stop()
	for {
		in, from := a.in, requests
		var w work
		switch {
		case held != nil && paused:
			in, from = nil, nil
		case held != nil:
			from, w = nil, *held
		case stopping:
			from, w = nil, work{hangup: true, err: errStopping}
		default:
			in = nil
		}
		select {
		case r := <-from:
			next, err := request(r)
			if err != nil {
				return err
			}
			held = &next
			if next.batch != nil {
				cameAt[next.batch.GetSequence()] = time.Now()
				if wait, limit := s.await(o, len(next.batch.GetMeasurements())); wait > 0 {
					s.cfg.Metrics.HeldBack(limit, wait)
					paused = true
					pause.Reset(wait)
				}
			}
			if next.hangup || next.end {
				requests = nil // nothing more is taken
			}
		case in <- w:
			if held == nil {
				stopping = false
				requests = nil
			}
			held = nil
		case it := <-a.out:
			if it.last {
				return it.err
			}
			if err := stream.Send(it.message); err != nil {
				return err
			}
			if r := it.message.GetReceipt(); r != nil {
				for sequence, came := range cameAt {
					if sequence <= r.GetSequence() { // a receipt is for all before it, too
						s.cfg.Metrics.Acknowledged(time.Since(came))
						delete(cameAt, sequence)
					}
				}
			}
		case <-a.taken:
			return o.takenOver()
		case <-o.dead:
			return o.err
		case <-pause.C:
			paused = false
		case <-draining:
			draining, stopping, paused = nil, requests != nil, false
		case <-s.cutOff():
			return errCutOff
		case <-ctx.Done():
			return status.FromContextError(ctx.Err()).Err()
		}
	}
}

// request turns a message into work.
func request(r received) (work, error) {
	switch {
	case errors.Is(r.err, io.EOF):
		return work{hangup: true}, nil
	case r.err != nil:
		return work{}, r.err
	case r.message.GetBatch() != nil:
		return work{batch: r.message.GetBatch(), bytes: r.batch}, nil
	case r.message.GetEnd() != nil:
		return work{end: true}, nil
	case r.message.GetOpen() != nil:
		return work{}, refuse(leadlinev1.Reason_REASON_WRONG_MESSAGE, nil, "a second open: a stream carries one drive; use another stream")
	}
	return work{}, refuse(leadlinev1.Reason_REASON_WRONG_MESSAGE, nil, "an empty message: send a batch or end")
}
