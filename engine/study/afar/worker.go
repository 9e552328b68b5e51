package afar

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"runtime"
	"sync"
	"time"

	"github.com/nats-io/nats.go/jetstream"

	"leadline/engine/journal"
	"leadline/engine/study/sweep"
)

// WorkOptions say what a worker is.
type WorkOptions struct {
	Broker  journal.Broker
	Program Program
	// Name is what others know it by.
	Name string
	// OpenMap opens a compiled map.
	OpenMap func(path string) (*sweep.Map, io.Closer, error)
	// Parallel is how many runs it does at a time; 0 is as many as there are
	// processors.
	Parallel int
	// Say is told a line now and then.
	Say func(line string)
}

// worker takes runs of jobs.
type worker struct {
	o   WorkOptions
	b   *broker
	dir string // for what is fetched, and for runs under way

	mu      sync.Mutex
	jobs    map[string]*joined
	news    chan struct{} // closed when jobs have changed
	errs    chan error
	refused map[string]bool // jobs
}

// joined is a job that a worker takes part in.
type joined struct {
	Job
	ctx   context.Context // ends with the job
	end   context.CancelFunc
	asked jetstream.Consumer
	files *files
	seen  time.Time // when it was last announced; the watch's alone
	using sync.WaitGroup
}

// Work takes runs until ctx ends, which is no error: what is under way is then given
// to others at once. It is an error if there are jobs when it begins, all of another
// program, or if what it fetches is not what was asked for.
func Work(ctx context.Context, o WorkOptions) error {
	if o.Parallel < 1 {
		o.Parallel = runtime.GOMAXPROCS(0)
	}
	b, err := connect(ctx, o.Broker, "leadline work")
	if err != nil {
		return err
	}
	defer b.conn.Close()
	dir, err := os.MkdirTemp("", "leadline-work-")
	if err != nil {
		return err
	}
	defer os.RemoveAll(dir)
	w := &worker{o: o, b: b, dir: dir, jobs: map[string]*joined{}, news: make(chan struct{}), errs: make(chan error, 1), refused: map[string]bool{}}
	ctx, cancel := context.WithCancel(ctx)
	var tasks sync.WaitGroup
	defer func() {
		cancel()
		tasks.Wait()
		for _, j := range w.jobs {
			j.files.close()
		}
	}()
	seen, err := b.jobs.WatchAll(ctx)
	if err != nil {
		return fmt.Errorf("watching the broker's jobs: %w", err)
	}
	tasks.Go(func() { w.watch(ctx, seen) })
	for range o.Parallel {
		tasks.Go(func() { w.work(ctx) })
	}
	select {
	case <-ctx.Done():
		return nil
	case err := <-w.errs:
		return err
	}
}

// fail ends the worker.
func (w *worker) fail(err error) {
	select {
	case w.errs <- err:
	default: // it ends already
	}
}

// watch keeps up with the jobs.
func (w *worker) watch(ctx context.Context, seen jetstream.KeyWatcher) {
	defer func() { _ = seen.Stop() }()
	var refused error
	first := true
	tick := time.NewTicker(beat)
	defer tick.Stop()
	for {
		select {
		case <-ctx.Done():
			return
		case <-tick.C: // what the broker drops it does not tell
			for id, j := range w.jobs {
				if time.Since(j.seen) > jobTTL {
					w.leave(id)
				}
			}
		case e, ok := <-seen.Updates():
			switch {
			case !ok:
				if ctx.Err() == nil {
					w.fail(errors.New("the broker does not tell of jobs any more: start the worker again"))
				}
				return
			case e == nil: // all that there were
				if first && refused != nil && len(w.jobs) == 0 {
					w.fail(refused)
					return
				}
				if first && len(w.jobs) == 0 {
					w.o.Say("waiting for a replay --over this broker")
				}
				first = false
			case e.Operation() != jetstream.KeyValuePut:
				w.leave(e.Key())
			default:
				var j Job
				if json.Unmarshal(e.Value(), &j) != nil || j.ID != e.Key() || j.LostAfter <= 0 {
					continue
				}
				if err := w.join(ctx, j); err != nil {
					refused = err
					if !first {
						w.o.Say("refused: " + err.Error())
					}
				}
				if x := w.jobs[j.ID]; x != nil {
					x.seen = time.Now()
				}
			}
		}
	}
}

