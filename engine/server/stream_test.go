package server

import (
	"context"
	"errors"
	"fmt"
	"io"
	"testing"
	"time"

	"google.golang.org/grpc/codes"
	healthv1 "google.golang.org/grpc/health/grpc_health_v1"
	"google.golang.org/grpc/status"

	"leadline/engine/client"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestWrongOrder proves that a stream that does not keep to the order is told
// so, and that the drive is none the worse.
func TestWrongOrder(t *testing.T) {
	_, conn := serve(t, Config{NewSession: newTally, Limits: Limits{BatchMeasurements: 8, OpenTimeout: 200 * time.Millisecond}})
	evs := voyage(5, 20)
	for i, c := range []struct {
		what  string
		send  []*leadlinev1.FeedRequest
		open  bool
		code  codes.Code
		words string
	}{
		{"batch first", []*leadlinev1.FeedRequest{batch(1)}, false, codes.InvalidArgument, "send open first"},
		{"end first", []*leadlinev1.FeedRequest{ending}, false, codes.InvalidArgument, "send open first"},
		{"an empty message first", []*leadlinev1.FeedRequest{{}}, false, codes.InvalidArgument, "send open first"},
		{"silence", nil, false, codes.DeadlineExceeded, "send open first"},
		{"a second open", []*leadlinev1.FeedRequest{opening(&leadlinev1.Open{Header: header("v"), Drive: "d"})}, true, codes.InvalidArgument, "a second open"},
		{"an empty message", []*leadlinev1.FeedRequest{batch(1), {}}, true, codes.InvalidArgument, "an empty message"},
		{"no sequence", []*leadlinev1.FeedRequest{batch(0)}, true, codes.InvalidArgument, "sequence is missing"},
		{"a gap", []*leadlinev1.FeedRequest{batch(1), batch(3)}, true, codes.FailedPrecondition, "batch 3 came after batch 1: send 2 next"},
		{"too many", []*leadlinev1.FeedRequest{batch(1, evs[:9]...)}, true, codes.InvalidArgument, "batch 1 holds 9 measurements: at most 8"},
	} {
		st := raw(t, conn)
		if c.open {
			st, _ = openRaw(t, conn, &leadlinev1.Open{Header: header(fmt.Sprint("v", i)), Drive: "d"})
		}
		for _, m := range c.send {
			if err := st.Send(m); err != nil && !errors.Is(err, io.EOF) {
				t.Fatal(err)
			}
		}
		wantStatus(t, c.what, ends(st), c.code, c.words)
	}
	// After the end only the end can be had again.
	st, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d"})
	if err := st.Send(ending); err != nil {
		t.Fatal(err)
	}
	if err := ends(st); !errors.Is(err, io.EOF) {
		t.Errorf("after the end: %v", err)
	}
	st, _ = openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d"})
	if err := st.Send(batch(1, evs[0])); err != nil {
		t.Fatal(err)
	}
	wantStatus(t, "batch after the end", ends(st), codes.FailedPrecondition, "came after the end")
	// A duplicate is acknowledged and does not count.
	st, _ = openRaw(t, conn, &leadlinev1.Open{Header: header("w"), Drive: "d", Reply: leadlinev1.Reply_REPLY_NONE})
	for _, m := range []*leadlinev1.FeedRequest{batch(1, evs[:3]...), batch(1, evs[3:6]...), batch(2, evs[:3]...)} {
		if err := st.Send(m); err != nil {
			t.Fatal(err)
		}
	}
	for _, want := range []uint64{1, 1, 2} {
		m, err := st.Recv()
		if err != nil || m.GetReceipt().GetSequence() != want {
			t.Fatalf("got %v, %v; want a receipt up to %d", m, err, want)
		}
	}
	// Closing without an end leaves the drive open.
	if err := st.CloseSend(); err != nil {
		t.Fatal(err)
	}
	if err := ends(st); !errors.Is(err, io.EOF) {
		t.Errorf("a stream without an end ended with %v", err)
	}
	if _, o := openRaw(t, conn, &leadlinev1.Open{Header: header("w"), Drive: "d"}); o.GetSequence() != 2 {
		t.Errorf("opened again at %d, want 2", o.GetSequence())
	}
}

// TestTakeover proves that a half-open stream does not keep its vehicle: the
// next one takes over, and what the first one sends later has no effect.
func TestTakeover(t *testing.T) {
	_, conn := serve(t, Config{NewSession: newTally})
	evs := voyage(7, 20)
	want := tallied(evs)
	old, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d"})
	if err := old.Send(batch(1, evs[:5]...)); err != nil {
		t.Fatal(err)
	}
	for {
		m, err := old.Recv()
		if err != nil {
			t.Fatal(err)
		}
		if m.GetReceipt() != nil {
			break
		}
	}
	st, o := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d"})
	if o.GetSequence() != 1 {
		t.Errorf("opened at %d, want 1", o.GetSequence())
	}
	_ = old.Send(batch(2, evs[10:]...))
	wantStatus(t, "the old stream", ends(old), codes.Aborted, "another stream")
	for _, m := range []*leadlinev1.FeedRequest{batch(2, evs[5:]...), ending} {
		if err := st.Send(m); err != nil {
			t.Fatal(err)
		}
	}
	for {
		m, err := st.Recv()
		if err != nil {
			t.Fatal(err)
		}
		if c := m.GetClosed(); c != nil {
			if c.GetPosteriorSha256() != want {
				t.Errorf("hash %s, want %s", c.GetPosteriorSha256(), want)
			}
			break
		}
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
		r, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"v"}})
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
