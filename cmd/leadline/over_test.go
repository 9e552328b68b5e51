package main

import (
	"bytes"
	"context"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/nats-io/nats-server/v2/server"
	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"

	"leadline/engine/study/results"
)

// openBroker starts a broker with JetStream on a free port, to which one user may
// connect.
func openBroker(t *testing.T) (address string) {
	t.Helper()
	b, err := server.NewServer(&server.Options{
		Host: "127.0.0.1", Port: -1, JetStream: true, StoreDir: t.TempDir(), NoSigs: true, NoLog: true,
		Username: "study", Password: "between us",
	})
	if err != nil {
		t.Fatal(err)
	}
	b.Start()
	t.Cleanup(func() { b.Shutdown(); b.WaitForShutdown() })
	if !b.ReadyForConnections(time.Minute) {
		t.Fatal("the broker does not start")
	}
	return "nats://study:between%20us@" + strings.TrimPrefix(b.ClientURL(), "nats://")
}

// process is one that runs beside the test.
type process struct {
	*exec.Cmd
	out, errs lockedBuffer
	ended     chan struct{}
}

func atOnce(t *testing.T, args ...string) *process {
	t.Helper()
	p := &process{Cmd: command(context.Background(), args...), ended: make(chan struct{})}
	p.Stdout, p.Stderr = &p.out, &p.errs
	if err := p.Start(); err != nil {
		t.Fatal(err)
	}
	go func() {
		_ = p.Wait()
		close(p.ended)
	}()
	t.Cleanup(func() {
		_ = p.Process.Kill()
		<-p.ended
	})
	return p
}

// end waits for a process' end, and returns its exit status.
func (p *process) end(t *testing.T) int {
	t.Helper()
	select {
	case <-p.ended:
	case <-time.After(patience):
		t.Fatalf("%s hangs\n%s", strings.Join(p.Args, " "), p.errs.String())
	}
	return p.ProcessState.ExitCode()
}

// eventually waits until something is so.
func eventually(t *testing.T, what string, is func() bool) {
	t.Helper()
	for until := time.Now().Add(patience); !is(); time.Sleep(time.Millisecond) {
		if time.Now().After(until) {
			t.Fatal("never: " + what)
		}
	}
}