// join takes part in a job from now on, unless it does or may not.
func (w *worker) join(ctx context.Context, j Job) error {
	if w.jobs[j.ID] != nil || w.refused[j.ID] {
		return nil
	}
	if j.Asks != w.o.Program {
		w.refused[j.ID] = true
		err := fmt.Errorf("the job at the broker is of leadline %s, and this is %s, which may compute other bits: start the same program as the replay's", j.Asks, w.o.Program)
		w.tell(j.ID, word{Refused: err.Error()})
		return err
	}
	if err := w.enter(ctx, j); err != nil { // it ends just now, or is announced again
		w.o.Say("the job " + j.ID + " is passed over: " + err.Error())
	}
	return nil
}

// enter makes ready for a job's runs.
func (w *worker) enter(ctx context.Context, j Job) error {
	c, err := w.b.runs.Consumer(ctx, "asked-"+j.ID)
	if err != nil {
		return err
	}
	x := &joined{Job: j, asked: c, files: &files{b: w.b, open: w.o.OpenMap, maps: map[string]*openedMap{}, drives: map[string]*fetched{}}}
	if x.files.dir, err = os.MkdirTemp(w.dir, "job-"); err != nil {
		return err
	}
	x.ctx, x.end = context.WithCancel(ctx)
	w.tell(j.ID, word{})
	w.mu.Lock()
	w.jobs[j.ID] = x
	w.changed()
	w.mu.Unlock()
	w.o.Say("taking runs of the job " + j.ID)
	return nil
}

// leave ends what is under way of a job.
func (w *worker) leave(id string) {
	w.mu.Lock()
	x := w.jobs[id]
	delete(w.jobs, id)
	w.changed()
	w.mu.Unlock()
	if x != nil {
		x.end()
		x.using.Wait()
		x.files.close()
		w.o.Say("the job " + id + " has ended")
	}
}

// changed says that jobs came or went; mu is held.
func (w *worker) changed() {
	close(w.news)
	w.news = make(chan struct{})
}

// some are the jobs that there are, and what is closed when there are others.
func (w *worker) some() (js []*joined, news chan struct{}) {
	w.mu.Lock()
	defer w.mu.Unlock()
	for _, j := range w.jobs {
		js = append(js, j)
	}
	return js, w.news
}

// tell tells a job's queue a word.
func (w *worker) tell(job string, x word) {
	x.Worker = w.o.Name
	if text, err := json.Marshal(x); err == nil {
		_ = w.b.conn.Publish(told+job, text)
	}
}

// work takes one run after the other.
func (w *worker) work(ctx context.Context) {
	for ctx.Err() == nil {
		js, news := w.some()
		if len(js) == 0 {
			select {
			case <-ctx.Done():
			case <-news:
			}
			continue
		}
		for _, j := range js {
			m := w.next(j)
			if m == nil {
				continue
			}
			if !w.use(j) {
				_ = m.Nak()
				continue
			}
			err := w.do(j, m)
			j.using.Done()
			if err != nil {
				w.tell(j.ID, word{Refused: err.Error()})
				_ = w.b.conn.Flush()
				w.fail(err)
				return
			}
		}
	}
}

// use has a job's files stay until its using is done; false if it has ended.
func (w *worker) use(j *joined) bool {
	w.mu.Lock()
	defer w.mu.Unlock()
	if w.jobs[j.ID] != j {
		return false
	}
	j.using.Add(1)
	return true
}
