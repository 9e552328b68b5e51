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

// FollowTraffic tells of a road's traffic until its drive has ended, which is nil,
// or ctx is done, or the server refuses, or tell returns an error, which are its
// errors. A stream that breaks is opened again; only the first one must come about.
func FollowTraffic(ctx context.Context, conn grpc.ClientConnInterface, req *leadlinev1.FollowTrafficRequest, tell func(*leadlinev1.FollowTrafficResponse) error) error {
	pause, begun := firstPause, false
	for {
		err := followTrafficOnce(ctx, conn, req, func(m *leadlinev1.FollowTrafficResponse) error {
			pause, begun = firstPause, true
			return tell(m)
		})
		var own *callback
		switch {
		case err == nil:
			return nil
		case errors.As(err, &own):
			return own.error
		case ctx.Err() != nil:
			return ctx.Err()
		case !begun || status.Code(err) != codes.Unavailable:
			return err
		}
		select {
		case <-time.After(pause):
		case <-ctx.Done():
			return ctx.Err()
		}
		pause = min(2*pause, lastPause)
	}
}

// followTrafficOnce reads one stream to its end.
func followTrafficOnce(ctx context.Context, conn grpc.ClientConnInterface, req *leadlinev1.FollowTrafficRequest, tell func(*leadlinev1.FollowTrafficResponse) error) error {
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	st, err := leadlinev1.NewPositionServiceClient(conn).FollowTraffic(ctx, req)
	if err != nil {
		return err
	}
	for ended := false; ; {
		m, err := st.Recv()
		switch {
		case errors.Is(err, io.EOF) && ended:
			return nil
		case errors.Is(err, io.EOF):
			return status.Error(codes.Unavailable, "the server ended the stream without a word")
		case err != nil:
			return err
		}
		ended = m.GetPicture().GetEnded()
		if err := tell(m); err != nil {
			return &callback{err}
		}
	}
}
