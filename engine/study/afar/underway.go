package afar

import (
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"sync"
	"time"

	"github.com/nats-io/nats.go/jetstream"

	"leadline/engine/study/sweep"
)

// mostDeaths is how many workers may die over a run before it is given up.
const mostDeaths = 5

// next waits a moment for a run; nil if there is none.
func (w *worker) next(j *joined) jetstream.Msg {
	ms, err := j.asked.Fetch(1, jetstream.FetchMaxWait(time.Second))
	if err == nil {
		for m := range ms.Messages() {
			return m
		}
		err = ms.Error()
	}
	if err != nil { // the broker is away, or the job ends
		select {
		case <-j.ctx.Done():
		case <-time.After(200 * time.Millisecond):
		}
	}
	return nil
}

// do does a run. An error is one for which the worker cannot take part; the run is
// given to another one then, and so it is where the worker ends.
func (w *worker) do(j *joined, m jetstream.Msg) error {
	var r run
	if err := json.Unmarshal(m.Data(), &r); err != nil {
		_ = m.Term()
		w.o.Say("a run that cannot be read was dropped: " + err.Error())
		return nil
	}
	ctx, cancel := context.WithCancel(j.ctx)
	u := &underWay{w: w, j: j, number: r.Number}
	var signs sync.WaitGroup
	signs.Go(func() { u.live(ctx, m) })
	answer, folder, err := w.answer(ctx, j, m, &r, u)
	stopped := ctx.Err() != nil
	if folder != "" {
		defer os.RemoveAll(folder)
	}
	if err == nil && !stopped {
		err = w.hand(ctx, j, &r, m, answer, folder)
		stopped = ctx.Err() != nil
	}
	cancel()
	signs.Wait()
	switch {
	case stopped: // the job's end needs nothing; the worker's end lets another one have it
		_ = m.Nak()
		_ = w.b.conn.Flush()
		return nil
	case err != nil:
		_ = m.Nak()
		return err
	}
	_ = m.Ack() // if it is lost, the run is done twice
	return nil
}

// answer runs a task; folder is where its own folder is, if there is one.
func (w *worker) answer(ctx context.Context, j *joined, m jetstream.Msg, r *run, u *underWay) (a sweep.Answer, folder string, err error) {
	if meta, err := m.Metadata(); err == nil && meta.NumDelivered > mostDeaths {
		return sweep.Answer{Err: fmt.Sprintf("%s: %d workers died over it: run it by itself", r.Task.Run.DriveFile, mostDeaths)}, "", nil
	}
	chart, err := j.files.chart(ctx, r.Map)
	if err != nil {
		return a, "", err
	}
	drive, err := j.files.drive(ctx, r.Drive)
	if err != nil {
		return a, "", err
	}
	dir, err := os.MkdirTemp(w.dir, "run-")
	if err != nil {
		return a, "", err
	}
	_, a, err = r.Task.Do(ctx, w.o.Program.Version, w.o.Program.SHA256, drive, chart, dir, u)
	return a, dir, err
}

// hand stores a run's folder at the broker and says that it is done.
func (w *worker) hand(ctx context.Context, j *joined, r *run, m jetstream.Msg, a sweep.Answer, dir string) error {
	out := result{Number: r.Number, Answer: a}
	if a.Whole {
		from := dir
		if r.Task.Files {
			from = filepath.Join(dir, r.Task.Run.Setting, r.Task.Run.Drive)
		}
		packed := filepath.Join(dir, "run.tar.zst")
		if err := pack(from, packed); err != nil {
			return err
		}
		out.Files = fmt.Sprintf("%s.%d.%d.%s", j.ID, r.Number, attempt(m), w.o.Name)
		if err := w.b.files.Keep(ctx, out.Files, packed); err != nil {
			return err
		}
	}
	return publish(ctx, w.b.js, done+j.ID, fmt.Sprintf("%s.%d.%d", j.ID, r.Number, attempt(m)), out)
}

// attempt counts how often a run was given to somebody.
func attempt(m jetstream.Msg) uint64 {
	if meta, err := m.Metadata(); err == nil {
		return meta.NumDelivered
	}
	return 0
}

// underWay is a run that is being done. It is a sweep.Meter.
type underWay struct {
	w      *worker
	j      *joined
	number int

	mu           sync.Mutex
	bytes        int64
	measurements int
}

// Begin implements sweep.Meter.
func (u *underWay) Begin(int64, int) {}

// Done implements sweep.Meter.
func (u *underWay) Done(int64) {}

// Read implements sweep.Meter.
func (u *underWay) Read(bytes int64, measurements int) {
	u.mu.Lock()
	u.bytes, u.measurements = u.bytes+bytes, u.measurements+measurements
	u.mu.Unlock()
}

// live gives signs of life, and tells how far the run is.
func (u *underWay) live(ctx context.Context, m jetstream.Msg) {
	every := min(u.j.LostAfter/5, 500*time.Millisecond)
	tick := time.NewTicker(every)
	defer tick.Stop()
	last := time.Now()
	for {
		select {
		case <-ctx.Done():
			return
		case <-tick.C:
		}
		u.mu.Lock()
		x := word{Number: u.number, Bytes: u.bytes, Measurements: u.measurements}
		u.mu.Unlock()
		u.w.tell(u.j.ID, x)
		if now := time.Now(); now.Sub(last) >= u.j.LostAfter/5 {
			_ = m.InProgress()
			last = now
		}
	}
}
