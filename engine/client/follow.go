package client

import (
	"context"

	"google.golang.org/grpc"
	"google.golang.org/protobuf/proto"

	leadlinev1 "leadline/proto/leadline/v1"
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
	broke := func(err error, anew bool) {
		if f.OnBreak != nil {
			f.OnBreak(err, anew)
		}
	}
	return stream{
		once: func(ctx context.Context, begins, news func()) error {
			st, err := leadlinev1.NewPositionServiceClient(conn).Follow(ctx, req)
			if err != nil {
				return err
			}
			if head, err := st.Header(); err == nil && head != nil {
				begins() // which may be long before there is news
			}
			return read(st, func(m *leadlinev1.FollowResponse) (last bool, err error) {
				news()
				req.ResumeToken = m.GetResumeToken()
				return false, f.OnUpdate(m)
			})
		},
		anew: func(err error) bool {
			why, _ := WhyOf(err)
			if req.GetResumeToken() == "" || why.Reason != leadlinev1.Reason_REASON_BAD_TOKEN {
				return false
			}
			req.ResumeToken = ""
			broke(err, true)
			return true
		},
		broke: func(err error) { broke(err, false) },
	}.follow(ctx)
}
