package afar

import (
	"context"
	"crypto/rand"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"sync"
	"time"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"

	"leadline/engine/journal"
	"leadline/engine/study/sweep"
)

// QueueOptions say whom a sweep's runs go to.
type QueueOptions struct {
	Broker  journal.Broker
	Program Program
	// LostAfter is after how long without a sign of life a worker's run is given to
	// another one. Default 30 s.
	LostAfter time.Duration
	// Say is told a line now and then: which worker joins or is refused, and that
	// none is there.
	Say func(line string)
}

// Queue has a sweep's runs done by workers. It is a sweep.Elsewhere; its methods may
// be called from any goroutine.
type Queue struct {
	o   QueueOptions
	b   *broker
	job Job

	end   context.CancelFunc
	tasks sync.WaitGroup

	mu      sync.Mutex
	waiting map[int]*waiting
	asked   int
	workers map[string]bool // and whether they take part

	stored sync.Mutex // one file is stored at a time
	have   map[string]bool
}

// waiting is a run that was asked for.
type waiting struct {
	result       chan result
	read         func(bytes int64, measurements int) // called with mu held
	bytes        int64
	measurements int
}

// Open announces a job. Close ends it.
func Open(ctx context.Context, o QueueOptions) (*Queue, error) {
	if o.LostAfter == 0 {
		o.LostAfter = 30 * time.Second
	}
	b, err := connect(ctx, o.Broker, "leadline replay")
	if err != nil {
		return nil, err
	}
	q := &Queue{
		o: o, b: b, job: Job{ID: rand.Text(), Asks: o.Program, LostAfter: o.LostAfter},
		waiting: map[int]*waiting{}, workers: map[string]bool{}, have: map[string]bool{},
	}
	ctx2, end := context.WithCancel(context.Background())
	q.end = end
	if err := q.open(ctx, ctx2); err != nil {
		q.Close()
		return nil, fmt.Errorf("announcing the job at the broker: %w", err)
	}
	return q, nil
}

func (q *Queue) open(ctx, until context.Context) error {
	consumer := func(name, subject string, wait time.Duration) (jetstream.Consumer, error) {
		return q.b.runs.CreateConsumer(ctx, jetstream.ConsumerConfig{
			Durable: name + q.job.ID, FilterSubject: subject + q.job.ID, AckPolicy: jetstream.AckExplicitPolicy,
			AckWait: wait, MaxAckPending: -1, InactiveThreshold: keep,
		})
	}
	if _, err := consumer("asked-", asked, q.o.LostAfter); err != nil {
		return err
	}
	results, err := consumer("done-", done, 10*time.Second)
	if err != nil {
		return err
	}
	if _, err := q.b.conn.Subscribe(told+q.job.ID, q.hear); err != nil {
		return err
	}
	taking, err := results.Consume(q.take)
	if err != nil {
		return err
	}
	q.tasks.Go(func() {
		<-until.Done()
		taking.Stop()
		<-taking.Closed()
	})
	if err := q.announce(ctx); err != nil {
		return err
	}
	q.tasks.Go(func() { q.beat(until) })
	return nil
}

func (q *Queue) announce(ctx context.Context) error {
	text, err := json.Marshal(q.job)
	if err != nil {
		return err
	}
	_, err = q.b.jobs.Put(ctx, q.job.ID, text)
	return err
}

// beat keeps the job under way, and says if nobody comes.
func (q *Queue) beat(until context.Context) {
	tick := time.NewTicker(beat)
	defer tick.Stop()
	for {
		select {
		case <-until.Done():
			return
		case <-tick.C:
		}
		_ = q.announce(until) // a broker that is away for a while comes back
		q.mu.Lock()
		alone := true
		for _, in := range q.workers {
			alone = alone && !in
		}
		q.mu.Unlock()
		if alone && q.o.Say != nil {
			q.o.Say("no worker takes part yet: start `leadline work` with the same broker")
		}
	}
}

// hear takes what workers tell in between.
func (q *Queue) hear(m *nats.Msg) {
	var w word
	if json.Unmarshal(m.Data, &w) != nil || w.Worker == "" {
		return
	}
	q.mu.Lock()
	in, known := q.workers[w.Worker]
	q.workers[w.Worker] = w.Refused == ""
	x := q.waiting[w.Number]
	var bytes int64
	var measurements int
	if x != nil { // a run that began anew is told of from the start again
		bytes, measurements = max(0, w.Bytes-x.bytes), max(0, w.Measurements-x.measurements)
		x.bytes, x.measurements = x.bytes+bytes, x.measurements+measurements
	}
	if bytes+int64(measurements) > 0 {
		x.read(bytes, measurements)
	}
	q.mu.Unlock()
	switch {
	case q.o.Say == nil || known && in == (w.Refused == ""):
	case w.Refused != "":
		q.o.Say(fmt.Sprintf("the worker %s is refused: %s", w.Worker, w.Refused))
	default:
		q.o.Say("the worker " + w.Worker + " takes part")
	}
}

