package web

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"os/exec"
	"strings"
	"testing"
	"time"

	"go.uber.org/goleak"
	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/credentials/insecure"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/peer"
	"google.golang.org/grpc/status"

	leadlinev1 "leadline/proto/leadline/v1"
)

// invented is a service whose answers are told by the vehicle's name.
type invented struct {
	leadlinev1.UnimplementedPositionServiceServer

	draining chan struct{}
	over     chan error // how each Follow that waited ended
	entered  chan struct{}
	leave    chan struct{} // lets Where of "slow" answer
}

func (s *invented) Where(ctx context.Context, req *leadlinev1.WhereRequest) (*leadlinev1.WhereResponse, error) {
	_ = grpc.SetHeader(ctx, metadata.Pairs("seen", strings.Join(metadata.ValueFromIncomingContext(ctx, "said"), "+")))
	_ = grpc.SetTrailer(ctx, metadata.Pairs("last", "word"))
	out := &leadlinev1.WhereResponse{}
	for _, v := range req.GetVehicles() {
		switch v {
		case "nobody":
			st, _ := status.New(codes.NotFound, `there is no vehicle "nobody" here`).WithDetails(&errdetails.ErrorInfo{
				Domain: "leadline.v1", Reason: "UNKNOWN_VEHICLE", Metadata: map[string]string{"vehicle": v},
			})
			return nil, st.Err()
		case "slow":
			s.entered <- struct{}{}
			<-s.leave
		case "late":
			<-ctx.Done()
			return nil, ctx.Err()
		case "me":
			p, _ := peer.FromContext(ctx)
			v = p.Addr.String()
		case "broken":
			panic("a defect")
		}
		out.Answers = append(out.Answers, &leadlinev1.WhereAnswer{Vehicle: v, PosteriorSha256: "0123"})
	}
	return out, nil
}

// Follow tells of each vehicle three times; if there is none it waits.
func (s *invented) Follow(req *leadlinev1.FollowRequest, stream grpc.ServerStreamingServer[leadlinev1.FollowResponse]) (err error) {
	if err := stream.SendHeader(metadata.Pairs("leadline-version", "invented")); err != nil {
		return err
	}
	if len(req.GetVehicles()) == 0 {
		defer func() { s.over <- err }()
		s.entered <- struct{}{}
		select {
		case <-stream.Context().Done():
			return status.FromContextError(stream.Context().Err()).Err()
		case <-s.draining:
			return status.Error(codes.Unavailable, "the server stops")
		}
	}
	for _, v := range req.GetVehicles() {
		if v == "endless" {
			defer func() { s.over <- err }()
			for {
				if err := stream.Send(&leadlinev1.FollowResponse{Vehicle: strings.Repeat("e", 10000)}); err != nil {
					return err
				}
			}
		}
		for i := range uint64(3) {
			if err := stream.Send(&leadlinev1.FollowResponse{Vehicle: v, Skipped: i}); err != nil {
				return err
			}
		}
	}
	return nil
}

// both is a server of gRPC and of HTTP on one port.
type both struct {
	*invented
	address string
	web     *Server
	conn    *grpc.ClientConn
	log     *bytes.Buffer
}

// both starts one that ends with the test, which proves then that nothing is
// left.
func serveBoth(t testing.TB, cfg Config) *both {
	t.Helper()
	before := goleak.IgnoreCurrent()
	b := &both{
		invented: &invented{draining: make(chan struct{}), over: make(chan error, 10), entered: make(chan struct{}, 10), leave: make(chan struct{})},
		log:      &bytes.Buffer{},
	}
	if cfg.MessageBytes == 0 {
		cfg.MessageBytes = 1 << 20
	}
	if cfg.Connections == 0 {
		cfg.Connections = 100
	}
	cfg.Log = slog.New(slog.NewTextHandler(b.log, nil))
	var err error
	if b.web, err = New(cfg); err != nil {
		t.Fatal(err)
	}
	g := grpc.NewServer()
	leadlinev1.RegisterPositionServiceServer(g, b.invented)
	leadlinev1.RegisterPositionServiceServer(b.web, b.invented)
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	b.address = l.Addr().String()
	http2, others := Split(l, nil)
	served := make(chan error, 2)
	go func() { served <- g.Serve(http2) }()
	go func() { served <- b.web.Serve(others) }()
	if b.conn, err = grpc.NewClient(b.address, grpc.WithTransportCredentials(insecure.NewCredentials())); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		b.conn.Close()
		ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
		defer cancel()
		if err := b.web.Shutdown(ctx); err != nil {
			t.Errorf("shutdown: %v", err)
		}
		g.Stop()
		for range 2 {
			if err := <-served; err != nil && !errors.Is(err, net.ErrClosed) {
				t.Errorf("serve: %v", err)
			}
		}
		goleak.VerifyNone(t, before)
	})
	return b
}

// url is that of a call.
func (b *both) url(method string) string {
	return fmt.Sprintf("http://%s/%s/%s", b.address, leadlinev1.PositionService_ServiceDesc.ServiceName, method)
}

// curl runs it and returns the status and the body.
func curl(t *testing.T, args ...string) (status, body string) {
	t.Helper()
	if _, err := exec.LookPath("curl"); err != nil {
		t.Skip("curl is not installed")
	}
	cmd := exec.CommandContext(t.Context(), "curl", append([]string{"--silent", "--show-error", "--max-time", "30", "--write-out", "\n%{http_code}"}, args...)...)
	var errs bytes.Buffer
	cmd.Stderr = &errs
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("curl %.300q: %v: %s%s", args, err, errs.String(), out)
	}
	at := bytes.LastIndexByte(out, '\n')
	return string(out[at+1:]), string(out[:at])
}

// post is the arguments of a call in JSON.
func post(url, body string, more ...string) []string {
	return append([]string{"-H", "Content-Type: application/json", "-d", body, url}, more...)
}

// failure is an error of Connect in JSON.
type failure struct {
	Code, Message string
	Details       []struct {
		Type  string
		Debug struct {
			Reason, Domain string
			Metadata       map[string]string
		}
	}
}

func parse[T any](t *testing.T, body string) (out T) {
	t.Helper()
	if err := json.Unmarshal([]byte(body), &out); err != nil {
		t.Fatalf("%v in %s", err, body)
	}
	return out
}
