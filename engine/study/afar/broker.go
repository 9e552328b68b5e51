package afar

import (
	"context"
	"errors"
	"fmt"
	"time"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"

	"leadline/engine/journal"
	"leadline/engine/server/share"
	"leadline/engine/study/sweep"
)

// What there is at the broker: a stream of runs that wait and of those that are done,
// which job is under way, and files. Subjects end in the job.
const (
	stream  = "LEADLINE_RUNS"
	asked   = "leadline.runs.asked."
	done    = "leadline.runs.done."
	told    = "leadline.runs.told." // not kept
	jobs    = "LEADLINE_JOBS"
	storage = "LEADLINE_RUN_FILES"
)

// jobTTL is for how long a job is under way that says nothing more; it does each
// beat.
const (
	jobTTL = time.Minute
	beat   = jobTTL / 6
)

// keep is for how long the broker keeps runs and files at most, of jobs that did not
// come to take them away.
const keep = 7 * 24 * time.Hour

// Job is what workers know of one.
type Job struct {
	ID   string  `json:"id"`
	Asks Program `json:"asks"`
	// LostAfter is after how long without a sign of life a worker's run is given to
	// another one.
	LostAfter time.Duration `json:"lost_after_ns"`
}

// Program is what computes the same bits.
type Program struct {
	Version      string `json:"version"`
	SHA256       string `json:"sha256"`
	Architecture string `json:"architecture"`
}

// String names it in a line.
func (p Program) String() string {
	return fmt.Sprintf("%s for %s (SHA-256 %.12s)", p.Version, p.Architecture, p.SHA256)
}

// run is a message of a run that waits.
type run struct {
	Number int        `json:"number"`
	Task   sweep.Task `json:"task"`
	Map    string     `json:"map"` // its fingerprint
	Drive  string     `json:"drive"`
}

// result is a message of a run that is done. Files names its folder, packed.
type result struct {
	Number int          `json:"number"`
	Answer sweep.Answer `json:"answer"`
	Files  string       `json:"files,omitempty"`
}

// word is what a worker tells in between.
type word struct {
	Worker string `json:"worker"`
	// Refused says why the worker does not take part; "" says that it does.
	Refused string `json:"refused,omitempty"`
	// Of a run that is under way: what was read of it.
	Number       int   `json:"number,omitempty"`
	Bytes        int64 `json:"bytes,omitempty"`
	Measurements int   `json:"measurements,omitempty"`
}

// broker is a connection to one, with what there is opened or made.
type broker struct {
	conn  *nats.Conn
	js    jetstream.JetStream
	runs  jetstream.Stream
	jobs  jetstream.KeyValue
	maps  *share.Files
	files *share.Files
}

func connect(ctx context.Context, at journal.Broker, name string) (*broker, error) {
	conn, err := at.Dial(name)
	if err != nil {
		return nil, err
	}
	b := &broker{conn: conn}
	if err := b.open(ctx, max(at.Replicas, 1)); err != nil {
		conn.Close()
		return nil, fmt.Errorf("the broker's JetStream: %w", err)
	}
	return b, nil
}

func (b *broker) open(ctx context.Context, replicas int) (err error) {
	if b.js, err = jetstream.New(b.conn, jetstream.WithDefaultTimeout(10*time.Second)); err != nil {
		return err
	}
	b.runs, err = b.js.CreateStream(ctx, jetstream.StreamConfig{
		Name: stream, Subjects: []string{asked + "*", done + "*"}, Description: "runs of Leadline's sweeps",
		Retention: jetstream.WorkQueuePolicy, Storage: jetstream.FileStorage, MaxAge: keep, Replicas: replicas, Duplicates: time.Minute,
	})
	if errors.Is(err, jetstream.ErrStreamNameAlreadyInUse) { // with other replicas
		b.runs, err = b.js.Stream(ctx, stream)
	}
	if err != nil {
		return err
	}
	b.jobs, err = b.js.KeyValue(ctx, jobs)
	if errors.Is(err, jetstream.ErrBucketNotFound) {
		b.jobs, err = b.js.CreateKeyValue(ctx, jetstream.KeyValueConfig{
			Bucket: jobs, Description: "sweeps of Leadline that are under way", TTL: jobTTL, Storage: jetstream.FileStorage, Replicas: replicas,
		})
		if errors.Is(err, jetstream.ErrBucketExists) {
			b.jobs, err = b.js.KeyValue(ctx, jobs)
		}
	}
	if err != nil {
		return err
	}
	if b.maps, err = share.OpenMapFiles(ctx, b.js, replicas); err != nil {
		return err
	}
	b.files, err = share.OpenFiles(ctx, b.js, jetstream.ObjectStoreConfig{
		Bucket: storage, Description: "drives and results of Leadline's sweeps", TTL: keep, Replicas: replicas,
	})
	return err
}
