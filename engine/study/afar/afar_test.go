package afar

import (
	"archive/tar"
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/klauspost/compress/zstd"
	"github.com/nats-io/nats-server/v2/server"
	"go.uber.org/goleak"

	"leadline/engine/drivefile"
	"leadline/engine/geo"
	"leadline/engine/journal"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/study/sweep"
)

// The NATS client leaves a goroutine behind for each connection over which files
// went.
func TestMain(m *testing.M) {
	goleak.VerifyTestMain(m, goleak.IgnoreTopFunction("github.com/nats-io/nats.go/jetstream.(*jetStream).resetPendingAcksOnReconnect"))
}

func brokerOf(t *testing.T) journal.Broker {
	t.Helper()
	b, err := server.NewServer(&server.Options{Host: "127.0.0.1", Port: -1, JetStream: true, StoreDir: t.TempDir(), NoSigs: true, NoLog: true})
	if err != nil {
		t.Fatal(err)
	}
	b.Start()
	t.Cleanup(func() { b.Shutdown(); b.WaitForShutdown() })
	if !b.ReadyForConnections(time.Minute) {
		t.Fatal("the broker does not start")
	}
	return journal.Broker{URL: b.ClientURL()}
}

// sea is open water whose file names it.
type sea struct {
	*plane.Plane
	name string
}

func (s sea) Fingerprint() string { return s.name }

func openWater(path string) (*sweep.Map, io.Closer, error) {
	name, err := os.ReadFile(path)
	return &sweep.Map{Path: path, Source: "INVENTED", Space: sea{plane.Open(geo.FromDegrees(-30, 45), 20e3, 100), string(name)}}, io.NopCloser(nil), err
}

