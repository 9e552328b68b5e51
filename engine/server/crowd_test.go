package server

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"runtime"
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

// heap is what is in use after a collection.
func heap() uint64 {
	var m runtime.MemStats
	runtime.GC()
	runtime.GC() // what finalizers have let go
	runtime.ReadMemStats(&m)
	return m.HeapAlloc
}

// TestCrowd feeds many vehicles at once, 500 with LEADLINE_LONG. Some vanish
// half-way and come back, some are taken over by another stream, some never
// come back; some who follow never read. Every measurement that was accepted is
// in the posteriors, whose hash is that of a session alone; no goroutine is
// left, and what the sessions held is given back.
func TestCrowd(t *testing.T) {
	n, seconds := 50, 8
	if os.Getenv("LEADLINE_LONG") != "" {
		n = 500
	}
	const cells = 1000
	wants := make([]string, n)
	for i := range n {
		wants[i], _, _ = replayedIn(t, cells, 0, voyage(uint64(i), seconds))
	}
	before := heap()
	var mostHeap uint64
	s, conn := serve(t, Config{MaxCells: cells})
	ctx, cancel := context.WithTimeout(context.Background(), 10*time.Minute)
	defer cancel()

	following, leave := context.WithCancel(ctx)
	var followers, vehicles sync.WaitGroup
	var updates atomic.Int64
	for i := range 4 {
		followers.Go(func() { follow(following, t, conn, i == 0, &updates) })
	}
	for i := range n {
		vehicles.Go(func() {
			evs := voyage(uint64(i), seconds)
			d := client.Drive{Header: header(fmt.Sprint("v", i)), Name: "d", Batch: 1 + i%4, Reply: leadlinev1.Reply(i % 4)}
			part := func(evs []sensor.Event) *client.Feed {
				f, err := client.Open(ctx, conn, d)
				if err != nil {
					t.Errorf("vehicle %d: %v", i, err)
					return nil
				}
				for _, ev := range evs {
					if err := f.Send(wire.FromEvent(ev)); err != nil {
						t.Errorf("vehicle %d: %v", i, err)
						f.Abort()
						return nil
					}
				}
				return f
			}
			if i%5 < 3 {
				f := part(evs[:len(evs)/2])
				switch {
				case f == nil:
					return
				case i%5 == 0:
					f.Abort() // and comes back
				case i%5 == 1:
					f.Abort() // for good
					return
				default:
					defer f.Abort() // half open: the next one takes over
				}
			}
			f := part(evs)
			if f == nil {
				return
			}
			closed, err := f.Close()
			if err != nil || closed.GetPosteriorSha256() != wants[i] || closed.GetAccepted() != uint64(len(evs)) || closed.GetRefused() != 0 {
				t.Errorf("vehicle %d: %v, %v; want %d measurements, hash %s", i, closed, err, len(evs), wants[i])
			}
		})
	}
	vehicles.Wait()
	mostHeap = heap()
	// All are here, those that vanished, too.
	var names []string
	for i := range n {
		names = append(names, fmt.Sprint("v", i))
	}
	for from := 0; from < n; from += 100 {
		resp, err := leadlinev1.NewPositionServiceClient(conn).Where(ctx, &leadlinev1.WhereRequest{Vehicles: names[from:min(from+100, n)]})
		if err != nil {
			t.Fatal(err)
		}
		for j, a := range resp.GetAnswers() {
			if i := from + j; a.GetEnded() != (i%5 != 1) {
				t.Errorf("vehicle %d: ended %v, %v", i, a.GetEnded(), a.GetFailure())
			}
		}
	}
	leave()
	followers.Wait()
	if err := s.Shutdown(ctx); err != nil {
		t.Error(err)
	}
	after := heap()
	t.Logf("%d vehicles, %d updates to followers; heap %.1f MB before, %.1f MB with all, %.1f MB after", n, updates.Load(), float64(before)/1e6, float64(mostHeap)/1e6, float64(after)/1e6)
	// The connection's buffers, and what packages keep for the next time.
	if after > before+before/2+8<<20 {
		t.Errorf("the heap grew from %d to %d bytes: at most half as much again and 8 MiB", before, after)
	}
}

// follow follows everybody until it is told to leave; a lazy one does not read.
func follow(ctx context.Context, t *testing.T, conn *grpc.ClientConn, lazy bool, updates *atomic.Int64) {
	st, err := leadlinev1.NewPositionServiceClient(conn).Follow(ctx, &leadlinev1.FollowRequest{Detail: leadlinev1.Detail_DETAIL_SUMMARY})
	if err != nil {
		t.Error(err)
		return
	}
	if lazy {
		<-ctx.Done()
		return
	}
	for {
		if _, err := st.Recv(); err != nil {
			if ctx.Err() == nil || errors.Is(err, io.EOF) {
				t.Errorf("a follower is sent away: %v", err)
			}
			return
		}
		updates.Add(1)
	}
}
