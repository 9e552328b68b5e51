package main

import (
	"context"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"leadline/engine/client"
	"leadline/engine/drivefile"
	"leadline/engine/sensor"
	"leadline/engine/wire"
	"leadline/fixtures/accept"
	leadlinev1 "leadline/proto/leadline/v1"
)

// long is read before TestMain takes the variables away.
var long = accept.Long()

// recorded reads a drive file as a vehicle sends it.
func recorded(t *testing.T, path string) (*leadlinev1.DriveHeader, []sensor.Event) {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	d, err := drivefile.ReadAll(f, path)
	if err != nil {
		t.Fatal(err)
	}
	return wire.FromHeader(d.Header), d.Events
}

// TestKilled runs the real server with a journal under load, kills it (SIGKILL)
// at random moments, starts it again on the same folder and the same port, and
// compares: each vehicle's drive ends with the hash of a server that nobody
// killed; no acknowledged batch is lost and none counts twice. The whole form
// kills 200 times.
func TestKilled(t *testing.T) {
	t.Parallel()
	kills, vehicles, seconds := 3, 2, 40.0
	if long {
		kills, vehicles, seconds = 200, 20, 600
	}
	dir := t.TempDir()
	mapPath, drivePath := compiledTown(t, dir, seconds)
	header, events := recorded(t, drivePath)
	args := []string{"--map", mapPath, "--data", filepath.Join(dir, "data"), "--journal-free-mib", "1", "--max-vehicles", "100"}

	plain := serveMaps(t, "--map", mapPath)
	ctx, cancel := context.WithTimeout(t.Context(), patience*time.Duration(1+kills/50))
	defer cancel()
	want := make([]*leadlinev1.Closed, vehicles)
	carry := func(address string, vehicle int, pause func()) (*leadlinev1.Closed, int, error) {
		conn, err := client.Dial(address)
		if err != nil {
			return nil, 0, err
		}
		defer conn.Close()
		h := &leadlinev1.DriveHeader{Vehicle: fmt.Sprint(header.GetVehicle(), vehicle), Map: header.GetMap(), Start: header.GetStart()}
		c, err := client.Carry(ctx, conn, client.Drive{Header: h, Name: "morning", Batch: 5 + vehicle, Window: 4, Reply: leadlinev1.Reply_REPLY_NONE})
		if err != nil {
			return nil, 0, err
		}
		defer c.Abort()
		for i, ev := range events {
			if i%(5+vehicle) == 0 {
				pause()
			}
			if err := c.Send(wire.FromEvent(ev)); err != nil {
				return nil, c.Again(), err
			}
		}
		closed, err := c.Close()
		return closed, c.Again(), err
	}
	for v := range vehicles {
		var err error
		if want[v], _, err = carry(plain.address, v, func() {}); err != nil {
			t.Fatal(err)
		}
	}
	plain.stop(t)

	srv := serveMaps(t, args...)
	address := srv.address
	args = append(args, "--listen", address)
	var fleet sync.WaitGroup
	done := make(chan struct{})
	var sent atomic.Int64 // batches
	got, again, errs := make([]*leadlinev1.Closed, vehicles), make([]int, vehicles), make([]error, vehicles)
	for v := range vehicles {
		fleet.Go(func() {
			got[v], again[v], errs[v] = carry(address, v, func() {
				sent.Add(1)
				time.Sleep(2 * time.Millisecond)
			})
		})
	}
	go func() { fleet.Wait(); close(done) }()
	rng := rand.New(rand.NewPCG(1, 2))
	killed, most := 0, vehicles*len(events)/(5+vehicles)/(kills+1) // batches between two kills
	for killed < kills {
		for until := sent.Load() + 1 + rng.Int64N(int64(most)); sent.Load() < until; time.Sleep(time.Millisecond) {
			select {
			case <-done:
				t.Fatalf("the fleet was done after %d of %d kills: %v", killed, kills, errs)
			default:
			}
		}
		time.Sleep(time.Duration(rng.IntN(5000)) * time.Microsecond)
		if err := srv.cmd.Process.Kill(); err != nil {
			t.Fatal(err)
		}
		_ = srv.cmd.Wait()
		if log := srv.log.String(); strings.Contains(log, "level=ERROR") {
			t.Errorf("before it was killed the server said:\n%s", log)
		}
		killed++
		srv = serveMaps(t, args...)
	}
	<-done
	for v := range vehicles {
		switch {
		case errs[v] != nil:
			t.Errorf("vehicle %d: %v", v, errs[v])
		case got[v].GetPosteriorSha256() != want[v].GetPosteriorSha256() || got[v].GetAccepted() != want[v].GetAccepted() || got[v].GetPosteriors() != want[v].GetPosteriors():
			t.Errorf("vehicle %d: after %d kills hash %s, %d accepted, %d posteriors; without %s, %d, %d", v, killed,
				got[v].GetPosteriorSha256(), got[v].GetAccepted(), got[v].GetPosteriors(), want[v].GetPosteriorSha256(), want[v].GetAccepted(), want[v].GetPosteriors())
		case again[v] == 0:
			t.Errorf("vehicle %d never had to open its drive again", v)
		}
	}
	if status := srv.stop(t); status != 0 {
		t.Errorf("the last server stops with status %d", status)
	}
	if log := srv.log.String(); strings.Contains(log, "level=ERROR") || !strings.Contains(log, "drive restored") {
		t.Errorf("the last server said:\n%s", log)
	}
	t.Logf("%d kills, %d vehicles, %d measurements each; opened again %v times", killed, vehicles, len(events), again)
}
