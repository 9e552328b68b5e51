package client

import (
	"context"
	"net"
	"sync/atomic"
	"testing"
	"time"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/credentials/insecure"
	"google.golang.org/grpc/resolver"
	"google.golang.org/grpc/resolver/manual"
	"google.golang.org/grpc/status"

	leadlinev1 "leadline/proto/leadline/v1"
)

// cuttable is a server that may say that it is cut off, of calls and of streams that it
// has already.
type cuttable struct {
	leadlinev1.UnimplementedPositionServiceServer
	cut   atomic.Bool
	calls atomic.Int64
	have  *atomic.Uint64 // batches of the drive, which both know of
}

func cutOffError() error {
	st, _ := status.New(codes.Unavailable, "this server is cut off: call another one").WithDetails(
		&errdetails.ErrorInfo{Reason: "RECOVERING", Domain: domain, Metadata: map[string]string{"server": "cut off"}})
	return st.Err()
}

func (c *cuttable) Where(context.Context, *leadlinev1.WhereRequest) (*leadlinev1.WhereResponse, error) {
	if c.calls.Add(1); c.cut.Load() {
		return nil, cutOffError()
	}
	return &leadlinev1.WhereResponse{}, nil
}

func (c *cuttable) Feed(st serverStream) error {
	if c.cut.Load() {
		return cutOffError()
	}
	if _, err := st.Recv(); err != nil {
		return err
	}
	if err := st.Send(opened(c.have.Load(), 64, 1<<20)); err != nil {
		return err
	}
	for {
		m, err := st.Recv()
		if err != nil {
			return nil //nolint:nilerr // the client has gone
		}
		if c.cut.Load() {
			return cutOffError()
		}
		c.calls.Add(1)
		c.have.Store(m.GetBatch().GetSequence())
		if err := st.Send(receipt(m.GetBatch().GetSequence())); err != nil {
			return err
		}
	}
}

// two are two servers, and a connection to both that begins with the first and leaves
// one that is cut off aside for a time.
func two(t *testing.T, aside time.Duration) (of [2]*cuttable, conn *grpc.ClientConn) {
	t.Helper()
	have := new(atomic.Uint64)
	turn := &turning{r: manual.NewBuilderWithScheme("leadline"), aside: aside}
	for i := range of {
		l, err := net.Listen("tcp", "127.0.0.1:0")
		if err != nil {
			t.Fatal(err)
		}
		s := grpc.NewServer()
		of[i] = &cuttable{have: have}
		leadlinev1.RegisterPositionServiceServer(s, of[i])
		go func() { _ = s.Serve(l) }() // until it is stopped
		t.Cleanup(s.Stop)
		turn.all = append(turn.all, resolver.Address{Addr: l.Addr().String()})
	}
	turn.r.InitialState(resolver.State{Addresses: turn.all})
	options := append(append(dialOptions(), turn.options()...), grpc.WithTransportCredentials(insecure.NewCredentials()))
	conn, err := grpc.NewClient(turn.r.Scheme()+":///servers", options...)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { conn.Close() })
	return of, conn
}

// untilTaken calls until a server takes the call, and returns how often one did not.
func untilTaken(t *testing.T, conn *grpc.ClientConn) (refused int) {
	t.Helper()
	for ctx := limited(t); ; refused++ {
		_, err := leadlinev1.NewPositionServiceClient(conn).Where(ctx, &leadlinev1.WhereRequest{})
		if err == nil {
			return refused
		}
		if why, ours := WhyOf(err); !ours || why.About["server"] != "cut off" || ctx.Err() != nil {
			t.Fatal(err)
		}
	}
}

// TestTurn proves that calls go to another server once one says that it is cut off,
// though its connection lasts, and that it is asked again when it has been left aside.
func TestTurn(t *testing.T) {
	const aside = 300 * time.Millisecond
	of, conn := two(t, aside)
	if n := untilTaken(t, conn); n != 0 || of[0].calls.Load() != 1 {
		t.Fatalf("the first call is refused %d times, and the first server has %d", n, of[0].calls.Load())
	}
	of[0].cut.Store(true)
	began := time.Now()
	// A call may be under way to the first one while the connection turns.
	if n := untilTaken(t, conn); n < 1 || of[1].calls.Load() != 1 {
		t.Errorf("a call is refused %d times, and the other server has %d", n, of[1].calls.Load())
	}
	before := of[0].calls.Load()
	for range 20 {
		if n := untilTaken(t, conn); n > 0 {
			t.Error("a server that is left aside was asked")
		}
	}
	if time.Since(began) < aside && of[0].calls.Load() != before {
		t.Error("a server that is left aside was asked")
	}
	// It is used again when the other one is cut off, after a while.
	of[0].cut.Store(false)
	time.Sleep(time.Until(began.Add(aside + 100*time.Millisecond)))
	of[1].cut.Store(true)
	if untilTaken(t, conn); of[0].calls.Load() == before {
		t.Error("the first server is not used again")
	}
}

// TestTurnOfStream proves the same of a drive: a stream that is ended since its server
// is cut off is opened at the other one, and goes on.
func TestTurnOfStream(t *testing.T) {
	of, conn := two(t, time.Minute)
	c, err := Carry(limited(t), conn, Drive{Header: &leadlinev1.DriveHeader{Vehicle: "v"}, Batch: 1, Window: 1})
	if err != nil {
		t.Fatal(err)
	}
	defer c.Abort()
	began := time.Now()
	for i := range 20 {
		if i == 10 {
			of[0].cut.Store(true)
		}
		if err := c.Send(&leadlinev1.SensorMeasurement{}); err != nil {
			t.Fatal(err)
		}
	}
	if of[0].calls.Load() == 0 || of[1].calls.Load() == 0 {
		t.Errorf("the servers have %d and %d batches", of[0].calls.Load(), of[1].calls.Load())
	}
	if took := time.Since(began); took > 5*time.Second {
		t.Errorf("it took %v", took)
	}
}

// TestTurnByName proves that a server is known by a host's name, too.
func TestTurnByName(t *testing.T) {
	for _, c := range []struct {
		address, connected string
		same               bool
	}{
		{"127.0.0.1:7700", "127.0.0.1:7700", true},
		{"localhost:7700", "127.0.0.1:7700", true},
		{"localhost:7700", "127.0.0.1:7701", false},
		{"127.0.0.2:7700", "127.0.0.1:7700", false},
		{"no port", "127.0.0.1:7700", false},
	} {
		if names(c.address, c.connected) != c.same {
			t.Errorf("%s and %s: want %v", c.address, c.connected, c.same)
		}
	}
}
