package server

import (
	"context"
	"os"
	"path/filepath"
	"testing"

	"leadline/engine/client"
	"leadline/engine/journal"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// oldData is a folder as a server of format 1 left it. It holds one drive that is
// open, with a checkpoint and records after it, one that has ended, and packs from
// which a third vehicle was erased. LEADLINE_REWRITE=1 writes it anew, which is for
// a new format alone, beside this one.
const oldData = "testdata/journal-1"

// oldCells is few, for a small folder.
const oldCells = 30

// What the folder's vehicles were given.
func oldConfig(dir string) Config {
	return Config{Journal: &journal.Options{Dir: dir, FreeBytes: 1, MaxBytes: 32 << 20, Partitions: 1}, MaxCells: oldCells}
}

var oldVoyage = voyage(1, 24)

func writeOldData(t *testing.T) {
	t.Helper()
	if err := os.RemoveAll(oldData); err != nil {
		t.Fatal(err)
	}
	l := &life{t: t, cfg: oldConfig(oldData)}
	l.cfg.Build, l.cfg.Version = "that of 2026", "format-1"
	for i, to := range []int{4, 6} {
		l.start()
		conn, err := client.Dial(l.addr)
		if err != nil {
			t.Fatal(err)
		}
		for _, vehicle := range []string{"open", "ended", "erased"}[:1+2*i] {
			f, err := client.Open(limited(t), conn, client.Drive{Header: header(vehicle), Name: "d", Batch: 2})
			if err != nil {
				t.Fatal(err)
			}
			for _, ev := range oldVoyage[:to] {
				if err := f.Send(wire.FromEvent(ev)); err != nil {
					t.Fatal(err)
				}
			}
			if vehicle == "ended" {
				_, err = f.Close()
			} else {
				err = f.Leave()
			}
			if err != nil {
				t.Fatal(err)
			}
		}
		if i == 1 {
			if _, err := leadlinev1.NewPositionServiceClient(conn).EraseVehicle(limited(t), &leadlinev1.EraseVehicleRequest{Vehicle: "erased"}); err != nil {
				t.Fatal(err)
			}
		}
		conn.Close()
		ctx, cancel := context.WithCancel(limited(t))
		if i == 1 {
			cancel() // no checkpoint
		}
		l.stop(ctx)
		cancel()
	}
}

// TestOldData proves that this version opens what the last format's server left,
// goes on with it, and says that it is computed anew.
func TestOldData(t *testing.T) {
	if os.Getenv("LEADLINE_REWRITE") != "" {
		writeOldData(t)
	}
	dir := filepath.Join(t.TempDir(), "journal")
	if err := os.CopyFS(dir, os.DirFS(oldData)); err != nil {
		t.Fatal(err)
	}
	want, _, _ := replayedIn(t, oldCells, 0, oldVoyage)
	ended, _, _ := replayedIn(t, oldCells, 0, oldVoyage[:6])
	l := &life{t: t, cfg: oldConfig(dir)}
	l.cfg.Build = "this"
	l.start()
	defer func() { l.stop(limited(t)) }()
	conn, err := client.Dial(l.addr)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close()
	before, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"open"}})
	if err != nil || !before.GetPosterior().GetRecomputed() || !before.GetPosterior().GetDurable() {
		t.Errorf("the open drive is at %v, %v", before, err)
	}
	f, err := client.Open(limited(t), conn, client.Drive{Header: header("open"), Name: "d", Batch: 2, Continue: true, Acknowledged: 3})
	if err != nil {
		t.Fatal(err)
	}
	for _, ev := range oldVoyage[2*f.Had():] {
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	if closed, err := f.Close(); err != nil || closed.GetPosteriorSha256() != want || closed.GetAccepted() != uint64(len(oldVoyage)) {
		t.Errorf("the open drive ends with %v, %v; want hash %s", closed, err, want)
	}
	closed, err := leadlinev1.NewPositionServiceClient(conn).EndDrive(limited(t), &leadlinev1.EndDriveRequest{Vehicle: "ended"})
	if err != nil || closed.GetClosed().GetPosteriorSha256() != ended {
		t.Errorf("the ended drive ended with %v, %v; want hash %s", closed, err, ended)
	}
	if _, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"erased"}}); err == nil {
		t.Error("the erased vehicle is back")
	}
}

// TestBackup proves what the page on running says of copies: one of a stopped
// server's folder starts where it was made, and a vehicle that has receipts for
// more is told that what came after is lost.
func TestBackup(t *testing.T) {
	dir, backup := filepath.Join(t.TempDir(), "journal"), filepath.Join(t.TempDir(), "copy")
	l := &life{t: t, cfg: oldConfig(dir)}
	l.cfg.Build = "this"
	d := client.Drive{Header: header("v"), Name: "d", Batch: 2, Continue: true}
	feed := func(to int) (had uint64, err error) {
		conn, err := client.Dial(l.addr)
		if err != nil {
			t.Fatal(err)
		}
		defer conn.Close()
		f, err := client.Open(limited(t), conn, d)
		if err != nil {
			return 0, err
		}
		had = f.Had()
		for _, ev := range oldVoyage[2*had : to] {
			if err := f.Send(wire.FromEvent(ev)); err != nil {
				t.Fatal(err)
			}
		}
		return had, f.Leave()
	}
	for _, to := range []int{8, 16} {
		l.start()
		if _, err := feed(to); err != nil {
			t.Fatal(err)
		}
		l.stop(limited(t))
		if to == 8 {
			if err := os.CopyFS(backup, os.DirFS(dir)); err != nil {
				t.Fatal(err)
			}
		}
	}
	l.cfg.Journal.Dir = backup
	l.start()
	d.Acknowledged = 8
	if _, err := feed(16); saidBy(err).reason != leadlinev1.Reason_REASON_JOURNAL_DAMAGED {
		t.Errorf("a vehicle with receipts for more: %v", err)
	}
	d.Acknowledged = 4
	if had, err := feed(16); err != nil || had != 4 {
		t.Errorf("a vehicle without: after %d batches, %v", had, err)
	}
	l.stop(limited(t))
}
