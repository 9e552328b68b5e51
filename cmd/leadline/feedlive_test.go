package main

import (
	"bytes"
	"context"
	"fmt"
	"io"
	"math"
	"net"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// feeding is a feed from instruments that runs.
type feeding struct {
	cmd  *exec.Cmd
	out  *bytes.Buffer // read it once done is closed
	errs *lockedBuffer
	done chan struct{}
}

// feedFrom starts one and waits until it feeds.
func feedFrom(t *testing.T, args ...string) *feeding {
	t.Helper()
	runsProgram(t)
	f := &feeding{
		cmd: command(context.Background(), append([]string{"feed"}, args...)...),
		out: &bytes.Buffer{}, errs: &lockedBuffer{}, done: make(chan struct{}),
	}
	f.cmd.Stdout, f.cmd.Stderr = f.out, f.errs
	if err := f.cmd.Start(); err != nil {
		t.Fatal(err)
	}
	go func() {
		_ = f.cmd.Wait()
		close(f.done)
	}()
	t.Cleanup(func() {
		_ = f.cmd.Process.Kill()
		<-f.done
	})
	f.await(t, "feeding ")
	return f
}

// await waits for a word on standard error.
func (f *feeding) await(t *testing.T, word string) {
	t.Helper()
	for deadline := time.Now().Add(patience); !strings.Contains(f.errs.String(), word); time.Sleep(5 * time.Millisecond) {
		select {
		case <-f.done:
			t.Fatalf("feed ended: %s", f.errs)
		default:
		}
		if time.Now().After(deadline) {
			t.Fatalf("feed does not say %q: %s", word, f.errs)
		}
	}
}

// stop interrupts it and returns its exit status.
func (f *feeding) stop(t *testing.T) int {
	t.Helper()
	if err := f.cmd.Process.Signal(syscall.SIGINT); err != nil {
		t.Fatal(err)
	}
	select {
	case <-f.done:
	case <-time.After(patience):
		t.Fatal("feed does not stop")
	}
	return f.cmd.ProcessState.ExitCode()
}

// instrument speaks fifty times a second until the test ends or told to stop:
// a receiver that stands at a place, its compass, and line noise.
func instrument(t *testing.T, w io.Writer, at geo.LonLat) (stop func()) {
	t.Helper()
	lon, lat := at.Degrees()
	angle := func(deg float64, width int) string {
		d := math.Floor(math.Abs(deg))
		return fmt.Sprintf("%0*d%010.7f", width, int(d), 60*(math.Abs(deg)-d))
	}
	burst := sentence("GPGGA,120000,%s,N,%s,W,4,08,0.9,5.4,M,46.9,M,,", angle(lat, 2), angle(lon, 3)) +
		sentence("GPVTG,,,,,0.0,N,,,A") + "\xff\xfe$GPG\x00\r\n$GPVTG,1*00\r\n" +
		strings.Repeat("x", 5000) + "\r\n$SDD"
	quit, done := make(chan struct{}), make(chan struct{})
	go func() {
		defer close(done)
		for {
			select {
			case <-quit:
				return
			case <-time.After(20 * time.Millisecond):
			}
			if _, err := io.WriteString(w, burst); err != nil {
				return // the test is over, or closed it
			}
		}
	}()
	stop = func() {
		select {
		case <-quit:
		default:
			close(quit)
		}
		<-done
	}
	return stop
}

// live is what the tests read of an answer.
type live struct {
	Posterior struct {
		Mean   struct{ Lon, Lat float64 }
		Counts struct{ Accepted, Refused string }
	}
	Ended bool
}

// accepted is the number of measurements that the server took; 0 before its
// first posterior.
func (l *live) accepted(t *testing.T) int {
	t.Helper()
	if l.Posterior.Counts.Accepted == "" {
		return 0
	}
	n, err := strconv.Atoi(l.Posterior.Counts.Accepted)
	if err != nil {
		t.Fatal(err)
	}
	return n
}

// heard waits until the server has so many measurements of the vehicle.
func heard(t *testing.T, srv *running, least int) (l live) {
	t.Helper()
	for deadline := time.Now().Add(patience); ; time.Sleep(50 * time.Millisecond) {
		out, errs, status := leadline(t, "where", "van", "--at", srv.address, "--json")
		if status == exitDone {
			readJSON(t, out, &l)
			if l.accepted(t) >= least {
				return l
			}
		}
		if time.Now().After(deadline) {
			t.Fatalf("the server has not heard enough: %s%s", out, errs)
		}
	}
}

// TestFeedLive feeds a vehicle from TCP, UDP and a serial port, through garbage;
// leaves the drive open, and goes on with it; and ends it.
func TestFeedLive(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	town, drivePath := compiledTown(t, dir, 20)
	d, err := readDrive(drivePath)
	if err != nil {
		t.Fatal(err)
	}
	at := d.Truths[0].Position
	lon, lat := at.Degrees()
	srv := serveMaps(t, "--map", town)
	args := func(source string, more ...string) []string {
		return append([]string{source, "--to", srv.address, "--vehicle", "van", "--map", "town", "--start", fmt.Sprintf("%.9f,%.9f,30", lon, lat), "--drive", "watch"}, more...)
	}
	there := func(l live) {
		t.Helper()
		off, _, err := geo.WGS84.Distance(at, geo.FromDegrees(l.Posterior.Mean.Lon, l.Posterior.Mean.Lat))
		// The car keeps up to 4 m off a road that is 1.5 m rms off itself.
		if err != nil || off > 15 {
			t.Errorf("it is %.1f m off (%v)", off, err)
		}
	}

	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	accepted := make(chan net.Conn, 10)
	go func() {
		for {
			c, err := l.Accept()
			if err != nil {
				return
			}
			accepted <- c
		}
	}()
	f := feedFrom(t, args("tcp:"+l.Addr().String(), "--leave-open")...)
	c := <-accepted
	stop := instrument(t, c, at)
	there(heard(t, srv, 20))
	stop()
	c.Close() // the instrument is switched off and on
	f.await(t, "is lost")
	c = <-accepted
	stop = instrument(t, c, at)
	f.await(t, "is back")
	now := heard(t, srv, 60)
	stop()
	c.Close()
	if status := f.stop(t); status != exitDone || !strings.Contains(f.out.String(), "--drive watch") {
		t.Errorf("status %d: %s%s", status, f.out, f.errs)
	}
	for _, word := range []string{"measurements from", "ground_speed", "checksum", "a line that is too long", "cut off by the next sentence"} {
		if !strings.Contains(f.errs.String(), word) {
			t.Errorf("feed does not say %q at its end:\n%s", word, f.errs)
		}
	}
	if now.Ended {
		t.Error("the drive has ended")
	}

	// The same drive goes on from datagrams.
	f = feedFrom(t, args("udp:127.0.0.1:0", "--leave-open")...)
	_, port, _ := strings.Cut(f.errs.String(), "listening on ")
	port, _, _ = strings.Cut(port, "\n")
	u, err := net.Dial("udp", strings.TrimSpace(port))
	if err != nil {
		t.Fatal(err)
	}
	defer u.Close()
	stop = instrument(t, u, at)
	now = heard(t, srv, now.accepted(t)+40)
	there(now)
	stop()
	if status := f.stop(t); status != exitDone || now.Ended {
		t.Errorf("status %d: %s%s", status, f.out, f.errs)
	}

	// And from a serial port, which ends it.
	port0, device := pseudoTerminal(t)
	f = feedFrom(t, args("serial:"+device+"?baud=115200")...)
	stop = instrument(t, port0, at)
	now = heard(t, srv, now.accepted(t)+40)
	there(now)
	stop()
	if status := f.stop(t); status != exitDone || !strings.Contains(f.out.String(), "sha256 ") {
		t.Errorf("status %d: %s%s", status, f.out, f.errs)
	}
	if l := heard(t, srv, now.accepted(t)); !l.Ended {
		t.Error("the drive goes on")
	}
}

// TestFeedLiveBadInput: one line that says what to do.
func TestFeedLiveBadInput(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	drive := writeText(t, filepath.Join(dir, "ok.drive.jsonl"), head+travel)
	nobody := freeAddress(t)
	for name, c := range map[string]struct {
		args  []string
		words []string
	}{
		"no vehicle":            {[]string{"udp:127.0.0.1:0"}, []string{"--vehicle", "name the vehicle"}},
		"an address":            {[]string{"tcp:plotter", "--vehicle", "v"}, []string{"tcp:plotter", "tcp:HOST:PORT"}},
		"a rate":                {[]string{"serial:/dev/x?baud=fast", "--vehicle", "v"}, []string{"fast", "baud"}},
		"no device":             {[]string{"serial:/dev/none", "--vehicle", "v"}, []string{"/dev/none", "plugged in"}},
		"nobody answers":        {[]string{"tcp:" + nobody, "--vehicle", "v"}, []string{nobody, "switched on"}},
		"no server":             {[]string{"udp:127.0.0.1:0", "--vehicle", "v", "--to", nobody}, []string{"no answer", "running"}},
		"speed":                 {[]string{"udp:127.0.0.1:0", "--vehicle", "v", "--speed", "2"}, []string{"--speed", "recorded"}},
		"a recorded drive's":    {[]string{drive, "--vehicle", "v"}, []string{"--vehicle", "header"}},
		"a recorded drive's, 2": {[]string{drive, "--leave-open"}, []string{"--leave-open", "recorded"}},
		"nothing":               {nil, []string{"give a drive file, a source, or --keep"}},
		"nothing kept":          {[]string{"--keep", filepath.Join(dir, "none"), "--to", nobody}, []string{"none", "no such file"}},
		"kept, and a flag":      {[]string{"--keep", filepath.Join(dir, "none"), "--map", "m"}, []string{"--map", "says it itself"}},
		"a drive kept":          {[]string{drive, "--keep", filepath.Join(dir, "none")}, []string{"--keep", "instruments"}},
		"kept in a drive":       {[]string{"udp:127.0.0.1:0", "--vehicle", "v", "--keep", drive, "--to", nobody}, []string{drive, "no outbox"}},
		"kept in nothing":       {[]string{"udp:127.0.0.1:0", "--vehicle", "v", "--keep", filepath.Join(dir, "x"), "--keep-mib", "0"}, []string{"--keep-mib", "positive"}},
		"sentences":             {[]string{"udp:127.0.0.1:0", "--vehicle", "v", "--sentences", filepath.Join(dir, "none.yaml")}, []string{"--sentences", "none.yaml"}},
		"variation":             {[]string{"udp:127.0.0.1:0", "--vehicle", "v", "--variation", "200"}, []string{"variation", "200"}},
	} {
		t.Run(name, func(t *testing.T) { bad(t, c.words, append([]string{"feed"}, c.args...)...) })
	}
}

// TestDue: at twice real time everything comes after half of the time.
func TestDue(t *testing.T) {
	first := sensor.Time(1e18)
	for _, c := range []struct {
		after, speed float64
		want         time.Duration
	}{{0, 1, 0}, {3, 1, 3 * time.Second}, {3, 2, 1500 * time.Millisecond}, {3, 0.5, 6 * time.Second}, {86400, 1e-9, 1 << 62}} {
		if got := due(first, first+sensor.Time(c.after*1e9), c.speed); got != c.want {
			t.Errorf("%v s at %v times real time: %v, want %v", c.after, c.speed, got, c.want)
		}
	}
}
