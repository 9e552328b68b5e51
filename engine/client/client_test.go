package client

import (
	"context"
	"errors"
	"net"
	"strings"
	"testing"
	"time"

	"go.uber.org/goleak"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	leadlinev1 "leadline/proto/leadline/v1"
)

type serverStream = grpc.BidiStreamingServer[leadlinev1.FeedRequest, leadlinev1.FeedResponse]

// script is a server whose side of the talk is written by the test.
type script struct {
	leadlinev1.UnimplementedPositionServiceServer
	feed func(serverStream) error
}

func (s script) Feed(st serverStream) error { return s.feed(st) }

// against serves a script until the test ends, see serveUntilEnd.
func against(t *testing.T, feed func(serverStream) error) *grpc.ClientConn {
	t.Helper()
	return serveUntilEnd(t, script{feed: feed})
}

// serveUntilEnd serves calls until the test ends, and proves then that no
// goroutine is left.
func serveUntilEnd(t *testing.T, calls leadlinev1.PositionServiceServer) *grpc.ClientConn {
	t.Helper()
	before := goleak.IgnoreCurrent()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	s := grpc.NewServer()
	leadlinev1.RegisterPositionServiceServer(s, calls)
	served := make(chan error, 1)
	go func() { served <- s.Serve(l) }()
	conn, err := Dial(l.Addr().String())
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		conn.Close()
		s.Stop()
		if err := <-served; err != nil {
			t.Error(err)
		}
		goleak.VerifyNone(t, before)
	})
	return conn
}

func limited(t *testing.T) context.Context {
	ctx, cancel := context.WithTimeout(context.Background(), 30*time.Second)
	t.Cleanup(cancel)
	return ctx
}

func opened(sequence uint64, maxBatch, maxBytes uint32) *leadlinev1.FeedResponse {
	return &leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Opened{Opened: &leadlinev1.Opened{
		Sequence: sequence, MaxBatch: maxBatch, MaxMessageBytes: maxBytes,
	}}}
}

func receipt(sequence uint64) *leadlinev1.FeedResponse {
	return &leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Receipt{Receipt: &leadlinev1.Receipt{
		Sequence: sequence, Refusals: []*leadlinev1.Refusal{{Detail: "too late"}},
	}}}
}

var closing = &leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Closed{Closed: &leadlinev1.Closed{Posteriors: 7}}}

func measurement(i int) *leadlinev1.SensorMeasurement {
	return &leadlinev1.SensorMeasurement{Number: uint64(i), Measurement: &leadlinev1.Measurement{
		Kind: &leadlinev1.Measurement_Standstill{Standstill: &leadlinev1.Standstill{}},
	}}
}

