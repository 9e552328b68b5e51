package web

import (
	"context"
	"net"
	"testing"

	"connectrpc.com/connect/v2"
	"connectrpc.com/connect/v2/connecthttp"
	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"

	leadlinev1 "leadline/proto/leadline/v1"
)

// BenchmarkWhere asks one after another: by gRPC with and without Split before
// it, and beside gRPC.
func BenchmarkWhere(b *testing.B) {
	s := serveBoth(b, Config{})
	direct := grpc.NewServer()
	leadlinev1.RegisterPositionServiceServer(direct, s.invented)
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		b.Fatal(err)
	}
	go func() { _ = direct.Serve(l) }()
	defer direct.Stop()
	conn, err := grpc.NewClient(l.Addr().String(), grpc.WithTransportCredentials(insecure.NewCredentials()))
	if err != nil {
		b.Fatal(err)
	}
	defer conn.Close()
	binary, done := client(s)
	defer done()
	json, done := client(s, connecthttp.WithProtoJSON())
	defer done()
	byGRPC := func(conn *grpc.ClientConn) func(context.Context, *leadlinev1.WhereRequest) error {
		return func(ctx context.Context, req *leadlinev1.WhereRequest) error {
			_, err := leadlinev1.NewPositionServiceClient(conn).Where(ctx, req)
			return err
		}
	}
	byConnect := func(c *connect.Client) func(context.Context, *leadlinev1.WhereRequest) error {
		return func(ctx context.Context, req *leadlinev1.WhereRequest) error {
			return c.CallUnary(ctx, connect.Spec{Procedure: leadlinev1.PositionService_Where_FullMethodName}, req, &leadlinev1.WhereResponse{})
		}
	}
	for _, c := range []struct {
		name string
		ask  func(context.Context, *leadlinev1.WhereRequest) error
	}{
		{"gRPC alone", byGRPC(conn)}, {"gRPC", byGRPC(s.conn)}, {"Connect", byConnect(binary)}, {"JSON", byConnect(json)},
	} {
		b.Run(c.name, func(b *testing.B) {
			for b.Loop() {
				if err := c.ask(b.Context(), &leadlinev1.WhereRequest{Vehicles: []string{"v"}}); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
