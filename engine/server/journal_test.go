package server

import (
	"bufio"
	"context"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	broker "github.com/nats-io/nats-server/v2/server"
	"golang.org/x/sys/unix"

	"leadline/engine/client"
	"leadline/engine/journal"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// kept is the journal of a folder, with next to nothing left free.
func keptIn(dir string) *journal.Options { return &journal.Options{Dir: dir, FreeBytes: 1} }

// crowded is a journal that wants more room than its disk has, and can begin.
func crowded(t *testing.T) *journal.Options {
	t.Helper()
	dir := t.TempDir()
	var s unix.Statfs_t
	if err := unix.Statfs(dir, &s); err != nil {
		t.Fatal(err)
	}
	return &journal.Options{Dir: dir, FreeBytes: 2 * int64(s.Bavail) * s.Bsize}
}

// brokerDir has this test's program be a broker, and nothing else: in a process
// of its own, since it outlives the servers that prove that they leave nothing
// behind.
const brokerDir = "LEADLINE_TEST_BROKER"

func init() {
	dir := os.Getenv(brokerDir)
	if dir == "" {
		return
	}
	b, err := broker.NewServer(&broker.Options{Host: "127.0.0.1", Port: broker.RANDOM_PORT, NoSigs: true, JetStream: true, StoreDir: dir, SyncAlways: true})
	if err != nil {
		panic(err)
	}
	b.Start()
	if !b.ReadyForConnections(20 * time.Second) {
		panic("the broker does not start")
	}
	fmt.Println(b.Addr())
	_, _ = io.Copy(io.Discard, os.Stdin) // until the test ends
	b.Shutdown()
	os.Exit(0)
}

// atBroker is a journal at a broker of its own, which others can reach, too.
func atBroker(t *testing.T) *journal.Options {
	t.Helper()
	cmd := exec.Command(os.Args[0])
	cmd.Env = append(os.Environ(), brokerDir+"="+t.TempDir())
	cmd.Stderr = os.Stderr
	stop, err := cmd.StdinPipe()
	if err != nil {
		t.Fatal(err)
	}
	says, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		stop.Close()
		if err := cmd.Wait(); err != nil {
			t.Errorf("broker: %v", err)
		}
	})
	address, err := bufio.NewReader(says).ReadString('\n')
	if err != nil {
		t.Fatal(err)
	}
	return &journal.Options{Broker: journal.Broker{URL: "nats://" + strings.TrimSpace(address)}}
}

// life is a server that is started and stopped several times over one journal.
type life struct {
	t    *testing.T
	cfg  Config
	s    *Server
	done chan error
	addr string
}

func (l *life) start() {
	l.t.Helper()
	if l.cfg.Maps == nil {
		l.cfg.Maps = []Map{sea()}
	}
	var err error
	if l.s, err = New(l.cfg); err != nil {
		l.t.Fatal(err)
	}
	ln, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		l.t.Fatal(err)
	}
	l.addr, l.done = ln.Addr().String(), make(chan error, 1)
	go func() { l.done <- l.s.Serve(ln) }()
}

// stop stops it; not in order, if ctx is over: then streams are cut off and
// nothing more is written.
func (l *life) stop(ctx context.Context) {
	_ = l.s.Shutdown(ctx)
	if err := <-l.done; err != nil {
		l.t.Error(err)
	}
}

