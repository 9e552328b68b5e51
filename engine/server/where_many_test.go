package server

import (
	"context"
	"fmt"
	"math"
	"slices"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/protobuf/proto"

	"leadline/engine/client"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestWhereMany proves that each vehicle of a question has its own answer, in
// the order of the question, and that one that has none, or that hangs for a
// while, changes no other.
func TestWhereMany(t *testing.T) {
	enter, leave := make(chan struct{}), make(chan struct{})
	_, conn := serve(t, Config{NewSession: func(c session.Config) (Session, error) {
		s, err := newTally(c)
		return &blocking{s, enter, leave}, err
	}})
	hashes := map[string]string{}
	var names []string
	for i := range 30 {
		evs := voyage(uint64(i), 3)
		name := fmt.Sprint("v", i)
		if _, err := fed(limited(t), conn, client.Drive{Header: header(name)}, evs); err != nil {
			t.Fatal(err)
		}
		hashes[name] = tallied(evs)
		names = append(names, name, fmt.Sprint("ghost", i))
	}
	openRaw(t, conn, &leadlinev1.Open{Header: header("silent"), Drive: "d"})
	slow, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("slow"), Drive: "d"})
	wait := voyage(1, 1)[0]
	wait.Sensor = "wait"
	if err := slow.Send(batch(1, wait)); err != nil {
		t.Fatal(err)
	}
	<-enter
	names = append([]string{"slow", "silent", "v7"}, names...)
	time.AfterFunc(50*time.Millisecond, func() { close(leave) })
	resp, err := leadlinev1.NewPositionServiceClient(conn).Where(limited(t), &leadlinev1.WhereRequest{Vehicles: names})
	if err != nil || len(resp.GetAnswers()) != len(names) {
		t.Fatalf("%d answers to %d questions, %v", len(resp.GetAnswers()), len(names), err)
	}
	for i, a := range resp.GetAnswers() {
		want := leadlinev1.Reason_REASON_UNKNOWN_VEHICLE
		switch {
		case a.GetVehicle() == "silent":
			want = leadlinev1.Reason_REASON_NO_POSTERIOR
		case hashes[names[i]] != "" || names[i] == "slow":
			want = 0
		}
		if a.GetVehicle() != names[i] || a.GetFailure().GetReason() != want || (a.GetPosterior() != nil) != (want == 0) {
			t.Errorf("%s: %v", names[i], a)
		}
		if h := hashes[names[i]]; h != "" && (a.GetPosteriorSha256() != h || a.GetDrive() == "") {
			t.Errorf("%s: hash %s, want %s", names[i], a.GetPosteriorSha256(), h)
		}
	}
	// Who gives up waiting is told so.
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if _, err := leadlinev1.NewPositionServiceClient(conn).Where(ctx, &leadlinev1.WhereRequest{Vehicles: names}); err == nil {
		t.Error("a call that was given up has an answer")
	}
}