// TestFlow proves that every measurement travels once, in order, in batches
// within the server's bounds, skipping what the server has, and that no more
// than the window is ever unacknowledged.
func TestFlow(t *testing.T) {
	const n, window, maxBytes = 1000, 3, 150
	var got []uint64
	var most, batches int
	conn := against(t, func(st serverStream) error {
		m, err := st.Recv()
		if err != nil || m.GetOpen().GetDrive() != "monday" || m.GetOpen().GetReply() != leadlinev1.Reply_REPLY_EVERY {
			return errors.New("no proper open")
		}
		if err := st.Send(opened(2, 10, maxBytes)); err != nil {
			return err
		}
		waiting := 0
		for seq := uint64(3); ; {
			m, err := st.Recv()
			if err != nil {
				return err
			}
			if m.GetEnd() != nil {
				return st.Send(closing)
			}
			b := m.GetBatch()
			if b.GetSequence() != seq || len(b.GetMeasurements()) > 10 || proto.Size(m) > maxBytes {
				return status.Errorf(codes.InvalidArgument, "batch %d of %d measurements, %d bytes; want sequence %d", b.GetSequence(), len(b.GetMeasurements()), proto.Size(m), seq)
			}
			for _, z := range b.GetMeasurements() {
				got = append(got, z.GetNumber())
			}
			batches++
			waiting++
			most = max(most, waiting)
			// Acknowledge by threes and twos, after a pause in which too eager
			// a client would go on.
			if waiting == window || waiting == 2 && seq%5 == 0 {
				if seq < 30 {
					time.Sleep(time.Millisecond)
				}
				if err := st.Send(receipt(seq)); err != nil {
					return err
				}
				waiting = 0
			}
			seq++
		}
	})
	refusals := 0
	f, err := Open(limited(t), conn, Drive{
		Name: "monday", Batch: 500, Window: window, Reply: leadlinev1.Reply_REPLY_EVERY,
		OnRefusal: func(*leadlinev1.Refusal) { refusals++ },
	})
	if err != nil {
		t.Fatal(err)
	}
	for i := range n {
		if err := f.Send(measurement(i)); err != nil {
			t.Fatal(err)
		}
	}
	closed, err := f.Close()
	if err != nil || closed.GetPosteriors() != 7 {
		t.Fatalf("closed: %v, %v", closed, err)
	}
	// The first two batches were in: what arrives begins after them.
	if len(got) == 0 || got[0] == 0 || got[0] > 20 {
		t.Fatalf("arrived: %v", got)
	}
	for i, v := range got {
		if v != got[0]+uint64(i) {
			t.Fatalf("measurement %d is number %d, want %d", i, v, got[0]+uint64(i))
		}
	}
	if last := got[len(got)-1]; last != n-1 || most != window || refusals == 0 || batches < n/10 {
		t.Errorf("arrived up to %d in %d batches; %d waited at most, %d refusals", last, batches, most, refusals)
	}
}

// TestFailures proves that whatever the server does, the client comes to an
// end and says why.
func TestFailures(t *testing.T) {
	for _, c := range []struct {
		what, want string
		feed       func(serverStream) error
	}{
		{"a refusal to open", "no such map", func(serverStream) error { return status.Error(codes.NotFound, "no such map") }},
		{"another answer to open", "another version", func(st serverStream) error { return st.Send(closing) }},
		{"an end without a word", "without a word", func(st serverStream) error { return st.Send(opened(0, 4, 1<<20)) }},
		{"a failure at once", "broke", func(st serverStream) error {
			_ = st.Send(opened(0, 4, 1<<20))
			return status.Error(codes.Internal, "it broke")
		}},
		{"a failure later", "broke", func(st serverStream) error {
			_ = st.Send(opened(0, 4, 1<<20))
			for range 3 {
				_, _ = st.Recv()
			}
			return status.Error(codes.Internal, "it broke")
		}},
		{"receipts for what was never sent", "broke", func(st serverStream) error {
			_ = st.Send(opened(0, 4, 1<<20))
			_ = st.Send(receipt(1 << 63))
			return status.Error(codes.Internal, "it broke")
		}},
	} {
		t.Run(c.what, func(t *testing.T) {
			conn := against(t, c.feed)
			f, err := Open(limited(t), conn, Drive{Window: 2})
			for i := 0; err == nil && i < 100; i++ {
				err = f.Send(measurement(i))
			}
			if f != nil {
				closed, end := f.Close()
				if closed != nil || end == nil {
					t.Errorf("closed: %v, %v", closed, end)
				}
				if err == nil {
					err = end
				}
			}
			if err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("got %v, want %q in it", err, c.want)
			}
		})
	}
}

// TestNobodyThere proves that an address without a server is an error, soon.
func TestNobodyThere(t *testing.T) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	l.Close()
	conn, err := Dial(l.Addr().String())
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close()
	if _, err := Open(limited(t), conn, Drive{}); status.Code(err) != codes.Unavailable {
		t.Errorf("got %v, want UNAVAILABLE", err)
	}
	if _, err := Open(limited(t), conn, Drive{Window: -1}); err == nil {
		t.Error("a window of -1 was taken")
	}
}
