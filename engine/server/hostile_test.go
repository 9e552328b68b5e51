package server

import (
	"context"
	"fmt"
	"os"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"google.golang.org/grpc"

	"leadline/engine/client"
	"leadline/engine/sensor"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestManyOpenings opens two thousand drives of as many vehicles, ten thousand
// with LEADLINE_LONG, and leaves them: those beyond the limits are told which one it is, and a vehicle that was
// there before drives on as if nothing were.
func TestManyOpenings(t *testing.T) {
	const most = 300
	openings := int64(2000)
	if os.Getenv("LEADLINE_LONG") != "" {
		openings = 10_000
	}
	_, conn := serve(t, Config{NewSession: newTally, Limits: Limits{Vehicles: most, Streams: most + 50}})
	ctx, cancel := context.WithTimeout(context.Background(), 5*time.Minute)
	defer cancel()
	evs := voyage(1, 50)
	f, err := client.Open(ctx, conn, client.Drive{Header: header("before"), Batch: 1})
	if err != nil {
		t.Fatal(err)
	}
	var opened, noVehicle, noStream, next atomic.Int64
	var wg sync.WaitGroup
	for range 8 {
		wg.Go(func() {
			for i := next.Add(1); i <= openings; i = next.Add(1) {
				switch limit, err := leftOpen(ctx, conn, fmt.Sprint("v", i)); {
				case err != nil:
					t.Error(err)
					return
				case limit == "vehicles":
					noVehicle.Add(1)
				case limit == "streams":
					noStream.Add(1)
				default:
					opened.Add(1)
				}
			}
		})
	}
	for _, ev := range evs {
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	wg.Wait()
	if o, v, s := opened.Load(), noVehicle.Load(), noStream.Load(); o != most-1 || o+v+s != openings {
		t.Errorf("%d opened, %d refused for the vehicles, %d for the streams; %d were tried, %d vehicles fit beside the first", o, v, s, openings, most-1)
	}
	if closed, err := f.Close(); err != nil || closed.GetPosteriorSha256() != tallied(evs) {
		t.Errorf("the vehicle that was there: %v, %v", closed, err)
	}
}

// leftOpen opens a drive and leaves the stream open, or returns the limit that
// is in the way.
func leftOpen(ctx context.Context, conn *grpc.ClientConn, vehicle string) (limit string, err error) {
	st, err := leadlinev1.NewPositionServiceClient(conn).Feed(ctx)
	if err != nil {
		return "", err
	}
	_ = st.Send(opening(&leadlinev1.Open{Header: header(vehicle), Drive: "d"})) // an error comes from Recv
	if _, err = st.Recv(); err == nil {
		return "", nil
	}
	if s := saidBy(err); s.reason == leadlinev1.Reason_REASON_SERVER_FULL {
		return s.about["limit"], nil
	}
	return "", err
}

// TestClocks proves that a vehicle whose clock is years off is positioned all
// the same, that one whose clock jumps is told so, and that a server whose own
// clock is off only says so in ages.
func TestClocks(t *testing.T) {
	for _, years := range []int64{-50, -1, 0, 30, 200} {
		_, conn := serve(t, Config{MaxCells: 1000})
		shift := sensor.Time(years * 365 * 24 * 3600 * 1e9)
		evs := voyage(3, 6)
		for i := range evs {
			evs[i].Time += shift
			if d, ok := evs[i].Measurement.(sensor.Displacement); ok {
				d.Since += shift
				evs[i].Measurement = d
			}
		}
		want, _, _ := replayedIn(t, 1000, 0, evs)
		jump := evs[len(evs)-1]
		jump.Time += 365 * 24 * 3600 * 1e9
		jump.Sensor, jump.Measurement = "jump", sensor.Fix{Position: middle, SigmaM: 10}
		closed, err := fed(limited(t), conn, client.Drive{Header: header("v")}, append(evs[:len(evs):len(evs)], jump))
		if err != nil || closed.GetPosteriorSha256() != want || closed.GetRefused() != 1 {
			t.Errorf("%d years off: %v, %v; want hash %s", years, closed, err, want)
		}
		age := closed.GetPosterior().GetAgeS() / (365 * 24 * 3600)
		if since := time.Since(time.Unix(0, int64(began))).Hours() / (365 * 24); age > since-float64(years)+1 || age < since-float64(years)-1 {
			t.Errorf("%d years off: an age of %.1f years", years, age)
		}
	}
}