// TestWhereNow proves that a belief is carried on to the present as over a gap,
// with all that is asked of it, and that the drive goes on as if nobody had
// asked.
func TestWhereNow(t *testing.T) {
	if testing.Short() {
		t.Skip("filters for long: not with -short")
	}
	var clock atomic.Int64
	_, conn := serve(t, Config{Now: func() time.Time { return time.Unix(0, clock.Load()) }})
	at := func(s float64) { clock.Store(int64(began) + int64(s*1e9)) }
	evs := voyage(1, 10)
	half := slices.IndexFunc(evs, func(ev sensor.Event) bool { return ev.Time > began+6e9 })
	f, err := client.Open(limited(t), conn, client.Drive{Header: header("v"), Batch: 1})
	if err != nil {
		t.Fatal(err)
	}
	for _, ev := range evs[:half] {
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	at(6)
	var present *leadlinev1.Posterior
	for present.GetTime().AsTime().UnixNano() != int64(began+6e9) { // until all has arrived
		if a, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"v"}}); err == nil {
			present = a.GetPosterior()
		}
	}
	everywhere := wire.FromPolygon([][]geo.LonLat{{geo.FromDegrees(4.8, 52.9), geo.FromDegrees(5.2, 52.9), geo.FromDegrees(5.2, 53.1), geo.FromDegrees(4.8, 53.1)}})
	ask := &leadlinev1.WhereRequest{Vehicles: []string{"v"}, PredictToNow: true, RegionFractions: []float64{0.9}, Area: everywhere, IntegrityRisk: proto.Float64(0.01)}
	previous := present
	for _, ahead := range []float64{0, 0.5, 4, 60, 3600, 86400} {
		at(6 + ahead)
		a, err := where(t, conn, ask)
		if err != nil {
			t.Fatal(err)
		}
		p := a.GetPosterior()
		if p.GetPredictedS() != ahead || p.GetAgeS() != 0 || p.GetGapS() != ahead || p.GetTime().AsTime().UnixNano() != clock.Load() || a.GetEnded() {
			t.Errorf("%v s ahead: predicted %v s, age %v s, gap %v s, of %v", ahead, p.GetPredictedS(), p.GetAgeS(), p.GetGapS(), p.GetTime().AsTime())
		}
		if p.GetRadii().GetRadius95M() < previous.GetRadii().GetRadius95M() || p.GetLogEvidence() != present.GetLogEvidence() || p.GetCounts().GetAccepted() != present.GetCounts().GetAccepted() {
			t.Errorf("%v s ahead: %v", ahead, p)
		}
		// The figures are of the belief that was carried.
		if a, b := p.GetProtection().GetRadiusM(), p.GetRadii().GetRadius99M(); math.Abs(a/b-1) > 0.04 {
			t.Errorf("%v s ahead: protection at 1 %% %v m, 99 %% radius %v m", ahead, a, b)
		}
		area := math.Pi * p.GetRadii().GetRadius95M() * p.GetRadii().GetRadius95M()
		if r := p.GetRegions()[0]; r.GetProbability() < 0.9 || r.GetAreaM2() > 1.1*area || r.GetAreaM2() < 0.5*area {
			t.Errorf("%v s ahead: the region of 0.9 has %v m², the 95 %% circle %v m²", ahead, r.GetAreaM2(), area)
		}
		if in := p.GetAreaProbability(); in > 1+1e-9 || ahead < 100 && in < 0.999 || ahead > 80000 && in > 0.2 {
			t.Errorf("%v s ahead: %v inside some 25 km", ahead, in)
		}
		previous = p
	}
	at(6 + 86401)
	if _, err := where(t, conn, ask); err == nil {
		t.Error("carried on for more than a day")
	} else {
		wantStatus(t, "after a day", err, codes.FailedPrecondition, "by a day at most: leave predict_to_now out")
	}
	// A server whose clock is behind answers for the last measurement.
	at(-1000)
	if a, err := where(t, conn, ask); err != nil || a.GetPosterior().GetPredictedS() != 0 || !proto.Equal(a.GetPosterior().GetMean(), present.GetMean()) {
		t.Errorf("with a clock that is behind: %v, %v", a, err)
	}
	for _, ev := range evs[half:] {
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	want, _, _ := replayed(t, evs)
	if closed, err := f.Close(); err != nil || closed.GetPosteriorSha256() != want {
		t.Errorf("closed: %v, %v; want hash %s", closed, err, want)
	}
	// What has ended is not carried on.
	at(100)
	if a, err := where(t, conn, ask); err != nil || a.GetPosterior().GetPredictedS() != 0 || a.GetPosterior().GetAgeS() != 90 || !a.GetEnded() {
		t.Errorf("after the end: %v, %v", a, err)
	}
}

// TestWhereWhileFeeding asks about many vehicles, now and as of their last
// measurements, while all of them are fed: nobody's posteriors change.
func TestWhereWhileFeeding(t *testing.T) {
	if testing.Short() {
		t.Skip("filters for long: not with -short")
	}
	_, conn := serve(t, Config{Now: func() time.Time { return time.Unix(0, int64(began+12e9)) }})
	ctx, stop := context.WithCancel(limited(t))
	var names []string
	var feeding, asking sync.WaitGroup
	for i := range 6 {
		name, evs := fmt.Sprint("v", i), voyage(uint64(i), 10)
		want, _, _ := replayed(t, evs)
		names = append(names, name)
		feeding.Go(func() {
			closed, err := fed(ctx, conn, client.Drive{Header: header(name), Batch: 1}, evs)
			if err != nil || closed.GetPosteriorSha256() != want {
				t.Errorf("%s: %v, %v; want hash %s", name, closed, err, want)
			}
		})
	}
	answered := 0
	asking.Go(func() {
		for now := true; ctx.Err() == nil; now = !now {
			resp, err := leadlinev1.NewPositionServiceClient(conn).Where(ctx, &leadlinev1.WhereRequest{Vehicles: names, PredictToNow: now})
			if err == nil {
				for _, a := range resp.GetAnswers() {
					if a.GetPosterior().GetPredictedS() > 0 {
						answered++
					}
				}
			}
		}
	})
	feeding.Wait()
	stop()
	asking.Wait()
	if answered == 0 {
		t.Error("nothing was carried on: the test asks nothing")
	}
}
