package outbox

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math/rand/v2"
	"net"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"go.uber.org/goleak"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"leadline/engine/client"
	leadlinev1 "leadline/proto/leadline/v1"
)

// depot is a server that knows the protocol of feeds and no filter: it keeps what
// each drive brought, and breaks streams off by chance.
type depot struct {
	leadlinev1.UnimplementedPositionServiceServer
	durable bool

	mu     sync.Mutex
	rng    *rand.Rand
	breaks float64 // the chance of each batch
	away   bool
	drives map[string][][]uint64 // numbers of the measurements, by batch
}

func (d *depot) Feed(st grpc.BidiStreamingServer[leadlinev1.FeedRequest, leadlinev1.FeedResponse]) error {
	m, err := st.Recv()
	if err != nil {
		return err
	}
	name := m.GetOpen().GetDrive()
	gone := status.Error(codes.Unavailable, "the depot is closed")
	d.mu.Lock()
	away, have := d.away, len(d.drives[name])
	d.mu.Unlock()
	if away {
		return gone
	}
	if err := st.Send(&leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Opened{Opened: &leadlinev1.Opened{Sequence: uint64(have), MaxBatch: 100, MaxMessageBytes: 1 << 20}}}); err != nil {
		return err
	}
	for {
		m, err := st.Recv()
		switch {
		case errors.Is(err, io.EOF):
			return nil
		case err != nil:
			return err
		}
		if m.GetEnd() != nil {
			return st.Send(&leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Closed{Closed: &leadlinev1.Closed{Accepted: 1}}})
		}
		d.mu.Lock()
		if d.away {
			d.mu.Unlock()
			return gone
		}
		lost, unsaid := d.rng.Float64() < d.breaks/2, d.rng.Float64() < d.breaks/2
		n := m.GetBatch().GetSequence()
		if had := uint64(len(d.drives[name])); !lost && n == had+1 {
			var numbers []uint64
			for _, x := range m.GetBatch().GetMeasurements() {
				numbers = append(numbers, x.GetNumber())
			}
			d.drives[name] = append(d.drives[name], numbers)
		} else if !lost && n > had+1 {
			d.mu.Unlock()
			return status.Error(codes.InvalidArgument, "a gap")
		}
		d.mu.Unlock()
		if lost || unsaid {
			return gone
		}
		if err := st.Send(&leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Receipt{Receipt: &leadlinev1.Receipt{Sequence: n, Durable: d.durable}}}); err != nil {
			return err
		}
	}
}

func (d *depot) set(f func()) {
	d.mu.Lock()
	defer d.mu.Unlock()
	f()
}

// numbers are those of all measurements of all drives, if their batches came in order.
func (d *depot) numbers(names ...string) (out []uint64) {
	d.mu.Lock()
	defer d.mu.Unlock()
	for _, n := range names {
		for _, b := range d.drives[n] {
			out = append(out, b...)
		}
	}
	return out
}

// open serves a depot until the test ends.
func (d *depot) open(t *testing.T, seed uint64) *grpc.ClientConn {
	t.Helper()
	d.rng, d.drives = rand.New(rand.NewPCG(seed, 7)), map[string][][]uint64{}
	before := goleak.IgnoreCurrent()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	s := grpc.NewServer()
	leadlinev1.RegisterPositionServiceServer(s, d)
	served := make(chan error, 1)
	go func() { served <- s.Serve(l) }()
	conn, err := client.Dial(l.Addr().String())
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		conn.Close()
		s.Stop()
		if err := <-served; err != nil {
			t.Error(err)
		}
		goleak.VerifyNone(t, before)
	})
	return conn
}

func limited(t *testing.T) context.Context {
	ctx, cancel := context.WithTimeout(context.Background(), 60*time.Second)
	t.Cleanup(cancel)
	return ctx
}

func options() Options {
	return Options{Drive: client.Drive{Header: &leadlinev1.DriveHeader{Vehicle: "van", Map: "town"}, Name: "day", Batch: 5, Window: 3}, MaxWait: 3 * time.Millisecond}
}

func measurement(n uint64) *leadlinev1.SensorMeasurement {
	return &leadlinev1.SensorMeasurement{Sensor: "odo", Number: n}
}