func write(t *testing.T, name, text string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

// sail is an invented drive of a few fixes.
func sail(t *testing.T) string {
	t.Helper()
	at := geo.FromDegrees(-30, 45)
	var b bytes.Buffer
	w := drivefile.NewWriter(&b)
	err := w.Write(&drivefile.Record{Header: &drivefile.Header{Vehicle: "boat", Start: drivefile.Start{Point: at, SigmaM: 10}}})
	for k := 1; k <= 4 && err == nil; k++ {
		ev := sensor.Event{Time: sensor.Time(k) * 1e9, Sensor: "gnss", Number: uint64(k), Measurement: sensor.Fix{Position: at, SigmaM: 5}}
		if err = w.WriteEvent(ev); err == nil {
			err = w.Write(&drivefile.Record{Time: ev.Time, Truth: &drivefile.Truth{Position: at, SigmaM: 0.1}})
		}
	}
	if err != nil {
		t.Fatal(err)
	}
	return b.String()
}

func job(t *testing.T, program Program) *sweep.Job {
	t.Helper()
	m, _, err := openWater(write(t, "sea", "this sea"))
	if err != nil {
		t.Fatal(err)
	}
	j := &sweep.Job{MaxCells: 500, Program: program.SHA256, Version: program.Version, Parallel: 8, HoldOutFixes: true}
	text := sail(t)
	for name, text := range map[string]string{"a whole": text, "b cut off": text[:len(text)*2/3], "c empty": "", "d without measurements": text[:strings.Index(text, "\n")+1]} {
		j.Drives = append(j.Drives, sweep.Drive{Path: write(t, name, text), Name: name, Bytes: int64(len(text)), Map: m})
	}
	return j
}

func outcomes(t *testing.T, j *sweep.Job) map[string]string {
	t.Helper()
	out := map[string]string{}
	_, err := j.Run(t.Context(), func(o *sweep.Outcome) error {
		text, err := json.Marshal([]any{o.Score, o.Run, fmt.Sprint(o.Err)})
		out[o.Drive.Name] = string(text)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

// work starts a worker of a program; ended is given why it ended.
func work(t *testing.T, at journal.Broker, p Program, open func(string) (*sweep.Map, io.Closer, error)) (end func(), ended chan error) {
	ctx, cancel := context.WithCancel(t.Context())
	ended = make(chan error, 1)
	go func() {
		ended <- Work(ctx, WorkOptions{Broker: at, Program: p, Name: p.Version + " worker", OpenMap: open, Parallel: 2, Say: func(line string) {}})
	}()
	return cancel, ended
}

// TestOutcomesAreTheSame: drives that can be run, and that cannot, have the outcome
// that they have here, scores and words; without folders.
func TestOutcomesAreTheSame(t *testing.T) {
	at, p := brokerOf(t), Program{"v", "this one", "any"}
	j := job(t, p)
	want := outcomes(t, j)
	q, err := Open(t.Context(), QueueOptions{Broker: at, Program: p})
	if err != nil {
		t.Fatal(err)
	}
	defer q.Close()
	j.Elsewhere = q
	end, ended := work(t, at, p, openWater)
	got := outcomes(t, j)
	for name := range want {
		if got[name] != want[name] {
			t.Errorf("%s:\n%s\nwant\n%s", name, got[name], want[name])
		}
	}
	if len(got) != 4 || !strings.Contains(got["b cut off"], "cut off?") || !strings.Contains(got["a whole"], "rmse_m") {
		t.Errorf("%q", got)
	}
	end()
	if err := <-ended; err != nil {
		t.Error(err)
	}
}

// TestRefused: a worker whose map turns out to be another one ends with a line that
// says so, and one of another program; both are told where the job is.
func TestRefused(t *testing.T) {
	at, p := brokerOf(t), Program{"v", "this one", "any"}
	j := job(t, p)
	said := make(chan string, 100)
	q, err := Open(t.Context(), QueueOptions{Broker: at, Program: p, LostAfter: time.Second, Say: func(line string) { said <- line }})
	if err != nil {
		t.Fatal(err)
	}
	defer q.Close()
	j.Elsewhere = q
	ctx, cancel := context.WithCancel(t.Context())
	done := make(chan error, 1)
	go func() {
		_, err := j.Run(ctx, func(o *sweep.Outcome) error { return nil })
		done <- err
	}()
	other := func(path string) (*sweep.Map, io.Closer, error) { return openWater(write(t, "sea", "another sea")) }
	for want, start := range map[string]func() chan error{
		"the map that the broker has is another one":  func() chan error { _, ended := work(t, at, p, other); return ended },
		"is of leadline v for any (SHA-256 this one)": func() chan error { _, ended := work(t, at, Program{"w", "that one", "any"}, openWater); return ended },
	} {
		if err := <-start(); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("the worker ends with %v, want %q", err, want)
		}
		for line := range said {
			if strings.Contains(line, want) {
				break
			}
		}
	}
	cancel()
	if err := <-done; err != nil {
		t.Error(err)
	}
}

// TestUnpack: what comes packed goes into the folder, and nowhere else.
func TestUnpack(t *testing.T) {
	for name, good := range map[string]bool{"score.json": true, "../score.json": false, "/tmp/score.json": false, ".hidden": false, "a/b": false, `a\b`: false, "": false} {
		var b bytes.Buffer
		z, err := zstd.NewWriter(&b, zstd.WithEncoderConcurrency(1))
		if err != nil {
			t.Fatal(err)
		}
		w := tar.NewWriter(z)
		if err := w.WriteHeader(&tar.Header{Name: name, Size: 2, Mode: 0o600, Typeflag: tar.TypeReg}); err != nil {
			t.Fatal(err)
		}
		_, _ = w.Write([]byte("{}"))
		if err := w.Close(); err != nil {
			t.Fatal(err)
		}
		if err := z.Close(); err != nil {
			t.Fatal(err)
		}
		dir := t.TempDir()
		err = unpack(write(t, "packed", b.String()), dir)
		files, _ := os.ReadDir(dir)
		if (err == nil) != good || len(files) > 0 != good {
			t.Errorf("%q: %v, %d files", name, err, len(files))
		}
	}
	whole := t.TempDir()
	for name, text := range map[string]string{"a": "1", "b": strings.Repeat("track\n", 1<<12)} {
		if err := os.WriteFile(filepath.Join(whole, name), []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	packed, dir := filepath.Join(t.TempDir(), "packed"), t.TempDir()
	if err := pack(whole, packed); err != nil {
		t.Fatal(err)
	}
	if err := unpack(packed, dir); err != nil {
		t.Fatal(err)
	}
	if text, err := os.ReadFile(filepath.Join(dir, "b")); err != nil || len(text) != 6<<12 {
		t.Errorf("%d bytes, %v", len(text), err)
	}
	text, err := os.ReadFile(packed)
	if err != nil {
		t.Fatal(err)
	}
	if err := unpack(write(t, "cut", string(text[:len(text)-4])), t.TempDir()); err == nil {
		t.Error("what is cut off was taken for whole")
	}
}
