package server

import (
	"fmt"
	"runtime"
	"testing"
	"time"

	"google.golang.org/protobuf/proto"

	"leadline/engine/client"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestDebt proves that drives are asked for checkpoints when all together owe too
// much, those that owe more than their share, not too often, and that a server
// which is killed then has nothing of them to replay.
func TestDebt(t *testing.T) {
	l := &life{t: t, cfg: Config{Journal: keptIn(t.TempDir()), Build: "this", MaxCells: 30}}
	l.start()
	conn, err := client.Dial(l.addr)
	if err != nil {
		t.Fatal(err)
	}
	evs := voyage(3, 10)
	for v := range 3 {
		f, err := client.Open(limited(t), conn, client.Drive{Header: header(fmt.Sprint("v", v)), Name: "d", Batch: 3})
		if err != nil {
			t.Fatal(err)
		}
		for _, ev := range evs {
			if err := f.Send(wire.FromEvent(ev)); err != nil {
				t.Fatal(err)
			}
		}
		if err := f.Leave(); err != nil {
			t.Fatal(err)
		}
	}
	owner := func(v int) *owner {
		o, err := l.s.find(fmt.Sprint("v", v))
		if err != nil {
			t.Fatal(err)
		}
		return o
	}
	debt := func(v int) time.Duration { return time.Duration(owner(v).rec.checks.debt.Load()) }
	if debt(0) <= 0 {
		t.Error("what was taken is no debt")
	}
	most := debtMost * time.Duration(runtime.GOMAXPROCS(0))
	for v, part := range []float64{.5, .4, .05} {
		owner(v).rec.checks.debt.Store(int64(part * float64(most)))
	}
	now := time.Now().Add(time.Hour)
	l.s.settleDebt(now)
	for v := range 3 {
		if owner(v).rec.checks.pressed.Load() || debt(v) == 0 {
			t.Errorf("drive %d is asked for a checkpoint although all owe little", v)
		}
	}
	owner(0).rec.checks.debt.Store(int64(most))
	l.s.settleDebt(now)
	for end := time.Now().Add(time.Minute); debt(0) > 0 || debt(1) > 0 || owner(0).rec.checks.size.Load() == 0; time.Sleep(time.Millisecond) {
		if time.Now().After(end) {
			t.Fatalf("the debts stay %v, %v", debt(0), debt(1))
		}
	}
	if debt(2) == 0 {
		t.Error("a drive that owes little is asked for a checkpoint")
	}
	owner(0).rec.checks.debt.Store(int64(2 * most))
	l.s.settleDebt(now.Add(debtEvery / 2))
	if owner(0).rec.checks.pressed.Load() || debt(0) == 0 {
		t.Error("a drive is asked for another checkpoint at once")
	}
	before := proto.CloneOf(whereOf(t, l, "v0"))
	conn.Close()
	l.stop(limited(t))
	l.start()
	if after := whereOf(t, l, "v0"); after.GetMean().String() != before.GetMean().String() {
		t.Errorf("after a restart it is at %v, before at %v", after.GetMean(), before.GetMean())
	}
	l.stop(limited(t))
}

// whereOf is where a vehicle is.
func whereOf(t *testing.T, l *life, vehicle string) *leadlinev1.Posterior {
	t.Helper()
	conn, err := client.Dial(l.addr)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close()
	a, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{vehicle}})
	if err != nil {
		t.Fatal(err)
	}
	return a.GetPosterior()
}
