package server

import (
	"context"
	"crypto/rand"
	"io"
	"sync"
	"time"

	"google.golang.org/grpc/status"

	leadlinev1 "leadline/proto/leadline/v1"
)

// partsUpload is an upload that comes by calls: what a stream would bring, they do.
type partsUpload struct {
	by       string // who began it
	bytes    uint64
	messages chan uploaded
	give     context.CancelFunc
	done     chan struct{} // closed when it is over, with what follows set
	m        *leadlinev1.MapDescription
	err      error

	mu       sync.Mutex // one part at a time
	received uint64
}

// UploadMapPart takes a map by calls one after another: see the .proto file.
func (s *Server) UploadMapPart(ctx context.Context, req *leadlinev1.UploadMapPartRequest) (*leadlinev1.UploadMapPartResponse, error) {
	switch m := req.GetMessage().(type) {
	case *leadlinev1.UploadMapPartRequest_Beginning:
		return s.beginParts(ctx, m.Beginning)
	case *leadlinev1.UploadMapPartRequest_Part:
		u, err := s.partsOf(ctx, "upload", m.Part.GetUpload())
		if err != nil {
			return nil, err
		}
		return u.take(ctx, m.Part)
	case *leadlinev1.UploadMapPartRequest_GiveUp:
		u, err := s.partsOf(ctx, "give_up", m.GiveUp)
		if err != nil {
			return nil, err
		}
		u.give()
		<-u.done
		return &leadlinev1.UploadMapPartResponse{Upload: m.GiveUp}, nil
	}
	return nil, refuse(leadlinev1.Reason_REASON_WRONG_MESSAGE, nil, "upload: the request is empty: send a beginning, a part, or the name of an upload to give up")
}

// beginParts begins an upload, which goes on when the call is over.
func (s *Server) beginParts(ctx context.Context, b *leadlinev1.MapBeginning) (*leadlinev1.UploadMapPartResponse, error) {
	leave, err := s.mayUpload()
	if err != nil {
		return nil, err
	}
	if err := s.checkBeginning(b); err != nil {
		leave()
		return nil, err
	}
	whole, cancel := s.untilDraining(context.WithoutCancel(ctx))
	u := &partsUpload{by: by(ctx, ""), bytes: b.GetBytes(), messages: make(chan uploaded), give: cancel, done: make(chan struct{})}
	name := rand.Text()
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.closed {
		cancel()
		leave()
		return nil, errStopping
	}
	s.parts[name] = u
	s.ended.Go(func() {
		u.m, u.err = s.takeMap(whole, u.messages, b)
		cancel()
		leave()
		close(u.done)
		// Who sent it hears how it ended.
		time.AfterFunc(s.cfg.Limits.OpenTimeout, func() {
			s.mu.Lock()
			defer s.mu.Unlock()
			delete(s.parts, name)
		})
	})
	return &leadlinev1.UploadMapPartResponse{Upload: name}, nil
}

// partsOf finds the caller's upload of a name, which a field gives.
func (s *Server) partsOf(ctx context.Context, field, name string) (*partsUpload, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if u := s.parts[name]; u != nil && u.by == by(ctx, "") {
		return u, nil
	}
	return nil, refuse(leadlinev1.Reason_REASON_BAD_TOKEN, about{"field": field}, "%s: there is no upload %q here: it is over, or was given up when nothing came for %v: begin again", field, clip(name), s.cfg.Limits.OpenTimeout)
}

// take passes a part on, and with the last one waits for the map.
func (u *partsUpload) take(ctx context.Context, p *leadlinev1.MapPart) (*leadlinev1.UploadMapPartResponse, error) {
	u.mu.Lock()
	defer u.mu.Unlock()
	out := &leadlinev1.UploadMapPartResponse{Upload: p.GetUpload()}
	select {
	case <-u.done:
		if u.err != nil {
			return nil, u.err
		}
	default:
	}
	if p.GetOffset() != u.received {
		return nil, refuse(leadlinev1.Reason_REASON_OUT_OF_ORDER, nil, "upload: a part from byte %d on, after %d bytes: send that one next", p.GetOffset(), u.received)
	}
	chunk := &leadlinev1.UploadMapRequest{Message: &leadlinev1.UploadMapRequest_Chunk{Chunk: p.GetChunk()}}
	if err := u.pass(ctx, uploaded{message: chunk}); err != nil {
		return nil, err
	}
	u.received += uint64(len(p.GetChunk()))
	out.Received = u.received
	if u.received < u.bytes {
		return out, nil
	}
	if err := u.pass(ctx, uploaded{err: io.EOF}); err != nil {
		return nil, err
	}
	select {
	case <-u.done:
		out.Map = u.m
		return out, u.err
	case <-ctx.Done():
		return nil, status.FromContextError(ctx.Err()).Err()
	}
}

// pass hands a message to what takes the file; or says how that has ended.
func (u *partsUpload) pass(ctx context.Context, m uploaded) error {
	select {
	case u.messages <- m:
		return nil
	case <-u.done:
		return u.err
	case <-ctx.Done():
		return status.FromContextError(ctx.Err()).Err()
	}
}