func begin(t *testing.T, path string, o Options) *Outbox {
	t.Helper()
	b, err := Open(path, o)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

func add(t *testing.T, b *Outbox, from, to uint64) {
	t.Helper()
	for n := from; n < to; n++ {
		if err := b.Add(measurement(n)); err != nil {
			t.Fatal(err)
		}
	}
}

// inOrder wants 0, 1, 2, ... to n.
func inOrder(t *testing.T, what string, got []uint64, n uint64) {
	t.Helper()
	if uint64(len(got)) != n {
		t.Errorf("%s: %d measurements arrived of %d", what, len(got), n)
	}
	for i, x := range got {
		if x != uint64(i) {
			t.Fatalf("%s: measurement %d arrived as the %d. of %v", what, x, i, got)
		}
	}
}

// TestOnceEach has streams break before and after a batch is taken, the server go
// away and come back, and the program end and begin again, at random: every
// measurement arrives once, in its order.
func TestOnceEach(t *testing.T) {
	for seed := range uint64(12) {
		d := &depot{durable: seed%2 == 0, breaks: 0.05}
		conn := d.open(t, seed)
		path := filepath.Join(t.TempDir(), "van.outbox")
		rng := rand.New(rand.NewPCG(seed, 1))
		next := uint64(0)
		for life := range 6 {
			b := begin(t, path, options())
			started := life == 5 || rng.IntN(4) > 0 // once in a while nobody carries
			if started {
				b.Start(limited(t), conn)
			}
			for range 1 + rng.IntN(4) {
				to := next + uint64(rng.IntN(40))
				add(t, b, next, to)
				next = to
				away := rng.IntN(4) == 0
				d.set(func() { d.away = away })
				time.Sleep(time.Duration(rng.IntN(8)) * time.Millisecond)
			}
			if life == 5 {
				d.set(func() { d.away = false })
				if closed, err := b.Close(limited(t)); err != nil || closed.GetAccepted() != 1 {
					t.Fatalf("seed %d: closed %v: %v", seed, closed, err)
				}
				break
			}
			if err := b.Abort(); err != nil {
				t.Fatal(err)
			}
		}
		inOrder(t, fmt.Sprint("seed ", seed), d.numbers("day"), next)
		if _, err := os.Stat(path); !errors.Is(err, os.ErrNotExist) {
			t.Errorf("seed %d: the drive has ended and its file is there: %v", seed, err)
		}
	}
}

// TestAway adds while there is no server: nothing waits for it, the file says how much
// it holds, and Leave ends in time and keeps it.
func TestAway(t *testing.T) {
	d := &depot{away: true}
	conn := d.open(t, 1)
	path := filepath.Join(t.TempDir(), "van.outbox")
	lost := make(chan error, 100)
	o := options()
	o.Drive.OnLost = func(err error) { lost <- err }
	b := begin(t, path, o)
	b.Start(limited(t), conn)
	add(t, b, 0, 500)
	if err := <-lost; !strings.Contains(err.Error(), "the depot is closed") {
		t.Errorf("lost: %v", err)
	}
	if err := b.Flush(); err != nil || b.Waiting() != 500 {
		t.Errorf("%d wait: %v", b.Waiting(), err)
	}
	short, cancel := context.WithTimeout(context.Background(), 20*time.Millisecond)
	defer cancel()
	if err := b.Leave(short); !errors.Is(err, context.Canceled) {
		t.Errorf("left: %v", err)
	}
	if err := b.Add(measurement(500)); err == nil || !strings.Contains(err.Error(), "closed") {
		t.Errorf("added to a closed one: %v", err)
	}
	o.Drive.OnLost = nil
	b = begin(t, path, o)
	if b.Waiting() != 500 || b.Name() != "day" {
		t.Errorf("%d wait of %q", b.Waiting(), b.Name())
	}
	d.set(func() { d.away = false })
	b.Start(limited(t), conn)
	add(t, b, 500, 510)
	if err := b.Leave(limited(t)); err != nil {
		t.Fatal(err)
	}
	inOrder(t, "left", d.numbers("day"), 510)
	b = begin(t, path, o)
	if b.Waiting() != 0 {
		t.Errorf("%d wait, and the server has them all", b.Waiting())
	}
	b.Start(limited(t), conn)
	add(t, b, 510, 512)
	if _, err := b.Close(limited(t)); err != nil {
		t.Fatal(err)
	}
	inOrder(t, "closed", d.numbers("day"), 512)
}

// TestForgotten: a server without a journal that was restarted has nothing of the
// drive; what is held goes on as another drive, and is told. Where receipts were
// durable, the server says itself that it lost something; see Drive.Acknowledged.
func TestForgotten(t *testing.T) {
	d := &depot{}
	conn := d.open(t, 1)
	o := options()
	names := make(chan string, 1)
	o.OnForgotten = func(name string) { names <- name }
	path := filepath.Join(t.TempDir(), "van.outbox")
	b := begin(t, path, o)
	b.Start(limited(t), conn)
	add(t, b, 0, 20)
	if err := b.Leave(limited(t)); err != nil {
		t.Fatal(err)
	}
	inOrder(t, "before", d.numbers("day"), 20)
	d.set(func() { clear(d.drives) })
	b = begin(t, path, o)
	b.Start(limited(t), conn)
	add(t, b, 20, 33)
	name := <-names
	if err := b.Leave(limited(t)); err != nil {
		t.Fatal(err)
	}
	b = begin(t, path, o) // asks for "day", and goes on
	if b.Name() != name || name == "day" {
		t.Errorf("it is drive %q, was told %q", b.Name(), name)
	}
	b.Start(limited(t), conn)
	add(t, b, 33, 40)
	if _, err := b.Close(limited(t)); err != nil {
		t.Fatal(err)
	}
	got := d.numbers(name)
	for i := range got {
		got[i] -= 20
	}
	inOrder(t, "after", got, 20)
}

// TestFull: a file that holds as much as it may takes no more, keeps what it has, and
// takes some again once the server had them.
func TestFull(t *testing.T) {
	d := &depot{}
	conn := d.open(t, 1)
	o := options()
	o.MaxBytes = 2000
	b := begin(t, filepath.Join(t.TempDir(), "van.outbox"), o)
	n := uint64(0)
	for ; n < 1000; n++ {
		if err := b.Add(measurement(n)); errors.Is(err, ErrFull) {
			break
		} else if err != nil {
			t.Fatal(err)
		}
	}
	if n < 100 || n > 300 {
		t.Errorf("2000 bytes hold %d measurements of some 9 bytes", n)
	}
	b.Start(limited(t), conn)
	for err := ErrFull; err != nil; time.Sleep(time.Millisecond) {
		if err = b.Add(measurement(n)); err != nil && !errors.Is(err, ErrFull) {
			t.Fatal(err)
		}
	}
	if _, err := b.Close(limited(t)); err != nil {
		t.Fatal(err)
	}
	inOrder(t, "full", d.numbers("day"), n+1)
}

// TestWrongFile: each file that cannot be gone on with is one error that says why, and
// is left as it is.
func TestWrongFile(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "van.outbox")
	b := begin(t, path, options())
	add(t, b, 0, 3)
	if _, err := Open(path, options()); err == nil || !strings.Contains(err.Error(), "in use by another program") {
		t.Errorf("open twice: %v", err)
	}
	if _, err := b.Close(limited(t)); err == nil || !strings.Contains(err.Error(), "not started") {
		t.Errorf("closed without a start: %v", err)
	}
	text := filepath.Join(dir, "text")
	if err := os.WriteFile(text, []byte(strings.Repeat("a text\n", 1000)), 0o600); err != nil {
		t.Fatal(err)
	}
	empty := filepath.Join(dir, "empty")
	if err := os.WriteFile(empty, nil, 0o600); err != nil {
		t.Fatal(err)
	}
	for what, c := range map[string]struct {
		path   string
		change func(*Options)
		want   string
	}{
		"another drive":   {path, func(o *Options) { o.Drive.Name = "night" }, `of drive "day", not "night"`},
		"another vehicle": {path, func(o *Options) { o.Drive.Header = &leadlinev1.DriveHeader{Vehicle: "bus"} }, `vehicle "van", map "town"`},
		"no outbox":       {text, func(*Options) {}, "is no outbox"},
		"no folder":       {filepath.Join(dir, "none", "x"), func(*Options) {}, "no such file"},
		"no header":       {filepath.Join(dir, "new"), func(o *Options) { o.Drive.Header = nil }, "no such file"},
		"nothing":         {empty, func(o *Options) { o.Drive.Header = nil }, "there is nothing in"},
		"a bound":         {path, func(o *Options) { o.MaxBytes = -1 }, "must be positive"},
	} {
		o := options()
		c.change(&o)
		if b, err := Open(c.path, o); err == nil || !strings.Contains(err.Error(), c.want) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%s: %v, %v", what, b, err)
		}
	}
	o := options()
	o.Drive.Header, o.Drive.Name = nil, ""
	b = begin(t, path, o)
	if b.Waiting() != 3 || b.Name() != "day" {
		t.Errorf("%d of %q", b.Waiting(), b.Name())
	}
	if err := b.Abort(); err != nil {
		t.Error(err)
	}
}

