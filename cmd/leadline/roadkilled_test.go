package main

import (
	"context"
	"fmt"
	"path/filepath"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"google.golang.org/protobuf/encoding/protojson"

	"leadline/engine/client"
	"leadline/engine/drivefile"
	"leadline/engine/sensor"
	"leadline/engine/wire"
	"leadline/fixtures/scenes"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestRoadKilled runs the real server with a road's traffic open: it is killed
// (SIGKILL) before there is a checkpoint, stopped in order, which writes one, and
// killed again. Nothing that was acknowledged is lost, nothing counts twice, and
// the picture is that of a server to which nothing happened, and that of the file.
func TestRoadKilled(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	suite := writeText(t, filepath.Join(dir, "two.yaml"), scenes.TwoPosts)
	events := scenes.PastTwoPosts(1903867200e9)
	unknown := events[80].Measurement.(sensor.AcousticBearing)
	unknown.Post = "p9"
	events[80].Measurement = unknown
	ctx, cancel := context.WithTimeout(t.Context(), patience)
	defer cancel()
	const perBatch = 5
	carry := func(address string, pause func()) (*leadlinev1.Closed, int, error) {
		conn, err := client.Dial(address)
		if err != nil {
			return nil, 0, err
		}
		defer conn.Close()
		h := &leadlinev1.DriveHeader{Vehicle: "lane", Suite: "two", Traffic: true}
		c, err := client.Carry(ctx, conn, client.Drive{Header: h, Name: "day", Batch: perBatch, Window: 2})
		if err != nil {
			return nil, 0, err
		}
		defer c.Abort()
		for i, ev := range events {
			if i%perBatch == 0 {
				pause()
			}
			if err := c.Send(wire.FromEvent(ev)); err != nil {
				return nil, c.Again(), err
			}
		}
		closed, err := c.Close()
		return closed, c.Again(), err
	}
	plain := serveMaps(t, "--suite", suite)
	want, _, err := carry(plain.address, func() {})
	if err != nil {
		t.Fatal(err)
	}
	plain.stop(t)

	args := []string{"--suite", suite, "--data", filepath.Join(dir, "data"), "--journal-free-mib", "1"}
	srv := serveMaps(t, args...)
	address := srv.address
	args = append(args, "--listen", address)
	var sent atomic.Int64
	allowed := make(chan struct{}, len(events)) // batches
	type end struct {
		closed *leadlinev1.Closed
		again  int
		err    error
	}
	ended := make(chan end, 1)
	go func() {
		closed, again, err := carry(address, func() { <-allowed; sent.Add(1) })
		ended <- end{closed, again, err}
	}()
	const third = 15 // a little is left
	for _, kill := range []bool{true, false, true} {
		until := sent.Load() + third
		for range third {
			allowed <- struct{}{}
		}
		for sent.Load() < until { // some are on their way still
			select {
			case e := <-ended:
				t.Fatalf("it is over early: %+v", e)
			case <-time.After(time.Millisecond):
			}
		}
		if kill {
			if err := srv.cmd.Process.Kill(); err != nil {
				t.Fatal(err)
			}
			_ = srv.cmd.Wait()
		} else if status := srv.stop(t); status != 0 {
			t.Errorf("the server stops with status %d", status)
		}
		if log := srv.log.String(); strings.Contains(log, "level=ERROR") {
			t.Errorf("the server said:\n%s", log)
		}
		srv = serveMaps(t, args...)
		eventually(t, "the next server says that it restored the drive", func() bool { return strings.Contains(srv.log.String(), "drive restored") })
	}
	close(allowed)
	got := <-ended
	if got.err != nil || got.again < 3 {
		t.Fatalf("opened again %d times: %v", got.again, got.err)
	}
	text := func(c *leadlinev1.Closed) string {
		p := c.GetTraffic()
		p.AgeS, p.Durable = 0, false
		return protojson.Format(p)
	}
	p := got.closed.GetTraffic()
	if !p.GetDurable() || p.GetAccepted() != uint64(len(events)-1) || p.GetRefused() != 1 || len(p.GetVehicles()) != 1 || len(p.GetDoubts()) != 1 {
		t.Errorf("the picture is %v", p)
	}
	if a, b := text(got.closed), text(want); a != b {
		t.Errorf("after two kills and a stop the picture is\n%s\nand without\n%s", a, b)
	}
	if status := srv.stop(t); status != 0 {
		t.Errorf("the last server stops with status %d", status)
	}
	file := filepath.Join(dir, "day"+drivefile.Suffix)
	if err := writeDrive(file, &drivefile.Drive{Header: drivefile.Header{Vehicle: "lane", Suite: "two"}, Events: events}); err != nil {
		t.Fatal(err)
	}
	out, _, _ := leadline(t, "traffic", file, "--suite", suite, "--every", "0")
	if line := fmt.Sprintln("sha256 of all that is known", p.GetStateSha256()); !strings.HasSuffix(out, line) {
		t.Errorf("the file gives %s, the server %s", out, line)
	}
}