// TestRestart proves that a drive goes on over restarts of the server, stopped in
// order and not, as if there had been none: same hash, same counts, nothing lost
// and nothing twice, whatever was on its way.
func TestRestart(t *testing.T) {
	evs := voyage(3, 60)
	const cells = 1000 // few cost little
	for _, c := range []struct {
		kept       *journal.Options
		posteriorS float64 // a posterior at most so often
	}{{keptIn(t.TempDir()), 0}, {keptIn(t.TempDir()), 3}, {atBroker(t), 0}} {
		h := header("v")
		h.PosteriorIntervalS = c.posteriorS
		want, _, times := replayedIn(t, cells, c.posteriorS, evs)
		l := &life{t: t, cfg: Config{Journal: c.kept, Build: "this", MaxCells: cells}}
		rng := rand.New(rand.NewPCG(1, 2))
		sent, starts := 0, 0
		for sent < len(evs) {
			l.start()
			conn, err := client.Dial(l.addr)
			if err != nil {
				t.Fatal(err)
			}
			f, err := client.Open(limited(t), conn, client.Drive{Header: h, Name: "d", Batch: 1, Continue: true})
			if err != nil {
				t.Fatal(err)
			}
			if had := int(f.Had()); had > sent || starts > 0 && had == 0 {
				t.Fatalf("%d batches are in of %d that were sent", had, sent)
			} else {
				sent = had
			}
			for range min(20, len(evs)-sent) {
				if err := f.Send(wire.FromEvent(evs[sent])); err != nil {
					t.Fatal(err)
				}
				sent++
			}
			ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
			if rng.IntN(2) == 0 {
				cancel()
			}
			l.stop(ctx)
			if starts == 2 {
				l.cfg.Build = "that" // takes all again
			}
			f.Abort()
			cancel()
			conn.Close()
			starts++
		}
		l.start()
		conn, err := client.Dial(l.addr)
		if err != nil {
			t.Fatal(err)
		}
		before, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"v"}})
		if err != nil || !before.GetPosterior().GetDurable() || !before.GetPosterior().GetRecomputed() {
			t.Errorf("a restored drive is at %v, %v", before, err)
		}
		closed, err := fed(limited(t), conn, client.Drive{Header: h, Name: "d", Batch: 1}, evs)
		if err != nil {
			t.Fatal(err)
		}
		if closed.GetPosteriorSha256() != want || closed.GetAccepted() != uint64(len(evs)) || closed.GetRefused() != 0 || closed.GetPosteriors() != uint64(times) {
			t.Errorf("after %d starts: hash %s, want %s; %d accepted of %d, %d refused, %d posteriors of %d", starts,
				closed.GetPosteriorSha256(), want, closed.GetAccepted(), len(evs), closed.GetRefused(), closed.GetPosteriors(), times)
		}
		conn.Close()
		l.stop(limited(t))
		// The end is durable, too, and what was said at it.
		l.start()
		conn, err = client.Dial(l.addr)
		if err != nil {
			t.Fatal(err)
		}
		again, err := fed(limited(t), conn, client.Drive{Header: h, Name: "d", Batch: 1}, evs)
		if err != nil || again.GetPosteriorSha256() != want {
			t.Errorf("an ended drive that is opened again: %v, %v", again, err)
		}
		conn.Close()
		l.stop(limited(t))
	}
}

// other is another map of the same name.
type other struct{ *plane.Plane }

func (other) Fingerprint() string { return "another plane" }