// TestOldFile opens a committed file of layout 1, with 7 measurements of which a server
// had 3 in one batch. Another layout gets a file of its own beside it.
// LEADLINE_REWRITE=old writes it anew.
func TestOldFile(t *testing.T) {
	const old = "testdata/layout1.outbox"
	o := options()
	o.Drive.Batch = 3
	if os.Getenv("LEADLINE_REWRITE") == "old" {
		_ = os.Remove(old)
		b := begin(t, old, o)
		add(t, b, 0, 7)
		if err := errors.Join(b.Flush(), b.file.Acknowledged(1, 1), b.Abort()); err != nil {
			t.Fatal(err)
		}
	}
	content, err := os.ReadFile(old)
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "copy")
	if err := os.WriteFile(path, content, 0o600); err != nil {
		t.Fatal(err)
	}
	b := begin(t, path, o)
	if b.Waiting() != 4 || b.Name() != "day" || b.file.durable() != 1 {
		t.Errorf("%d wait of drive %q, %d durable", b.Waiting(), b.Name(), b.file.durable())
	}
	d := &depot{}
	conn := d.open(t, 1)
	d.drives["day"] = [][]uint64{{0, 1, 2}}
	b.Start(limited(t), conn)
	if _, err := b.Close(limited(t)); err != nil {
		t.Fatal(err)
	}
	inOrder(t, old, d.numbers("day"), 7)
}
