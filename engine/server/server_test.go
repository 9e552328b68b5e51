package server

import (
	"errors"
	"fmt"
	"io"
	"math"
	"sync"
	"testing"
	"time"

	"google.golang.org/grpc/codes"

	"leadline/engine/client"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// blocking is a session that waits when told to, and panics when told to.
type blocking struct {
	Session
	enter, leave chan struct{}
}

func (b *blocking) Add(ev sensor.Event) ([]*summary.Posterior, error) {
	switch ev.Sensor {
	case "wait":
		b.enter <- struct{}{}
		<-b.leave
	case "break":
		panic("broken on purpose")
	}
	return b.Session.Add(ev)
}

// TestOthersGoOn proves that a session that hangs or breaks holds up no other
// vehicle.
func TestOthersGoOn(t *testing.T) {
	enter, leave := make(chan struct{}), make(chan struct{})
	_, conn := serve(t, Config{NewSession: func(c session.Config) (Session, error) {
		s, err := newTally(c)
		return &blocking{s, enter, leave}, err
	}})
	evs := voyage(10, 10)
	want := tallied(evs)
	slow, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("slow"), Drive: "d"})
	wait := evs[0]
	wait.Sensor = "wait"
	if err := slow.Send(batch(1, wait)); err != nil {
		t.Fatal(err)
	}
	<-enter // its owner stands in Add now
	broken, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("broken"), Drive: "d"})
	kaputt := evs[0]
	kaputt.Sensor = "break"
	if err := broken.Send(batch(1, kaputt)); err != nil {
		t.Fatal(err)
	}
	wantStatus(t, "the broken session", ends(broken), codes.Internal, `session of vehicle "broken" failed`)
	_, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"broken"}})
	wantStatus(t, "asking after the broken session", err, codes.NotFound, "no vehicle")
	if closed, err := fed(limited(t), conn, client.Drive{Header: header("v")}, evs); err != nil || closed.GetPosteriorSha256() != want {
		t.Errorf("a vehicle beside them: %v, %v", closed, err)
	}
	close(leave)
	if err := slow.Send(ending); err != nil {
		t.Fatal(err)
	}
	if err := ends(slow); !errors.Is(err, io.EOF) {
		t.Errorf("the slow one: %v", err)
	}
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
			where, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{name}})
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