// take takes a run that is done. One that is done twice is dropped the second time.
func (q *Queue) take(m jetstream.Msg) {
	var r result
	if err := json.Unmarshal(m.Data(), &r); err != nil {
		_ = m.Term()
		return
	}
	q.mu.Lock()
	x := q.waiting[r.Number]
	delete(q.waiting, r.Number)
	q.mu.Unlock()
	if x == nil {
		_ = q.b.files.Remove(context.Background(), r.Files)
	} else {
		x.result <- r
	}
	_ = m.Ack()
}

// Run implements sweep.Elsewhere.
func (q *Queue) Run(ctx context.Context, t *sweep.Task, drive, chart, dir string, read func(bytes int64, measurements int)) (sweep.Answer, error) {
	r := run{Task: *t, Map: t.Run.MapFingerprint, Drive: t.Run.DriveSHA256}
	if err := q.store(ctx, r.Map, chart, r.Drive, drive); err != nil {
		return sweep.Answer{}, err
	}
	x := &waiting{result: make(chan result, 1), read: read}
	q.mu.Lock()
	q.asked++
	r.Number = q.asked
	q.waiting[r.Number] = x
	q.mu.Unlock()
	defer func() {
		q.mu.Lock()
		delete(q.waiting, r.Number)
		q.mu.Unlock()
	}()
	if err := publish(ctx, q.b.js, asked+q.job.ID, fmt.Sprintf("%s.%d", q.job.ID, r.Number), r); err != nil {
		return sweep.Answer{}, fmt.Errorf("asking for the run: %w", err)
	}
	select {
	case <-ctx.Done():
		return sweep.Answer{}, ctx.Err()
	case done := <-x.result:
		if done.Files == "" {
			return done.Answer, nil
		}
		if err := q.fetch(ctx, done.Files, dir); err != nil {
			return sweep.Answer{}, err
		}
		return done.Answer, nil
	}
}

// store puts a run's files where workers find them.
func (q *Queue) store(ctx context.Context, chartSum, chart, driveSum, drive string) error {
	q.stored.Lock()
	defer q.stored.Unlock()
	if !q.have["map "+chartSum] {
		if err := q.b.maps.Keep(ctx, chartSum, chart); err != nil {
			return err
		}
		q.have["map "+chartSum] = true
	}
	if !q.have[driveSum] {
		if err := q.b.files.Keep(ctx, driveSum, drive); err != nil {
			return err
		}
		q.have[driveSum] = true
	}
	return nil
}

// fetch brings a run's folder.
func (q *Queue) fetch(ctx context.Context, name, dir string) error {
	tmp, err := os.MkdirTemp("", "leadline-fetched-")
	if err != nil {
		return err
	}
	defer os.RemoveAll(tmp)
	path, err := q.b.files.Fetch(ctx, name, tmp)
	if err != nil {
		return err
	}
	if err := unpack(path, dir); err != nil {
		return fmt.Errorf("%s: %w", filepath.Base(path), err)
	}
	return q.b.files.Remove(ctx, name)
}

// Close ends the job: what waits is not done any more.
func (q *Queue) Close() {
	q.end()
	q.tasks.Wait()
	ctx, cancel := context.WithTimeout(context.Background(), 5*time.Second)
	defer cancel()
	// What fails here the broker does itself after a while.
	_ = q.b.jobs.Delete(ctx, q.job.ID)
	_ = q.b.runs.DeleteConsumer(ctx, "asked-"+q.job.ID)
	_ = q.b.runs.DeleteConsumer(ctx, "done-"+q.job.ID)
	_ = q.b.runs.Purge(ctx, jetstream.WithPurgeSubject(asked+q.job.ID))
	_ = q.b.runs.Purge(ctx, jetstream.WithPurgeSubject(done+q.job.ID))
	q.b.conn.Close()
}

// publish puts a message into the stream, however long the broker is away. Of one
// name the stream takes one.
func publish(ctx context.Context, js jetstream.JetStream, subject, name string, v any) error {
	text, err := json.Marshal(v)
	if err != nil {
		return err
	}
	for {
		_, err := js.Publish(ctx, subject, text, jetstream.WithMsgID(name))
		switch {
		case err == nil:
			return nil
		case ctx.Err() != nil:
			return ctx.Err()
		case errors.Is(err, nats.ErrMaxPayload) || errors.Is(err, nats.ErrConnectionClosed):
			return err
		}
		select {
		case <-ctx.Done():
			return ctx.Err()
		case <-time.After(time.Second):
		}
	}
}