// TestKeptAside proves that a drive whose map is not here is kept, named to
// whoever asks for it, and goes on once the map is back.
func TestKeptAside(t *testing.T) {
	l := &life{t: t, cfg: Config{Journal: keptIn(t.TempDir()), Build: "this", MaxCells: 1000}}
	evs := voyage(3, 10)
	d := client.Drive{Header: header("v"), Name: "d", Batch: 1, Continue: true}
	open := func() (*client.Feed, error) {
		conn, err := client.Dial(l.addr)
		if err != nil {
			t.Fatal(err)
		}
		t.Cleanup(func() { conn.Close() })
		return client.Open(limited(t), conn, d)
	}
	l.start()
	f, err := open()
	if err != nil {
		t.Fatal(err)
	}
	for _, ev := range evs[:5] {
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	if err := f.Leave(); err != nil {
		t.Fatal(err)
	}
	l.stop(limited(t))
	l.cfg.Maps = []Map{{Name: "sea", Space: other{sea().Space.(*plane.Plane)}}}
	l.start()
	_, err = open()
	if got := saidBy(err); got.reason != leadlinev1.Reason_REASON_UNKNOWN_MAP || got.about["vehicle"] != "v" {
		t.Errorf("a drive whose map is gone: %+v", got)
	}
	l.stop(limited(t))
	l.cfg.Maps = nil
	l.start()
	f, err = open()
	if err != nil || f.Had() != 5 {
		t.Fatalf("with its map again: %v", err)
	}
	f.Abort()
	l.stop(limited(t))
}

// TestSameSuite proves that a drive goes on with the suite that it began with.
func TestSameSuite(t *testing.T) {
	sigma := func(m float64) *sensor.Suite {
		return &sensor.Suite{Vehicle: sensor.Vehicle{AlertLimitM: m, LateWindowS: math.Pi}}
	}
	l := &life{t: t, cfg: Config{Journal: keptIn(t.TempDir()), Build: "this", MaxCells: 1000, Suites: map[string]*sensor.Suite{"boat": sigma(31)}}}
	evs := voyage(3, 10)
	h := header("v")
	h.Suite = "boat"
	d := client.Drive{Header: h, Name: "d", Batch: 1}
	var hash [2]string
	for i, change := range []bool{false, true} {
		d.Name = []string{"d", "e"}[i]
		l.start()
		conn, err := client.Dial(l.addr)
		if err != nil {
			t.Fatal(err)
		}
		f, err := client.Open(limited(t), conn, d)
		if err != nil {
			t.Fatal(err)
		}
		for _, ev := range evs[:6] {
			if err := f.Send(wire.FromEvent(ev)); err != nil {
				t.Fatal(err)
			}
		}
		if err := f.Leave(); err != nil {
			t.Fatal(err)
		}
		conn.Close()
		l.stop(limited(t))
		if change {
			l.cfg.Suites = map[string]*sensor.Suite{"boat": sigma(7)}
		}
		l.start()
		if conn, err = client.Dial(l.addr); err != nil {
			t.Fatal(err)
		}
		closed, err := fed(limited(t), conn, d, evs)
		if err != nil {
			t.Fatal(err)
		}
		hash[i] = closed.GetPosteriorSha256()
		conn.Close()
		l.stop(limited(t))
	}
	if hash[0] != hash[1] {
		t.Errorf("with its suite changed a drive ends with %s, without with %s", hash[1], hash[0])
	}
}

// TestFullDisk fills the disk under a server: it says so in its health, refuses
// measurements with a hint when to come back, answers questions, and goes on by
// itself once there is room, with nothing lost.
func TestFullDisk(t *testing.T) {
	dir := t.TempDir()
	free := func() int64 {
		var s unix.Statfs_t
		if err := unix.Statfs(dir, &s); err != nil {
			t.Fatal(err)
		}
		return int64(s.Bavail) * s.Bsize
	}
	const slack = 512 << 20 // others write on this disk, too
	s, conn := serve(t, Config{Journal: &journal.Options{Dir: filepath.Join(dir, "journal"), FreeBytes: free() - slack}, MaxCells: 1000})
	evs := voyage(3, 20)
	want, _, _ := replayedIn(t, 1000, 0, evs)
	st, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d", Reply: leadlinev1.Reply_REPLY_NONE})
	take := func(sequence uint64) error {
		if err := st.Send(batch(sequence, evs[8*(sequence-1):8*sequence]...)); err != nil {
			return err
		}
		_, err := st.Recv()
		return err
	}
	if err := take(1); err != nil {
		t.Fatal(err)
	}
	ballast, err := os.Create(filepath.Join(dir, "ballast"))
	if err != nil {
		t.Fatal(err)
	}
	defer ballast.Close()
	if err := unix.Fallocate(int(ballast.Fd()), 0, 0, 2*slack); err != nil {
		t.Fatal(err)
	}
	if got := saidBy(take(2)); got.reason != leadlinev1.Reason_REASON_JOURNAL_FULL || got.retry <= 0 {
		t.Errorf("on a full disk: %+v", got)
	}
	if err := s.Ready(); err == nil || !strings.Contains(err.Error(), "no measurement is taken: the journal is full") {
		t.Errorf("the health of a server whose disk is full: %v", err)
	}
	if j, err := leadlinev1.NewPositionServiceClient(conn).DescribeJournal(limited(t), &leadlinev1.DescribeJournalRequest{}); err != nil || !strings.Contains(j.GetFailure(), "are to be left free") {
		t.Errorf("its journal: %v, %v", j, err)
	}
	if _, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"v"}}); err != nil {
		t.Errorf("asked on a full disk: %v", err)
	}
	if err := ballast.Truncate(0); err != nil {
		t.Fatal(err)
	}
	if err := s.Ready(); err != nil {
		t.Errorf("with room again: %v", err)
	}
	st, opened := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d", Reply: leadlinev1.Reply_REPLY_NONE})
	if opened.GetSequence() != 1 {
		t.Errorf("it goes on after batch %d", opened.GetSequence())
	}
	for n := uint64(2); n <= 3; n++ {
		if err := take(n); err != nil {
			t.Fatal(err)
		}
	}
	if err := st.Send(ending); err != nil {
		t.Fatal(err)
	}
	m, err := st.Recv()
	if err != nil || m.GetClosed().GetPosteriorSha256() != want || len(evs) != 24 {
		t.Errorf("it ends with %v, %v; want hash %s of %d measurements", m, err, want, len(evs))
	}
}
