package server

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"hash"
	"math"
	"math/rand/v2"
	"net"
	"sync"
	"testing"
	"time"

	"go.uber.org/goleak"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	healthv1 "google.golang.org/grpc/health/grpc_health_v1"
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
	s, err := session.New(session.Config{
		Vehicle: "v", Space: sea().Space,
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

// TestSameAsReplay proves that a drive gives the same posteriors, bit for bit,
// through the server as through a session alone, whatever the batches.
func TestSameAsReplay(t *testing.T) {
	_, conn := serve(t, Config{})
	const seconds = 10
	evs := voyage(1, seconds)
	want, released, times := replayed(t, evs)
	if times != seconds {
		t.Fatalf("%d times in a voyage of %d", times, seconds)
	}
	for _, batch := range []int{1, 7, 5000} {
		var ps []*leadlinev1.Posterior
		d := client.Drive{Header: header("v"), Batch: batch, Window: 3, Reply: leadlinev1.Reply_REPLY_EVERY}
		d.OnPosterior = func(p *leadlinev1.Posterior) { ps = append(ps, p) }
		closed, err := fed(limited(t), conn, d, evs)
		if err != nil {
			t.Fatal(err)
		}
		if closed.GetPosteriorSha256() != want {
			t.Errorf("batch %d: hash %s, want %s", batch, closed.GetPosteriorSha256(), want)
		}
		if len(ps) != released || closed.GetPosteriors() != uint64(times) || closed.GetAccepted() != uint64(len(evs)) || closed.GetRefused() != 0 {
			t.Errorf("batch %d: %d posteriors arrived of %d; closed says %d times of %d, %d accepted, %d refused",
				batch, len(ps), released, closed.GetPosteriors(), times, closed.GetAccepted(), closed.GetRefused())
		}
		for i := 1; i < len(ps); i++ {
			a, b := ps[i-1].GetTime().AsTime(), ps[i].GetTime().AsTime()
			if !b.After(a) && !(b.Equal(a) && ps[i].GetRevises()) {
				t.Errorf("batch %d: posterior of %v after that of %v", batch, b, a)
			}
		}
	}
}

// TestManyVehicles proves that vehicles at once do not disturb one another:
// each has its own events, all and in their order.
func TestManyVehicles(t *testing.T) {
	_, conn := serve(t, Config{NewSession: newTally})
	ctx := limited(t)
	var wg sync.WaitGroup
	for i := range 20 {
		evs := voyage(uint64(i), 200)
		want := tallied(evs)
		wg.Go(func() {
			name := fmt.Sprint("v", i)
			closed, err := fed(ctx, conn, client.Drive{Header: header(name), Batch: 1 + i, Window: 1 + i%3, Reply: leadlinev1.Reply(i % 4)}, evs)
			if err != nil || closed.GetPosteriorSha256() != want {
				t.Errorf("vehicle %d: %v, %v; want hash %s", i, closed, err, want)
			}
			where, err := leadlinev1.NewPositionServiceClient(conn).Where(ctx, &leadlinev1.WhereRequest{Vehicle: name})
			if err != nil || where.GetPosteriorSha256() != want || !where.GetEnded() {
				t.Errorf("vehicle %d: where says %v, %v", i, where, err)
			}
		})
	}
	wg.Wait()
}

// TestPosterior proves that the figures of a posterior reach the message, in
// the message's units.
func TestPosterior(t *testing.T) {
	now := time.Unix(0, int64(began)).Add(100 * time.Second)
	_, conn := serve(t, Config{Now: func() time.Time { return now }})
	evs := voyage(2, 10)
	s, err := session.New(session.Config{Space: sea().Space, Start: session.Start{Kind: session.AtPoint, Point: middle, SigmaM: 100}})
	if err != nil {
		t.Fatal(err)
	}
	for _, ev := range evs {
		if _, err := s.Add(ev); err != nil {
			t.Fatal(err)
		}
	}
	s.Flush()
	want := s.Latest()
	closed, err := fed(limited(t), conn, client.Drive{Header: header("v")}, evs)
	if err != nil {
		t.Fatal(err)
	}
	p := closed.GetPosterior()
	at, err := wire.Position(p.GetMean())
	// Degrees name a radian within two units in the last place.
	if err != nil || math.Abs(at.Lon-want.Mean.Lon) > 3*0x1p-52*want.Mean.Lon || math.Abs(at.Lat-want.Mean.Lat) > 3*0x1p-52*want.Mean.Lat {
		t.Errorf("mean %v, %v; want %v", at, err, want.Mean)
	}
	if p.GetVehicle() != "v" || p.GetMap() != "sea" || p.GetMapFingerprint() != sea().Space.Fingerprint() {
		t.Errorf("vehicle %q on map %q, %q", p.GetVehicle(), p.GetMap(), p.GetMapFingerprint())
	}
	if !p.GetAsOf().AsTime().Equal(now) || p.GetAgeS() != 90 || p.GetDurable() || p.GetTime().AsTime().UnixNano() != int64(began+10e9) {
		t.Errorf("time %v as of %v, age %v s, durable %v", p.GetTime().AsTime(), p.GetAsOf().AsTime(), p.GetAgeS(), p.GetDurable())
	}
	for _, c := range []struct {
		what      string
		got, want float64
	}{
		{"covariance east", p.GetCovariance().GetEastM2(), want.Cov.EE},
		{"covariance east-north", p.GetCovariance().GetEastNorthM2(), want.Cov.EN},
		{"covariance north", p.GetCovariance().GetNorthM2(), want.Cov.NN},
		{"50 % radius", p.GetRadii().GetRadius50M(), want.Radius50M},
		{"95 % radius", p.GetRadii().GetRadius95M(), want.Radius95M},
		{"99 % radius", p.GetRadii().GetRadius99M(), want.Radius99M},
		{"entropy", p.GetEntropyNats(), want.EntropyNats},
		{"log evidence", p.GetLogEvidence(), want.LogEvidence},
		{"status", float64(p.GetStatus()), float64(want.Status)},
		{"modes", float64(len(p.GetModes())), float64(len(want.Modes))},
		{"mass of the first mode", p.GetModes()[0].GetMass(), want.Modes[0].Mass},
		{"evidence", float64(len(p.GetEvidence())), float64(len(want.Evidence))},
		{"accepted", float64(p.GetCounts().GetAccepted()), float64(len(evs))},
		{"speed", p.GetSpeed().GetMps(), want.Speed.MPS},
		{"protection risk", p.GetProtection().GetRisk(), want.Protection.Risk},
		{"most probable cell", p.GetMostProbable().GetProbability(), want.MostProbable.Mass},
	} {
		if c.got != c.want {
			t.Errorf("%s is %v, want %v", c.what, c.got, c.want)
		}
	}
	if p.MostProbable.Edge != nil || (p.Protection.RadiusM != nil) != want.Protection.Bounded {
		t.Errorf("most probable %v, protection %v, want %+v", p.GetMostProbable(), p.GetProtection(), want.Protection)
	}
}

// TestResume proves that a broken drive goes on where its acknowledgements
// stopped, and that nothing counts twice.
func TestResume(t *testing.T) {
	_, conn := serve(t, Config{NewSession: newTally})
	evs := voyage(3, 40)
	want := tallied(evs)
	d := client.Drive{Header: header("v"), Name: "monday", Batch: 4, Window: 2}
	for _, sent := range []int{10, 25, 33} {
		f, err := client.Open(limited(t), conn, d)
		if err != nil {
			t.Fatal(err)
		}
		for _, ev := range evs[:sent] {
			if err := f.Send(wire.FromEvent(ev)); err != nil {
				t.Fatal(err)
			}
		}
		f.Abort()
	}
	closed, err := fed(limited(t), conn, d, evs)
	if err != nil || closed.GetPosteriorSha256() != want || closed.GetAccepted() != uint64(len(evs)) {
		t.Errorf("resumed: %v, %v; want %d measurements, hash %s", closed, err, len(evs), want)
	}
	// The word at the end can be asked for again.
	again, err := fed(limited(t), conn, d, evs)
	if err != nil || again.GetPosteriorSha256() != want {
		t.Errorf("ended once more: %v, %v", again, err)
	}
}

// TestDrain proves that Shutdown acknowledges what has arrived, ends streams
// with a reason, and lets nobody in.
func TestDrain(t *testing.T) {
	s, conn := serve(t, Config{NewSession: newTally})
	ctx := limited(t)
	st, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d"})
	if err := st.Send(batch(1, voyage(4, 3)...)); err != nil {
		t.Fatal(err)
	}
	for {
		m, err := st.Recv()
		if err != nil {
			t.Fatal(err)
		}
		if r := m.GetReceipt(); r != nil {
			if r.GetSequence() != 1 || r.GetAccepted() != 3 || r.GetDurable() {
				t.Errorf("receipt %v", r)
			}
			break
		}
	}
	healthy := healthv1.NewHealthClient(conn)
	if r, err := healthy.Check(ctx, &healthv1.HealthCheckRequest{Service: "leadline.v1.PositionService"}); err != nil || r.GetStatus() != healthv1.HealthCheckResponse_SERVING {
		t.Errorf("health: %v, %v", r, err)
	}
	stopped := make(chan error, 1)
	go func() { stopped <- s.Shutdown(ctx) }()
	if _, err := st.Recv(); status.Code(err) != codes.Unavailable {
		t.Errorf("the stream ended with %v, want UNAVAILABLE", err)
	}
	if err := <-stopped; err != nil {
		t.Errorf("shutdown: %v", err)
	}
	if _, err := client.Open(ctx, conn, client.Drive{Header: header("w")}); err == nil {
		t.Error("a drive was opened after shutdown")
	}
}

// TestShutdownCutsOff proves that a reader who never reads cannot hold up
// Shutdown beyond its context.
func TestShutdownCutsOff(t *testing.T) {
	s, conn := serve(t, Config{NewSession: newTally})
	st, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d", Reply: leadlinev1.Reply_REPLY_EVERY})
	evs := voyage(4, 5000)
	go func() {
		for i := range evs {
			if st.Send(batch(uint64(i+1), evs[i])) != nil {
				return
			}
		}
	}()
	// Wait until the stream stands still: the replies fill the window.
	for last := ""; ; time.Sleep(time.Second) {
		r, err := leadlinev1.NewPositionServiceClient(conn).Where(limited(t), &leadlinev1.WhereRequest{Vehicle: "v"})
		if err == nil {
			if now := r.GetPosterior().GetTime().String(); now == last {
				break
			} else {
				last = now
			}
		}
	}
	ctx, cancel := context.WithTimeout(context.Background(), 100*time.Millisecond)
	defer cancel()
	if err := s.Shutdown(ctx); !errors.Is(err, context.DeadlineExceeded) {
		t.Errorf("shutdown: %v, want that it was cut off", err)
	}
}
