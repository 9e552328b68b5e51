package server

import (
	"fmt"
	"runtime"
	"testing"
	"time"

	"leadline/engine/client"
	"leadline/engine/server/operate"
	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestPace proves that a vehicle that brings more than its rate waits, that all
// of it counts, and that another drive is no way round.
func TestPace(t *testing.T) {
	m := operate.NewMetrics("v")
	_, conn := serve(t, Config{NewSession: newTally, Metrics: m, Limits: Limits{Rate: 2, BatchMeasurements: 10}})
	evs := voyage(1, 22)[:23] // ten seconds' worth is 20
	before := 0.0
	for i, d := range []client.Drive{{Header: header("v"), Name: "a", Batch: 10}, {Header: header("v"), Name: "b", Batch: 10}} {
		if i == 1 {
			evs = evs[:1]
		}
		closed, err := fed(limited(t), conn, d, evs)
		if err != nil || closed.GetPosteriorSha256() != tallied(evs) || closed.GetAccepted() != uint64(len(evs)) {
			t.Errorf("drive %s: %v, %v", d.Name, closed, err)
		}
		held := scrape(t, m)("leadline_held_back_seconds_total", paceVehicle)
		if held <= before {
			t.Errorf("after drive %s it was held back for %v s, before for %v", d.Name, held, before)
		}
		before = held
	}
	if held := scrape(t, m)("leadline_held_back_seconds_total", paceAll); held > 0 {
		t.Errorf("all together were held back for %v s", held)
	}
}

// TestOverload proves that a server with too much to do tells less first and
// then takes no new drive, says when to come back, drops nothing, and is itself
// again when it has less to do.
func TestOverload(t *testing.T) {
	m := operate.NewMetrics("v")
	s, conn := serve(t, Config{NewSession: newTally, Metrics: m, Limits: Limits{Load: 2, LoadOver: 40 * time.Millisecond}})
	st, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d", Reply: leadlinev1.Reply_REPLY_EVERY})
	evs := voyage(1, 50)
	sequence := uint64(0)
	told := func() (n int) { // of a batch of five
		t.Helper()
		if err := st.Send(batch(sequence+1, evs[5*sequence:5*sequence+5]...)); err != nil {
			t.Fatal(err)
		}
		sequence++
		for {
			r, err := st.Recv()
			if err != nil {
				t.Fatal(err)
			}
			if r.GetPosterior() != nil {
				n++
			}
			if r.GetReceipt() != nil {
				if r.GetReceipt().GetAccepted() != 5 {
					t.Errorf("receipt %v", r.GetReceipt())
				}
				return n
			}
		}
	}
	others := 0
	open := func() said {
		others++
		other, err := client.Open(limited(t), conn, client.Drive{Header: header(fmt.Sprint("other ", others))})
		if err != nil {
			return saidBy(err)
		}
		other.Abort()
		return said{}
	}
	until := func(is func() bool) {
		t.Helper()
		for end := time.Now().Add(30 * time.Second); !is(); time.Sleep(time.Millisecond) {
			if time.Now().After(end) {
				t.Fatalf("the load is %v", s.load.value())
			}
		}
	}
	if n := told(); n != 5 {
		t.Errorf("%d posteriors of 5 are told at first", n)
	}
	var done []func()
	for range 3 * runtime.GOMAXPROCS(0) {
		done = append(done, s.load.work())
	}
	until(s.load.thins)
	if n := told(); n != 1 {
		t.Errorf("%d posteriors of 5 are told under load", n)
	}
	if got := open(); got.message != "" {
		t.Errorf("a new drive under load: %+v", got)
	}
	for range 7 * runtime.GOMAXPROCS(0) {
		done = append(done, s.load.work())
	}
	until(s.load.refuses)
	if got := open(); got.reason != leadlinev1.Reason_REASON_SERVER_FULL || got.about["limit"] != "load" || got.retry <= 0 {
		t.Errorf("a new drive when overloaded: %+v", got)
	}
	again, opened := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d", Reply: leadlinev1.Reply_REPLY_EVERY})
	if opened.GetSequence() != sequence {
		t.Errorf("the drive that is open goes on after %d", opened.GetSequence())
	}
	st = again
	if n := told(); n != 1 {
		t.Errorf("%d posteriors of 5 are told when overloaded", n)
	}
	for _, d := range done {
		d()
	}
	until(func() bool { return !s.load.thins() })
	if n := told(); n != 5 {
		t.Errorf("%d posteriors of 5 are told afterwards", n)
	}
	if got := open(); got.message != "" {
		t.Errorf("a new drive afterwards: %+v", got)
	}
	if n := scrape(t, m)("leadline_posteriors_thinned_total"); n != 8 {
		t.Errorf("%v posteriors are counted as not told, want 8", n)
	}
	if err := st.Send(ending); err != nil {
		t.Fatal(err)
	}
	for {
		r, err := st.Recv()
		if err != nil {
			t.Fatal(err)
		}
		if c := r.GetClosed(); c != nil {
			if c.GetPosteriorSha256() != tallied(evs[:5*sequence]) {
				t.Error("the drive ends with another hash")
			}
			return
		}
	}
}

// Under load a follower is told one posterior a second of each vehicle, with how
// many were skipped; a change of status at once.
func TestFollowersUnderLoad(t *testing.T) {
	fl := newFleet(Limits{})
	v := fl.open("v")
	r := fl.read(t, &leadlinev1.FollowRequest{})
	fl.busy = true
	for at := 1; at <= 10; at++ {
		fl.say(v, summary.Unsure, at)
	}
	if r.all(); r.received != 1 {
		t.Errorf("%d are told at once", r.received)
	}
	fl.clock = fl.clock.Add(thinnedTo)
	if r.all(); r.received != 2 || r.skipped != 8 || r.last[v].p.TimeNS != int64(began)+10e9 {
		t.Errorf("%d are told after a second, %d skipped", r.received, r.skipped)
	}
	fl.say(v, summary.Located, 11)
	if r.all(); r.received != 3 {
		t.Errorf("a change of status waits: %d are told", r.received)
	}
	fl.say(v, summary.Located, 12)
	fl.busy = false
	fl.say(v, summary.Located, 13, 14)
	if r.all(); r.received != 5 || r.skipped != 9 {
		t.Errorf("%d are told afterwards, %d skipped", r.received, r.skipped)
	}
	if n := r.due(); r.received+int(r.skipped) != n {
		t.Errorf("%d told, %d skipped of %d", r.received, r.skipped, n)
	}
}
