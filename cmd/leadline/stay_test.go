package main

import (
	"bytes"
	"io"
	"net/http"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
	"time"

	"leadline/engine/sensor"
	"leadline/engine/wire"
)

// TestMoveTimes proves that a measurement's own time and that since when it holds
// move together, and nothing else does.
func TestMoveTimes(t *testing.T) {
	at := sensor.Time(time.Date(2030, 5, 1, 8, 0, 0, 0, time.UTC).UnixNano())
	ev := sensor.Event{Time: at + 1e9, Sensor: "odo", Number: 3, Measurement: sensor.Travel{Since: at, DistanceM: 5, SigmaM: 0.1}}
	m := wire.FromEvent(ev)
	moveTimes(m.ProtoReflect(), time.Hour)
	got, err := wire.ToEvent(m)
	if err != nil {
		t.Fatal(err)
	}
	want := ev
	want.Time += 3600e9
	want.Measurement = sensor.Travel{Since: at + 3600e9, DistanceM: 5, SigmaM: 0.1}
	if got != want {
		t.Errorf("moved to %+v, want %+v", got, want)
	}
}

// TestStay has the program go on after a demonstration, gets its page, and
// interrupts it as control-C does while a stream as the page has it is open: it ends within seconds,
// says so and where all is, and that is no failure. An address that is taken is said at once.
func TestStay(t *testing.T) {
	t.Parallel()
	runsProgram(t)
	dir := t.TempDir()
	town := townJSON(t, filepath.Join(dir, "quay.json"), 8, 7)
	cmd := command(t.Context(), "demo", "--stay=127.0.0.1:0", "--out", dir, "--turns", "4", "--seed", "3", "--roads", town)
	out := &lockedBuffer{}
	cmd.Stdout, cmd.Stderr = out, out
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	ended, gone := make(chan error, 1), make(chan struct{})
	go func() {
		ended <- cmd.Wait()
		close(gone)
	}()
	t.Cleanup(func() {
		_ = cmd.Process.Kill()
		<-gone
	})
	look := regexp.MustCompile(`Look at (http://([\d.:]+)/) `)
	var at []string
	for end := time.Now().Add(patience); at == nil; time.Sleep(20 * time.Millisecond) {
		at = look.FindStringSubmatch(out.String())
		select {
		case err := <-ended:
			t.Fatalf("it ends: %v\n%s", err, out)
		default:
		}
		if time.Now().After(end) {
			t.Fatalf("it does not stay:\n%s", out)
		}
	}
	url, address := at[1], at[2]
	bad(t, []string{"--stay " + address, "give another address or port"}, "demo", "--stay="+address)

	page, err := http.Get(url) //nolint:noctx // it is answered at once
	if err != nil {
		t.Fatal(err)
	}
	text, err := io.ReadAll(page.Body)
	_ = page.Body.Close()
	if err != nil || page.StatusCode != 200 || !bytes.Contains(text, []byte("<title>Leadline</title>")) {
		t.Errorf("the page is %d, %v: %s", page.StatusCode, err, text)
	}

	// A stream as the page has it, and no end of it.
	body := []byte{0, 0, 0, 0, 2, '{', '}'}
	r, err := http.Post(url+"leadline.v1.PositionService/Follow", "application/connect+json", bytes.NewReader(body)) //nolint:noctx // it ends with the server
	if err != nil {
		t.Fatal(err)
	}
	defer r.Body.Close()
	if _, err := io.ReadFull(r.Body, make([]byte, 100)); err != nil {
		t.Fatalf("no news of %s: %v", url, err)
	}
	interrupted := time.Now()
	if err := cmd.Process.Signal(os.Interrupt); err != nil {
		t.Fatal(err)
	}
	select {
	case err := <-ended:
		t.Logf("ended %v after the signal", time.Since(interrupted))
		if err != nil {
			t.Errorf("it ends with %v", err)
		}
	case <-time.After(20 * time.Second): // a second and a half on a machine that does nothing else
		t.Fatal("it does not end")
	}
	said := strings.TrimSpace(out.String()[strings.Index(out.String(), "control-C ends it.")+len("control-C ends it."):])
	if said != "The server has stopped; maps, drives and pictures are in "+dir+"." {
		t.Errorf("at its end it says %q", said)
	}
}
