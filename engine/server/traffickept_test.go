package server

import (
	"strings"
	"testing"

	"leadline/engine/client"
	"leadline/engine/exact"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/traffic"
	"leadline/engine/wire"
	"leadline/fixtures/scenes"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestTrafficOtherVersion proves that a road's traffic goes on under another version
// of the program as vehicles' drives do: while its records are there they are taken
// again, to the same bits, and the picture says so; where they are gone and the
// checkpoint is of another layout, it does not go on, and says what to do.
func TestTrafficOtherVersion(t *testing.T) {
	suite, err := sensor.ParseSuite("road", []byte(scenes.TwoPosts))
	if err != nil {
		t.Fatal(err)
	}
	h := &leadlinev1.DriveHeader{Vehicle: "r", Suite: "road", Traffic: true}
	l := &life{t: t, cfg: Config{Journal: keptIn(t.TempDir()), Build: "this", Suites: map[string]*sensor.Suite{"road": suite}}}
	alone, err := traffic.Open(suite)
	if err != nil {
		t.Fatal(err)
	}
	evs := scenes.PastTwoPosts(began)
	for i, ev := range evs {
		if evs[i], err = wire.ToEvent(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
		if err := alone.Take(evs[i]); err != nil {
			t.Fatal(err)
		}
	}
	for i, build := range []string{"this", "this", "that"} {
		l.cfg.Build = build
		l.start()
		conn, err := client.Dial(l.addr)
		if err != nil {
			t.Fatal(err)
		}
		f, err := client.Open(limited(t), conn, client.Drive{Header: h, Name: "d", Batch: 10, Continue: i > 0})
		if err != nil {
			t.Fatal(err)
		}
		from, to := int(f.Had())*10, 80*(i+1)
		if from != 80*i {
			t.Errorf("start %d goes on after %d bearings", i, from)
		}
		if i > 0 {
			r, err := leadlinev1.NewPositionServiceClient(conn).Traffic(limited(t), &leadlinev1.TrafficRequest{Road: "r"})
			if p := r.GetPicture(); err != nil || p.GetRecomputed() != (build != "this") || p.GetAccepted() != uint64(from) || !p.GetDurable() {
				t.Errorf("start %d: %v, %v", i, p, err)
			}
		}
		for _, ev := range evs[from:to] {
			if err := f.Send(wire.FromEvent(ev)); err != nil {
				t.Fatal(err)
			}
		}
		if to < len(evs) {
			err = f.Leave()
		} else {
			var closed *leadlinev1.Closed
			closed, err = f.Close()
			if err := alone.Flush(); err != nil || closed.GetTraffic().GetStateSha256() != alone.Hash() {
				t.Errorf("after three starts it is %v, and a file gives %s: %v", closed.GetTraffic(), alone.Hash(), err)
			}
		}
		if err != nil {
			t.Fatal(err)
		}
		conn.Close()
		if i < 2 {
			l.stop(limited(t)) // writes a checkpoint
		}
	}
	// Its records are gone, and its checkpoint is of an earlier layout.
	road := &roadSession{watch: alone, suite: suite}
	state := road.Checkpoint()
	state = append(state[:16:16], exact.Seal("LLT1", 0, nil)...)
	old := &history{open: &leadlinev1.Open{Header: h, Drive: "d"}, check: &checkpointRecord{Version: "v0", Build: "that of then"}, state: state}
	_, err = l.s.replay(old, &mapUse{sessions: 1}, session.Config{Vehicle: "r", Suite: suite}, nil)
	if got := saidBy(err); got.reason != leadlinev1.Reason_REASON_JOURNAL_DAMAGED || !strings.Contains(got.message, exact.ErrLayout.Error()) || !strings.Contains(got.message, "use that version") {
		t.Errorf("of another layout: %v", err)
	}
	l.stop(limited(t))
}
