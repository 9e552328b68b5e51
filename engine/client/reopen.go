package client

import (
	"context"
	"errors"
	"io"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	leadlinev1 "leadline/proto/leadline/v1"
)

// Pauses before a broken stream is opened again: doubled each time, until an
// update comes.
const (
	firstPause = 100 * time.Millisecond
	lastPause  = 10 * time.Second
)

// stream is one that is opened again when it breaks.
type stream struct {
	// once opens it and reads it to its end. It calls begins once the server has
	// answered, and news for each update.
	once func(ctx context.Context, begins, news func()) error
	// anew, if set, reports whether an error asks for a new beginning at once.
	anew func(error) bool
	// broke, if set, is told what broke a stream that is opened again.
	broke func(error)
}

// follow reads a stream until once returns nil, ctx is done, the server refuses, or
// the caller's own function returns an error; only the first opening must come about.
func (s stream) follow(ctx context.Context) error {
	pause, begun := firstPause, false
	begins := func() { begun = true }
	news := func() { pause, begun = firstPause, true }
	for {
		opened := time.Now()
		inner, cancel := context.WithCancel(ctx)
		err := s.once(inner, begins, news)
		cancel()
		var own *callback
		why, _ := WhyOf(err)
		switch {
		case err == nil:
			return nil
		case errors.As(err, &own):
			return own.error
		case ctx.Err() != nil:
			return ctx.Err()
		case s.anew != nil && s.anew(err):
			continue
		case why.Reason == leadlinev1.Reason_REASON_IDENTITY_EXPIRED && time.Since(opened) > time.Second:
			// The token was good when the stream began: there may be another.
		case !begun || status.Code(err) != codes.Unavailable:
			return err
		}
		if s.broke != nil {
			s.broke(err)
		}
		select {
		case <-time.After(pause):
		case <-ctx.Done():
			return ctx.Err()
		}
		pause = min(2*pause, lastPause)
	}
}

// callback is an error of the caller's own.
type callback struct{ error }

// read reads a stream to its end. update says whether a message was the last one:
// an end without one is a broken stream.
func read[M any](st grpc.ServerStreamingClient[M], update func(*M) (last bool, err error)) error {
	for last := false; ; {
		m, err := st.Recv()
		switch {
		case errors.Is(err, io.EOF) && last:
			return nil
		case errors.Is(err, io.EOF):
			return status.Error(codes.Unavailable, "the server ended the stream without a word")
		case err != nil:
			return err
		}
		if last, err = update(m); err != nil {
			return &callback{err}
		}
	}
}
