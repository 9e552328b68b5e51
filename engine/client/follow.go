package client

import (
	"context"
	"errors"
	"io"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	leadlinev1 "leadline/proto/leadline/v1"
)

// Pauses before a broken stream is opened again: doubled each time, until an
// update comes.
const (
	firstPause = 100 * time.Millisecond
	lastPause  = 10 * time.Second
)

// Following says how Follow goes about it.
type Following struct {
	// Request is what is asked for. A resume token in it is where to begin.
	Request *leadlinev1.FollowRequest
	// OnUpdate is called for each update. An error of it ends Follow.
	OnUpdate func(*leadlinev1.FollowResponse) error
	// OnBreak, if set, is called when a stream has broken and will be opened
	// again, with what broke it. anew says that the server knows nothing of the
	// stream any more: the present state of every vehicle comes again.
	OnBreak func(err error, anew bool)
}

// Follow tells of vehicles until ctx is done, which is its error, or the
// server refuses. A stream that breaks is resumed where it was, so that nothing
// is told twice; only the first one must come about.
func Follow(ctx context.Context, conn grpc.ClientConnInterface, f Following) error {
	req := proto.CloneOf(f.Request)
	pause, begun := firstPause, false
	for {
		opened := time.Now()
		err := followOnce(ctx, conn, req, func(m *leadlinev1.FollowResponse) error {
			pause, begun = firstPause, true
			req.ResumeToken = m.GetResumeToken()
			return f.OnUpdate(m)
		}, func() { begun = true })
		var own *callback
		why, _ := WhyOf(err)
		switch anew := req.GetResumeToken() != "" && why.Reason == leadlinev1.Reason_REASON_BAD_TOKEN; {
		case errors.As(err, &own):
			return own.error
		case ctx.Err() != nil:
			return ctx.Err()
		case anew:
			req.ResumeToken = ""
			if f.OnBreak != nil {
				f.OnBreak(err, true)
			}
			continue
		case why.Reason == leadlinev1.Reason_REASON_IDENTITY_EXPIRED && time.Since(opened) > time.Second:
			// The token was good when the stream began: there may be another.
		case !begun || status.Code(err) != codes.Unavailable:
			return err
		}
		if f.OnBreak != nil {
			f.OnBreak(err, false)
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

// followOnce reads one stream to its end. begins is called once the server has
// answered, which it may do long before there is news.
func followOnce(ctx context.Context, conn grpc.ClientConnInterface, req *leadlinev1.FollowRequest, update func(*leadlinev1.FollowResponse) error, begins func()) error {
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	st, err := leadlinev1.NewPositionServiceClient(conn).Follow(ctx, req)
	if err != nil {
		return err
	}
	if head, err := st.Header(); err == nil && head != nil {
		begins()
	}
	for {
		m, err := st.Recv()
		switch {
		case errors.Is(err, io.EOF):
			return status.Error(codes.Unavailable, "the server ended the stream without a word")
		case err != nil:
			return err
		}
		if err := update(m); err != nil {
			return &callback{err}
		}
	}
}
