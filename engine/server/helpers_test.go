package server

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"hash"
	"math/rand/v2"
	"net"
	"os"
	"regexp"
	"strings"
	"testing"
	"time"

	"go.uber.org/goleak"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"leadline/engine/client"
	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

type rawStream = grpc.BidiStreamingClient[leadlinev1.FeedRequest, leadlinev1.FeedResponse]

// raw opens a stream and says nothing.
func raw(t *testing.T, conn *grpc.ClientConn) rawStream {
	t.Helper()
	st, err := leadlinev1.NewPositionServiceClient(conn).Feed(limited(t))
	if err != nil {
		t.Fatal(err)
	}
	return st
}

// openRaw opens a drive by hand.
func openRaw(t *testing.T, conn *grpc.ClientConn, o *leadlinev1.Open) (rawStream, *leadlinev1.Opened) {
	t.Helper()
	st := raw(t, conn)
	if err := st.Send(opening(o)); err != nil {
		t.Fatal(err)
	}
	m, err := st.Recv()
	if err != nil {
		t.Fatal(err)
	}
	return st, m.GetOpened()
}

func opening(o *leadlinev1.Open) *leadlinev1.FeedRequest {
	return &leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_Open{Open: o}}
}

func batch(seq uint64, evs ...sensor.Event) *leadlinev1.FeedRequest {
	b := &leadlinev1.Batch{Sequence: seq}
	for _, ev := range evs {
		b.Measurements = append(b.Measurements, wire.FromEvent(ev))
	}
	return &leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_Batch{Batch: b}}
}

var ending = &leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_End{End: &leadlinev1.End{}}}

// ends reads a stream to its end.
func ends(st rawStream) error {
	for {
		if _, err := st.Recv(); err != nil {
			return err
		}
	}
}

// wantStatus checks an error's code and that its message is one line that says
// what is wanted.
func wantStatus(t *testing.T, what string, err error, code codes.Code, words string) {
	t.Helper()
	msg := status.Convert(err).Message()
	if status.Code(err) != code || !strings.Contains(msg, words) || strings.Contains(msg, "\n") {
		t.Errorf("%s:\n got %v\nwant %v with %q", what, err, code, words)
	}
}

var middle = geo.FromDegrees(5, 53)

// began is the beginning of every drive here: 2030-05-01 12:00 UTC.
const began sensor.Time = 1903867200e9

// sea is an open plane, without heights.
func sea() Map { return Map{Name: "sea", Space: plane.Open(middle, 20e3, 20)} }

// serve runs a server on a loopback port until the test ends, and proves then
// that no goroutine is left.
func serve(t *testing.T, cfg Config) (*Server, *grpc.ClientConn) {
	t.Helper()
	before := goleak.IgnoreCurrent()
	if cfg.Maps == nil {
		cfg.Maps = []Map{sea()}
	}
	s, err := New(cfg)
	if err != nil {
		t.Fatal(err)
	}
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	served := make(chan error, 1)
	go func() { served <- s.Serve(l) }()
	conn, err := client.Dial(l.Addr().String())
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		conn.Close()
		ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
		defer cancel()
		if err := s.Shutdown(ctx); err != nil {
			t.Errorf("shutdown: %v", err)
		}
		if err := <-served; err != nil {
			t.Errorf("serve: %v", err)
		}
		goleak.VerifyNone(t, before)
	})
	return s, conn
}

// limited is a context that ends before the test's own deadline does.
func limited(t *testing.T) context.Context {
	ctx, cancel := context.WithTimeout(context.Background(), 60*time.Second)
	t.Cleanup(cancel)
	return ctx
}

// header starts a vehicle near the middle of the sea.
func header(vehicle string) *leadlinev1.DriveHeader {
	return wire.FromHeader(wire.Header{Vehicle: vehicle, Map: "sea", Start: wire.Start{Point: middle, SigmaM: 100}})
}

// voyage is n seconds of a log and, every fifth second, a satellite fix with
// 10 m of noise: invented.
func voyage(seed uint64, n int) []sensor.Event {
	rng := rand.New(rand.NewPCG(seed, 1))
	frame := geo.NewFrame(middle)
	var evs []sensor.Event
	var at geo.Point
	for i := range n {
		now := began + sensor.Time(i+1)*1e9
		d := geo.Point{E: 5 + rng.NormFloat64(), N: 3 + rng.NormFloat64()}
		at = at.Add(d)
		evs = append(evs, sensor.Event{Time: now, Sensor: "log", Number: uint64(i), Measurement: sensor.Displacement{
			Since: now - 1e9, EastM: d.E + 0.3*rng.NormFloat64(), NorthM: d.N + 0.3*rng.NormFloat64(), CovM2: [3]float64{0.09, 0, 0.09},
		}})
		if i%5 == 4 {
			p := geo.Point{E: at.E + 10*rng.NormFloat64(), N: at.N + 10*rng.NormFloat64()}
			evs = append(evs, sensor.Event{Time: now, Sensor: "gnss", Number: uint64(i), Measurement: sensor.Fix{
				Position: frame.Inverse(p), SigmaM: 10,
			}})
		}
	}
	// What the server gets is what came out of a message once.
	for i, ev := range evs {
		evs[i], _ = wire.ToEvent(wire.FromEvent(ev))
	}
	return evs
}