// leftBehind are the files of a folder of results, but for what tells of the
// machine's speed.
func leftBehind(t *testing.T, dir string) map[string]string {
	t.Helper()
	out := map[string]string{}
	err := filepath.WalkDir(dir, func(path string, e fs.DirEntry, err error) error {
		if err != nil || e.IsDir() || e.Name() == results.TimingFile {
			return err
		}
		text, err := os.ReadFile(path)
		out[strings.TrimPrefix(path, dir)] = string(text)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

// TestOverABroker: a sweep by way of a real broker leaves the bytes of one on this
// machine, though one of the workers is killed in the midst of a run; a worker of
// another program is refused; and an interrupted one is gone on with.
func TestOverABroker(t *testing.T) {
	runsProgram(t)
	dir := t.TempDir()
	town, out := filepath.Join(dir, "quillmere.roads.arrow"), filepath.Join(dir, "out")
	good(t, "map", "roads", filepath.Join(checkout, "fixtures", "roads", "quillmere.geojson"), "-o", town)
	args := []string{"replay", filepath.Join(checkout, "docs", "first.drive.jsonl"), "--map", town, "--out", out, "--also", "gpx,parquet", "--smooth", "--belief-at", "5"}
	for _, v := range []string{"1", "2", "3", "4"} {
		args = append(args, "--set", "vehicle.corner_sigma_m="+v)
	}
	table := good(t, args...)
	want := leftBehind(t, out)
	if err := os.Rename(out, filepath.Join(dir, "here")); err != nil {
		t.Fatal(err)
	}

	address := openBroker(t)
	conn, err := nats.Connect(address)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close()
	js, err := jetstream.New(conn)
	if err != nil {
		t.Fatal(err)
	}
	over := append(args, "--over", address, "--lost-after", "1s")
	replay := atOnce(t, over...)
	// The job's runs that wait and that workers have.
	var asked jetstream.Consumer
	count := func() (waiting uint64, taken int) {
		info, err := asked.Info(t.Context())
		if err != nil {
			t.Fatal(err)
		}
		return info.NumPending, info.NumAckPending
	}
	eventually(t, "all runs wait at the broker", func() bool {
		if asked == nil {
			st, err := js.Stream(t.Context(), "LEADLINE_RUNS")
			if err != nil {
				return false
			}
			for name := range st.ConsumerNames(t.Context()).Name() {
				if strings.HasPrefix(name, "asked-") {
					if asked, err = st.Consumer(t.Context(), name); err != nil {
						t.Fatal(err)
					}
				}
			}
			return false
		}
		waiting, _ := count()
		return waiting == 4
	})
	// The test's own program is another one than that which was built.
	var said bytes.Buffer
	if status := run([]string{"work", "--broker", address}, &said, &said); status != exitBad || strings.Count(said.String(), "\n") != 1 || !strings.Contains(said.String(), "start the same program") {
		t.Errorf("another program: status %d: %s", status, said.String())
	}
	work := []string{"work", "--broker", address, "--parallel", "1"}
	doomed := atOnce(t, work...)
	eventually(t, "a run is under way when its worker stands still", func() bool {
		if _, taken := count(); taken == 0 {
			return false
		}
		if err := doomed.Process.Signal(syscall.SIGSTOP); err != nil {
			t.Fatal(err)
		}
		if _, taken := count(); taken == 1 {
			return true
		}
		_ = doomed.Process.Signal(syscall.SIGCONT) // it was through
		return false
	})
	_ = doomed.Process.Kill()
	worker := atOnce(t, work...)
	if status := replay.end(t); status != exitDone || replay.out.String() != table {
		t.Fatalf("status %d\n%s%s\nwant\n%s", status, replay.out.String(), replay.errs.String(), table)
	}
	for _, says := range []string{"is refused: the job at the broker is of leadline", "takes part"} {
		if !strings.Contains(replay.errs.String(), says) {
			t.Errorf("the replay does not say %q:\n%s", says, replay.errs.String())
		}
	}
	got := leftBehind(t, out)
	if len(got) != len(want) || len(want) < 4*9 {
		t.Errorf("%d files, want %d", len(got), len(want))
	}
	for name := range want {
		if got[name] != want[name] {
			t.Errorf("%s differs", name)
		}
	}
	eventually(t, "the job's end is known", func() bool { return strings.Contains(worker.errs.String(), "has ended") })

	// Interrupted after a run, and gone on with.
	again := append(over, "--again")
	replay = atOnce(t, again...)
	eventually(t, "the worker takes part", func() bool { return strings.Contains(replay.errs.String(), "takes part") })
	_ = replay.Process.Signal(syscall.SIGINT)
	if status := replay.end(t); status == exitFailure && !strings.Contains(replay.errs.String(), "goes on from there") || status == exitBad {
		t.Errorf("interrupted: status %d: %s", status, replay.errs.String())
	}
	good := atOnce(t, over...)
	if status := good.end(t); status != exitDone {
		t.Errorf("gone on with: status %d: %s", status, good.errs.String())
	}
	for name, text := range leftBehind(t, out) {
		if name != "/summary.json" && text != want[name] {
			t.Errorf("gone on with: %s differs", name)
		}
	}
	if err := worker.Process.Signal(syscall.SIGTERM); err != nil {
		t.Fatal(err)
	}
	if status := worker.end(t); status != exitDone {
		t.Errorf("the worker ends with status %d: %s", status, worker.errs.String())
	}
	bad(t, []string{"--over", "nats://HOST:PORT"}, "replay", args[1], "--map", town, "--over", "somewhere")
	bad(t, []string{"no broker is given"}, "work")
	bad(t, []string{"127.0.0.1:1", "no servers available"}, "work", "--broker", "nats://127.0.0.1:1")
}
