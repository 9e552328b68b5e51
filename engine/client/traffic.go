package client

import (
	"context"

	"google.golang.org/grpc"

	leadlinev1 "leadline/proto/leadline/v1"
)

// FollowTraffic tells of a road's traffic until its drive has ended, which is nil,
// or ctx is done, or the server refuses, or tell returns an error, which are its
// errors. A stream that breaks is opened again; only the first one must come about.
func FollowTraffic(ctx context.Context, conn grpc.ClientConnInterface, req *leadlinev1.FollowTrafficRequest, tell func(*leadlinev1.FollowTrafficResponse) error) error {
	return stream{once: func(ctx context.Context, _, news func()) error {
		st, err := leadlinev1.NewPositionServiceClient(conn).FollowTraffic(ctx, req)
		if err != nil {
			return err
		}
		return read(st, func(m *leadlinev1.FollowTrafficResponse) (last bool, err error) {
			news()
			return m.GetPicture().GetEnded(), tell(m)
		})
	}}.follow(ctx)
}
