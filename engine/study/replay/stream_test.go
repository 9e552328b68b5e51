package replay

import (
	"bytes"
	"context"
	"errors"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"leadline/engine/drivefile"
	"leadline/engine/sensor"
	"leadline/engine/study/score"
	"leadline/engine/summary"
)

// file is a drive's file, truths last.
func file(t *testing.T, d *drivefile.Drive) []byte {
	t.Helper()
	var b bytes.Buffer
	w := drivefile.NewWriter(&b)
	if err := w.Write(&drivefile.Record{Header: &d.Header}); err != nil {
		t.Fatal(err)
	}
	for _, ev := range d.Events {
		if err := w.WriteEvent(ev); err != nil {
			t.Fatal(err)
		}
	}
	for _, tr := range d.Truths {
		if err := w.Write(&drivefile.Record{Time: tr.Time, Truth: &tr.Truth}); err != nil {
			t.Fatal(err)
		}
	}
	return b.Bytes()
}

const streamSuite = "vehicle:\n  hold_s: 0.3\n  late_window_s: 5\n"

// TestStreamIsRun: a streamed drive gives the posteriors of one that is held, in
// whatever order its lines are, and reads nothing of it twice.
func TestStreamIsRun(t *testing.T) {
	c := config(t, streamSuite)
	// What is read, since degrees have bits of their own.
	d, err := drivefile.ReadAll(bytes.NewReader(file(t, drive(6))), "f")
	if err != nil {
		t.Fatal(err)
	}
	want, err := Run(d, c, Options{})
	if err != nil {
		t.Fatal(err)
	}
	const seed = 4
	for _, shuffled := range []bool{false, true} {
		if shuffled {
			rand.New(rand.NewPCG(seed, 0)).Shuffle(len(d.Events), func(i, j int) { d.Events[i], d.Events[j] = d.Events[j], d.Events[i] })
		}
		text := file(t, d)
		bytesRead, measurements := int64(0), 0
		h, n, fixes := summary.NewHasher(), 0, map[uint64]bool{}
		got, err := Stream(context.Background(), bytes.NewReader(text), "f", c, StreamOptions{
			Final:    func(p *summary.Posterior) { h.Add(p); n++ },
			Progress: func(b int64, m int) { bytesRead, measurements = bytesRead+b, measurements+m },
			BeforeFix: func(ev sensor.Event, before *summary.Posterior) {
				if before.TimeNS != int64(ev.Time) {
					t.Errorf("a fix at %d with a posterior at %d", ev.Time, before.TimeNS)
				}
				fixes[ev.Number] = true
			},
		})
		if err != nil {
			t.Fatal(err)
		}
		if got.Hash != want.Hash || h.Sum() != want.Hash || n != len(want.Posteriors) || got.Timing.Posteriors != n {
			t.Errorf("seed %d, shuffled %v: hash %s of %d posteriors, want %s of %d", seed, shuffled, got.Hash, n, want.Hash, len(want.Posteriors))
		}
		if got.Start != want.Start || got.Accepted != want.Accepted || bytesRead != int64(len(text)) || measurements != len(d.Events) {
			t.Errorf("start %d, %d accepted, %d of %d bytes, %d measurements", got.Start, got.Accepted, bytesRead, len(text), measurements)
		}
		if len(fixes) < 29 { // the belief does not move to the first
			t.Errorf("%d of 30 fixes were held out", len(fixes))
		}
	}
}

// TestStreamTooFarOutOfOrder: what cannot be put in order as it comes is said, and
// not computed wrongly.
func TestStreamTooFarOutOfOrder(t *testing.T) {
	d := drive(1)
	d.Events = nil
	for i := range MaxWaiting + 2 {
		d.Events = append(d.Events, sensor.Event{Time: sensor.Time(i+10) * 1000, Sensor: "s", Number: uint64(i), Measurement: sensor.Standstill{}})
	}
	late := d.Events[0]
	late.Time = 5
	d.Events = append(d.Events, late)
	_, err := Stream(context.Background(), bytes.NewReader(file(t, d)), "f", config(t, ""), StreamOptions{Final: func(*summary.Posterior) {}})
	if !errors.Is(err, ErrDisordered) {
		t.Errorf("got %v", err)
	}
}

// TestStreamBreaksOff: a file that is cut off, and an interrupt, give what came
// before beside the error.
func TestStreamBreaksOff(t *testing.T) {
	c := config(t, streamSuite)
	d := drive(3)
	d.Truths = nil
	text := file(t, d)
	cut := text[:len(text)*2/3]
	n := 0
	r, err := Stream(context.Background(), bytes.NewReader(cut), "f", c, StreamOptions{Final: func(*summary.Posterior) { n++ }})
	if r == nil || err == nil || !strings.Contains(err.Error(), "is the file cut off?") || n == 0 || n >= 15 {
		t.Errorf("%d posteriors, %v", n, err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if _, err := Stream(ctx, bytes.NewReader(text), "f", c, StreamOptions{Final: func(*summary.Posterior) {}}); !errors.Is(err, context.Canceled) {
		t.Errorf("interrupted: %v", err)
	}
	stop := errors.New("stop")
	if r, err := Run(drive(12), c, Options{Stop: func() error { return stop }}); !errors.Is(err, stop) || r == nil || r.Timing.Measurements != 1 {
		t.Errorf("stopped: %v", err)
	}
}

// TestLook reads header and truths past measurements that it does not look at.
func TestLook(t *testing.T) {
	d := drive(3)
	text := file(t, d)
	g, err := Look(bytes.NewReader(text), "f")
	if err != nil || g.Header.Vehicle != "boat" || len(g.Truth) != len(d.Truths) || len(g.SHA256) != 64 || g.Close() != nil {
		t.Fatalf("%+v, %v", g, err)
	}
	bad, err := Look(bytes.NewReader(bytes.Replace(text, []byte(`"fix"`), []byte(`"fux"`), 1)), "f")
	if err != nil || len(bad.Truth) != len(d.Truths) || bad.SHA256 == g.SHA256 {
		t.Errorf("%+v, %v", bad, err)
	}
	if _, err := Look(strings.NewReader(""), "f"); err == nil || !strings.Contains(err.Error(), "no header") {
		t.Errorf("an empty file: %v", err)
	}
}

// TestManyTruths: those that go into a file come back as they came, by time, and those of
// one time as they were.
func TestManyTruths(t *testing.T) {
	const seed = 2
	rng := rand.New(rand.NewPCG(seed, 0))
	for _, n := range []int{0, 1, 7, 8, 9, 16, 100} {
		few, many := truths{most: 1000}, truths{most: 8}
		for i := range n {
			at := score.Truth{TimeNS: rng.Int64N(20), SigmaM: float64(i)}
			if err := errors.Join(few.add(at), many.add(at)); err != nil {
				t.Fatal(err)
			}
		}
		want, _, err := few.all()
		if err != nil {
			t.Fatal(err)
		}
		got, closer, err := many.all()
		if err != nil || !slices.Equal(got, want) {
			t.Errorf("seed %d: of %d: %v, want %v: %v", seed, n, got, want, err)
		}
		if err := closer.Close(); err != nil {
			t.Error(err)
		}
	}
}
