package main

import (
	"context"
	"fmt"
	"net"
	"path/filepath"
	"strings"
	"testing"

	leadlinev1 "leadline/proto/leadline/v1"
)

// TestFeedSlip: a sighting that a dispatcher entered and the server refused is no
// error of the vehicle's feed, which says it as a note. What the feed sent and the
// server refused is one, and counted by itself.
func TestFeedSlip(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	town, drivePath := compiledTown(t, dir, 20)
	d, err := readDrive(drivePath)
	if err != nil {
		t.Fatal(err)
	}
	lon, lat := d.Truths[0].Position.Degrees()
	srv := serveMaps(t, "--map", town)
	f := feedFrom(t, "udp:127.0.0.1:0", "--to", srv.address, "--vehicle", "van", "--map", "town", "--start", fmt.Sprintf("%.9f,%.9f,30", lon, lat))
	_, port, _ := strings.Cut(f.errs.String(), "listening on ")
	port, _, _ = strings.Cut(port, "\n")
	u, err := net.Dial("udp", port)
	if err != nil {
		t.Fatal(err)
	}
	defer u.Close()
	stop := instrument(t, u, d.Truths[0].Position)
	heard(t, srv, 20)
	said, err := leadlinev1.NewPositionServiceClient(atServer(t, srv)).AddSighting(context.Background(), &leadlinev1.AddSightingRequest{
		Vehicle: "van", Sighting: &leadlinev1.Sighting{Place: &leadlinev1.Sighting_Road{Road: "a road that is nowhere"}},
	})
	if err != nil || said.GetRefusal() == nil {
		t.Fatalf("it was not refused: %v, %v", said, err)
	}
	stop()
	if status := f.stop(t); status != exitDone || !strings.Contains(f.errs.String(), "note: the server refused 1 more measurement of this drive") {
		t.Errorf("status %d:\n%s%s", status, f.out, f.errs)
	}
	if strings.Contains(f.errs.String(), "%!") || !strings.Contains(f.out.String(), " 1 refused") {
		t.Errorf("at its end:\n%s%s", f.out, f.errs)
	}

	// The drive has ended now: it is not carried on to the present, which is said first.
	const ended = "not carried on to the present: its drive has ended"
	out, errs, status := leadline(t, "where", "van", "--at", srv.address, "--now")
	if lines := strings.Split(out, "\n"); status != exitDone || errs != "" || len(lines) < 2 || !strings.Contains(lines[1], ended) {
		t.Errorf("status %d: %s%s", status, out, errs)
	}
	if _, errs, status = leadline(t, "where", "van", "--at", srv.address, "--now", "--json"); status != exitDone || !strings.Contains(errs, "note: van: "+ended) {
		t.Errorf("status %d: %s", status, errs)
	}
	if out, _, _ = leadline(t, "where", "van", "--at", srv.address); strings.Contains(out, "carried") {
		t.Errorf("it was not asked for: %s", out)
	}

	own := writeText(t, filepath.Join(dir, "own.drive.jsonl"), strings.Replace(head+travel, `"sigma_m":0.1`, `"sigma_m":0`, 1))
	_, errs, status = leadline(t, "feed", own, "--to", srv.address)
	if status != exitBad || !strings.Contains(errs, "1 of 1 measurements were refused, first ") || strings.Contains(errs, "note:") {
		t.Errorf("status %d: %s", status, errs)
	}
}
