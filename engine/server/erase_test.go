package server

import (
	"bytes"
	"context"
	"encoding/base64"
	"io/fs"
	"os"
	"path/filepath"
	"testing"
	"time"

	"google.golang.org/protobuf/proto"

	"leadline/engine/client"
	"leadline/engine/journal"
	"leadline/engine/sensor"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// traces are the texts that a vehicle's records hold: its name, as it is in a
// message and in the beginning of a drive, and a measurement.
func traces(t *testing.T, vehicle string, ev sensor.Event) (texts [][]byte) {
	t.Helper()
	open, err := proto.Marshal(&leadlinev1.Open{Header: header(vehicle), Drive: "d"})
	if err != nil {
		t.Fatal(err)
	}
	m, err := proto.Marshal(wire.FromEvent(ev))
	if err != nil {
		t.Fatal(err)
	}
	in64 := base64.StdEncoding.EncodeToString(open)
	return [][]byte{[]byte(vehicle), []byte(in64[:len(in64)/4]), m}
}

// found counts how often texts are in the files of a folder.
func found(t *testing.T, dir string, texts [][]byte) (n int) {
	t.Helper()
	err := filepath.WalkDir(dir, func(path string, e fs.DirEntry, err error) error {
		if err != nil || e.IsDir() {
			return err
		}
		b, err := os.ReadFile(path)
		for _, text := range texts {
			n += bytes.Count(b, text)
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return n
}

// TestEraseVehicle proves that what is erased of a vehicle is nowhere any more:
// not in an answer, not after a restart, and not a byte of it in the journal's
// files, whether the drive goes on, has ended, was replaced, is kept in a
// checkpoint, or the server stopped right after it had begun; and that another
// vehicle goes on as if nothing were.
func TestEraseVehicle(t *testing.T) {
	dir := t.TempDir()
	l := &life{t: t, cfg: Config{Journal: &journal.Options{Dir: dir, FreeBytes: 1, Partitions: 1}, Build: "this", MaxCells: 1000}}
	evs := voyage(3, 30)
	want, _, _ := replayedIn(t, 1000, 0, evs)
	own := voyage(77, 30)
	hint := traces(t, "tell-tale van", own[3])
	h := header("tell-tale van")
	start := func() leadlinev1.PositionServiceClient {
		l.start()
		conn, err := client.Dial(l.addr)
		if err != nil {
			t.Fatal(err)
		}
		t.Cleanup(func() { conn.Close() })
		return leadlinev1.NewPositionServiceClient(conn)
	}
	drive := func(name string, n int, end bool) {
		t.Helper()
		conn, err := client.Dial(l.addr)
		if err != nil {
			t.Fatal(err)
		}
		defer conn.Close()
		f, err := client.Open(limited(t), conn, client.Drive{Header: h, Name: name, Batch: 3, Replace: true})
		if err != nil {
			t.Fatal(err)
		}
		for _, ev := range own[:n] {
			if err := f.Send(wire.FromEvent(ev)); err != nil {
				t.Fatal(err)
			}
		}
		if end {
			_, err = f.Close()
		} else {
			err = f.Leave()
		}
		if err != nil {
			t.Fatal(err)
		}
	}
	beside := func(to int) *leadlinev1.Closed {
		t.Helper()
		conn, err := client.Dial(l.addr)
		if err != nil {
			t.Fatal(err)
		}
		defer conn.Close()
		d := client.Drive{Header: header("beside"), Name: "d", Batch: 1, Continue: true}
		f, err := client.Open(limited(t), conn, d)
		if err != nil {
			t.Fatal(err)
		}
		for i := int(f.Had()); i < to; i++ {
			if err := f.Send(wire.FromEvent(evs[i])); err != nil {
				t.Fatal(err)
			}
		}
		if to < len(evs) {
			if err := f.Leave(); err != nil {
				t.Fatal(err)
			}
			return nil
		}
		closed, err := f.Close()
		if err != nil {
			t.Fatal(err)
		}
		return closed
	}
	start()
	beside(8)
	drive("replaced", 9, false)
	drive("ended", 30, true)
	drive("open", 12, false)
	l.stop(limited(t)) // writes checkpoints
	if found(t, dir, hint) < 6 {
		t.Fatal("the vehicle's traces are not found before")
	}
	api := start()
	r, err := api.EraseVehicle(limited(t), &leadlinev1.EraseVehicleRequest{Vehicle: "tell-tale van"})
	if err != nil || r.GetDrives() != 3 || r.GetRecords() < 15 {
		t.Fatalf("erased: %v, %v", r, err)
	}
	gone := func(when string) {
		t.Helper()
		answer, err := api.Where(limited(t), &leadlinev1.WhereRequest{Vehicles: []string{"tell-tale van"}})
		if err != nil || answer.GetAnswers()[0].GetFailure().GetReason() != leadlinev1.Reason_REASON_UNKNOWN_VEHICLE {
			t.Errorf("%s: it is at %v, %v", when, answer, err)
		}
		if n := found(t, dir, hint); n > 0 {
			t.Errorf("%s: %d traces are in the journal's files", when, n)
		}
	}
	gone("after it was erased")
	if r, err := api.EraseVehicle(limited(t), &leadlinev1.EraseVehicleRequest{Vehicle: "tell-tale van"}); err != nil || r.GetDrives() != 0 || r.GetRecords() != 0 {
		t.Errorf("once more: %v, %v", r, err)
	}
	beside(16)
	l.stop(limited(t))
	api = start()
	gone("after a restart")

	// The server stops once it is written that the vehicle is to go; the drive
	// that comes later stays.
	drive("again", 20, false)
	_, marker, err := l.s.giveUp("tell-tale van")
	if err != nil {
		t.Fatal(err)
	}
	written := make(chan error, 1)
	marker.Append(kindErase, []byte("tell-tale van"), true, func(_ journal.At, err error) { written <- err })
	if err := <-written; err != nil {
		t.Fatal(err)
	}
	l.s.ended.Done()
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	l.stop(ctx)
	if found(t, dir, hint) == 0 {
		t.Fatal("the vehicle's traces are gone before they are erased")
	}
	api = start()
	gone("after a restart with an erasure that had begun")
	drive("new", 6, false)
	if closed := beside(len(evs)); closed.GetPosteriorSha256() != want {
		t.Errorf("the vehicle beside it ends with %v, want hash %s", closed, want)
	}
	l.stop(limited(t))
	api = start()
	if a, err := api.Where(limited(t), &leadlinev1.WhereRequest{Vehicles: []string{"tell-tale van"}}); err != nil || a.GetAnswers()[0].GetFailure() != nil {
		t.Errorf("the drive after it: %v, %v", a, err)
	}
	l.stop(limited(t))
}

// TestKeepFor proves that what is older than it may be goes: a silent drive, and
// of one that goes on what led to its present state, which stays as it was.
func TestKeepFor(t *testing.T) {
	dir := t.TempDir()
	l := &life{t: t, cfg: Config{Journal: &journal.Options{Dir: dir, FreeBytes: 1, Partitions: 1}, KeepFor: time.Second, Build: "this", MaxCells: 1000}}
	evs := voyage(3, 40)
	want, _, _ := replayedIn(t, 1000, 0, evs)
	l.start()
	conn, err := client.Dial(l.addr)
	if err != nil {
		t.Fatal(err)
	}
	api := leadlinev1.NewPositionServiceClient(conn)
	silent, err := client.Open(limited(t), conn, client.Drive{Header: header("tell-tale van"), Batch: 1})
	if err != nil {
		t.Fatal(err)
	}
	own := voyage(77, 5)
	for _, ev := range own {
		if err := silent.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	if err := silent.Leave(); err != nil {
		t.Fatal(err)
	}
	d := client.Drive{Header: header("goes on"), Name: "d", Batch: 1}
	f, err := client.Open(limited(t), conn, d)
	if err != nil {
		t.Fatal(err)
	}
	for _, ev := range evs[:20] {
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	if err := f.Flush(); err != nil {
		t.Fatal(err)
	}
	fedUntil := time.Now()
	until := func(what string, is func() bool) {
		t.Helper()
		for end := time.Now().Add(time.Minute); !is(); time.Sleep(50 * time.Millisecond) {
			if time.Now().After(end) {
				t.Fatal(what)
			}
		}
	}
	until("a silent drive stays", func() bool {
		r, err := api.ListVehicles(limited(t), &leadlinev1.ListVehiclesRequest{})
		return err == nil && len(r.GetVehicles()) == 1 && r.GetVehicles()[0].GetVehicle() == "goes on"
	})
	until("old records stay", func() bool {
		j, err := api.DescribeJournal(limited(t), &leadlinev1.DescribeJournalRequest{})
		if err != nil || j.GetKeepForS() != 1 || j.GetFreeBytes() == 0 || j.GetMostBytes() == 0 || j.GetWhere() != dir {
			t.Fatalf("the journal is %v, %v", j, err)
		}
		return j.GetOldest().AsTime().After(fedUntil)
	})
	for _, ev := range evs[20:30] {
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	if err := f.Leave(); err != nil {
		t.Fatal(err)
	}
	conn.Close()
	l.stop(limited(t))
	l.cfg.KeepFor = 0
	l.start()
	if conn, err = client.Dial(l.addr); err != nil {
		t.Fatal(err)
	}
	closed, err := fed(limited(t), conn, d, evs)
	if err != nil || closed.GetPosteriorSha256() != want {
		t.Errorf("the drive that goes on: %v, %v; want hash %s", closed, err, want)
	}
	conn.Close()
	l.stop(limited(t))
}
