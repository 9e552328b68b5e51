package main

import (
	"errors"
	"fmt"
	"net"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"
)

// TestFeedKept has the server of a feed with --keep killed, then the feed, while its
// instruments speak: what was heard meanwhile is in the file, and comes to the server
// when that is back, in the same drive. A feed that ends in order leaves no file.
func TestFeedKept(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	town, drivePath := compiledTown(t, dir, 20)
	d, err := readDrive(drivePath)
	if err != nil {
		t.Fatal(err)
	}
	lon, lat := d.Truths[0].Position.Degrees()
	server := []string{"--map", town, "--data", filepath.Join(dir, "data"), "--journal-free-mib", "1"}
	srv := serveMaps(t, server...)
	server = append(server, "--listen", srv.address)
	file := filepath.Join(dir, "van.outbox")
	args := []string{"udp:127.0.0.1:0", "--to", srv.address, "--keep", file, "--vehicle", "van", "--map", "town", "--start", fmt.Sprintf("%.9f,%.9f,30", lon, lat)}
	speak := func(f *feeding) (stop func()) {
		t.Helper()
		_, port, _ := strings.Cut(f.errs.String(), "listening on ")
		port, _, _ = strings.Cut(port, "\n")
		u, err := net.Dial("udp", port)
		if err != nil {
			t.Fatal(err)
		}
		t.Cleanup(func() { u.Close() })
		return instrument(t, u, d.Truths[0].Position)
	}

	f := feedFrom(t, args...)
	stop := speak(f)
	before := heard(t, srv, 20)
	if err := srv.cmd.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	_ = srv.cmd.Wait()
	f.await(t, "is kept in "+file)
	time.Sleep(300 * time.Millisecond) // some 15 times that the instruments speak
	if err := f.cmd.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	<-f.done
	stop()

	srv = serveMaps(t, server...)
	out, errs, status := leadline(t, "feed", "--keep", file, "--to", srv.address)
	_, text, _ := strings.Cut(out, " posteriors from ")
	text, _, _ = strings.Cut(text, " ")
	came, err := strconv.Atoi(text)
	if status != exitDone || err != nil || !strings.Contains(errs, file+" holds ") {
		t.Fatalf("status %d: %s%s", status, out, errs)
	}
	if least := before.accepted(t) + 10; came < least {
		t.Errorf("%d measurements came, at least %d were heard", came, least)
	}
	if l := heard(t, srv, came); !l.Ended || l.accepted(t) != came {
		t.Errorf("the server has %+v", l)
	}
	if _, err := os.Stat(file); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("the drive has ended, and its file is there: %v", err)
	}

	f = feedFrom(t, append(args, "--drive", "second", "--leave-open")...)
	stop = speak(f)
	heard(t, srv, 20)
	stop()
	if status := f.stop(t); status != exitDone || !strings.Contains(f.out.String(), "second is left open") {
		t.Errorf("status %d: %s%s", status, f.out, f.errs)
	}
	// The file alone is sent as its feed was asked: the drive is left open again.
	out, errs, status = leadline(t, "feed", "--keep", file, "--to", srv.address)
	if status != exitDone || !strings.Contains(out, "second is left open") {
		t.Errorf("status %d: %s%s", status, out, errs)
	}
	if l := heard(t, srv, 20); l.Ended {
		t.Error("it was to be left open, and has ended")
	}
	out, errs, status = leadline(t, "feed", "--keep", file, "--to", srv.address, "--leave-open=false")
	if status != exitDone || !strings.Contains(out, "sha256 ") || strings.Contains(errs, " holds ") {
		t.Errorf("status %d: %s%s", status, out, errs)
	}
}