// replayed runs a voyage through a session without a server.
func replayed(t *testing.T, evs []sensor.Event) (hash string, released, times int) {
	t.Helper()
	return replayedIn(t, 0, 0, evs)
}

// replayedIn does so with a belief of at most so many cells, and a posterior each
// time or at most each so many seconds.
func replayedIn(t *testing.T, maxCells int, posteriorS float64, evs []sensor.Event) (hash string, released, times int) {
	t.Helper()
	s, err := session.New(session.Config{
		Vehicle: "v", Space: sea().Space, MaxCells: maxCells, PosteriorS: posteriorS,
		Start: session.Start{Kind: session.AtPoint, Point: middle, SigmaM: 100},
	})
	if err != nil {
		t.Fatal(err)
	}
	count := func(ps []*summary.Posterior) {
		released += len(ps)
		for _, p := range ps {
			if !p.Revises {
				times++
			}
		}
	}
	for _, ev := range evs {
		ps, err := s.Add(ev)
		if err != nil {
			t.Fatal(err)
		}
		count(ps)
	}
	count(s.Flush())
	return s.Hash(), released, times
}

// where asks for one vehicle; why there is no answer comes as an error, with
// the code that its reason has.
func where(t *testing.T, conn *grpc.ClientConn, req *leadlinev1.WhereRequest) (*leadlinev1.WhereAnswer, error) {
	t.Helper()
	resp, err := leadlinev1.NewPositionServiceClient(conn).Where(limited(t), req)
	if err != nil {
		return nil, err
	}
	if len(resp.GetAnswers()) != 1 || resp.GetAnswers()[0].GetVehicle() != req.GetVehicles()[0] {
		t.Fatalf("%d answers, first for %q", len(resp.GetAnswers()), resp.GetAnswers()[0].GetVehicle())
	}
	a := resp.GetAnswers()[0]
	if f := a.GetFailure(); f != nil {
		if a.GetPosterior() != nil {
			t.Errorf("a posterior beside the failure %v", f)
		}
		return a, status.Error(reasonCodes[f.GetReason()], f.GetMessage())
	}
	return a, nil
}

// tally is a session without a filter, for tests of what is around it: each
// event makes a posterior, and the hash is over all that enters one.
type tally struct {
	hash  hash.Hash
	last  *summary.Posterior
	count uint64
}

func newTally(session.Config) (Session, error) { return &tally{hash: sha256.New()}, nil }

func (s *tally) Add(ev sensor.Event) ([]*summary.Posterior, error) {
	fmt.Fprintf(s.hash, "%+v\n", ev)
	s.count++
	s.last = &summary.Posterior{TimeNS: int64(ev.Time), Status: summary.Unsure}
	return []*summary.Posterior{s.last}, nil
}
func (s *tally) Flush() []*summary.Posterior        { return nil }
func (s *tally) Withdrawn() []sensor.Time           { return nil }
func (s *tally) Latest() *summary.Posterior         { return s.last }
func (s *tally) Counts() (accepted, refused uint64) { return s.count, 0 }
func (s *tally) Hash() string                       { return hex.EncodeToString(s.hash.Sum(nil)) }

// tallied is the hash of a voyage that a tally should come to.
func tallied(evs []sensor.Event) string {
	s, _ := newTally(session.Config{})
	for _, ev := range evs {
		_, _ = s.Add(ev)
	}
	return s.Hash()
}

// fed runs a voyage through a server.
func fed(ctx context.Context, conn *grpc.ClientConn, d client.Drive, evs []sensor.Event) (*leadlinev1.Closed, error) {
	f, err := client.Open(ctx, conn, d)
	if err != nil {
		return nil, err
	}
	for _, ev := range evs {
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			f.Abort()
			return nil, err
		}
	}
	return f.Close()
}

// farOff is on no map here.
var farOff = geo.FromDegrees(-70, 10)

// reasonComment is what reason.proto says about a reason.
func reasonComment(t *testing.T, r leadlinev1.Reason) string {
	t.Helper()
	text, err := os.ReadFile("../../proto/leadline/v1/reason.proto")
	if err != nil {
		t.Fatal(err)
	}
	m := regexp.MustCompile(`((?:  //[^\n]*\n)+)  ` + r.String() + ` = `).FindSubmatch(text)
	if m == nil {
		t.Fatalf("reason.proto does not explain %v", r)
	}
	return strings.Join(strings.Fields(strings.ReplaceAll(string(m[1]), "//", "")), " ")
}
