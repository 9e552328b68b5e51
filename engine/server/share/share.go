package share

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"log/slog"
	"slices"
	"strconv"
	"strings"
	"sync"
	"time"

	"github.com/nats-io/nats.go/jetstream"
)

// bucket holds the keys.
const bucket = "LEADLINE_SHARE"

const (
	serverPrefix    = "server."
	partitionPrefix = "partition."
)

// Options say how a server shares in a journal.
type Options struct {
	// JetStream is the broker, Replicas how many of its servers keep the keys.
	JetStream jetstream.JetStream
	Replicas  int
	// Self is this server: its ID must be one that no other has had.
	Self Server
	// Partitions is how many the journal has.
	Partitions int
	// Lease is for how long a server that is not heard of keeps what it has.
	// Default 5 s.
	Lease time.Duration
	// Take begins to serve a partition, Give ends that in order, and Drop at once:
	// another server has it. They are called one at a time.
	Take func(ctx context.Context, partition int) error
	Give func(ctx context.Context, partition int)
	Drop func(partition int)
	// Log takes what the operator should know.
	Log *slog.Logger
}

// Share is one server's part. Its methods may be called from any goroutine.
type Share struct {
	o     Options
	kv    Keys
	now   func() time.Time
	ended context.Context
	end   context.CancelFunc
	tasks sync.WaitGroup
	poke  chan struct{} // holds a token when there may be something to do
	// resting is closed when nothing more is to be done with partitions, rested once
	// nothing is.
	resting, rested chan struct{}
	rest            sync.Once

	mu      sync.Mutex
	core    *core
	own     uint64        // revision of this server's key
	before  uint64        // that it had before the last renewal
	heard   uint64        // the highest that a watch has brought
	changed chan struct{} // closed when a partition changes hands
}

// beats is how often in a lease a server renews it.
const beats = 5

// giveTimeout bounds how long a partition that goes to another server is waited
// for.
const giveTimeout = 10 * time.Second

// Join begins to share.
func Join(ctx context.Context, o Options) (*Share, error) {
	if o.Lease == 0 {
		o.Lease = 5 * time.Second
	}
	kv, err := openKeys(ctx, o.JetStream, o.Replicas)
	if err != nil {
		return nil, err
	}
	s := newShare(o, atBroker{kv}, time.Now)
	if err := s.renew(ctx); err != nil {
		s.end()
		return nil, fmt.Errorf("share: joining: %w", err)
	}
	seen, err := kv.WatchAll(s.ended)
	if err != nil {
		s.end()
		return nil, fmt.Errorf("share: watching the broker's bucket %s: %w", bucket, err)
	}
	known := make(chan struct{})
	s.tasks.Go(func() { s.watch(seen, known) })
	select {
	case <-known:
	case <-ctx.Done():
		s.stop()
		return nil, fmt.Errorf("share: reading the broker's bucket %s: %w", bucket, ctx.Err())
	}
	s.tasks.Go(s.beat)
	s.tasks.Go(s.work)
	return s, nil
}

func newShare(o Options, k Keys, now func() time.Time) *Share {
	s := &Share{o: o, kv: k, now: now, poke: make(chan struct{}, 1), resting: make(chan struct{}), rested: make(chan struct{}), core: newCore(o.Self, o.Partitions, o.Lease), changed: make(chan struct{})}
	s.ended, s.end = context.WithCancel(context.Background())
	return s
}

// openKeys opens the bucket, or makes it.
func openKeys(ctx context.Context, js jetstream.JetStream, replicas int) (jetstream.KeyValue, error) {
	kv, err := js.KeyValue(ctx, bucket)
	if errors.Is(err, jetstream.ErrBucketNotFound) {
		kv, err = js.CreateKeyValue(ctx, jetstream.KeyValueConfig{
			Bucket: bucket, Description: "which Leadline server has which partition", History: 1, Storage: jetstream.FileStorage, Replicas: max(replicas, 1),
		})
		if errors.Is(err, jetstream.ErrBucketExists) { // another one was faster
			kv, err = js.KeyValue(ctx, bucket)
		}
	}
	if err != nil {
		return nil, fmt.Errorf("share: opening the broker's bucket %s: %w", bucket, err)
	}
	return kv, nil
}

func (s *Share) stop() {
	s.end()
	s.tasks.Wait()
}

// watch keeps up with the keys; known is closed once all that were there are known.
func (s *Share) watch(w jetstream.KeyWatcher, known chan struct{}) {
	defer func() { _ = w.Stop() }()
	for {
		select {
		case <-s.ended.Done():
			return
		case e, open := <-w.Updates():
			switch {
			case !open:
				return
			case e == nil:
				close(known)
			default:
				s.told(entry(e))
			}
		}
	}
}

// told takes what the watch brings.
func (s *Share) told(e Entry) {
	s.mu.Lock()
	s.heard = max(s.heard, e.Revision)
	s.mu.Unlock()
	s.saw(e)
}

// saw takes in a key.
func (s *Share) saw(e Entry) {
	now, gone := s.now(), e.Gone
	s.mu.Lock()
	defer s.mu.Unlock()
	if id, ok := strings.CutPrefix(e.Key, serverPrefix); ok {
		var of Server
		if !gone && json.Unmarshal(e.Value, &of) != nil {
			s.o.Log.Error("a server's key cannot be read", "key", e.Key)
			return
		}
		if was := s.core.servers[id]; !gone && was == nil && id != s.o.Self.ID {
			s.o.Log.Info("another server shares the journal", "server", id, "address", of.Address, "version", of.Version)
		}
		s.core.sawServer(id, of, e.Revision, gone, now)
		return
	}
	number, ok := strings.CutPrefix(e.Key, partitionPrefix)
	i, err := strconv.Atoi(number)
	if !ok || err != nil || i < 0 || i >= s.o.Partitions {
		return // of another version
	}
	owner := string(e.Value)
	if gone {
		owner = ""
	}
	s.partition(i, owner, e.Revision, now)
}

// partition notes a partition's key; mu is held.
func (s *Share) partition(i int, owner string, revision uint64, now time.Time) {
	was := s.core.parts[i].owner
	s.core.sawPartition(i, owner, revision, now)
	if s.core.parts[i].owner != was {
		s.news()
		s.wake()
	}
}

// news tells those who wait that something has changed; mu is held.
func (s *Share) news() {
	close(s.changed)
	s.changed = make(chan struct{})
}

func (s *Share) wake() {
	select {
	case s.poke <- struct{}{}:
	default:
	}
}

// beat renews this server's key.
func (s *Share) beat() {
	every := s.o.Lease / beats
	next := time.NewTimer(every)
	defer next.Stop()
	for failed := false; ; {
		select {
		case <-s.ended.Done():
			return
		case <-next.C:
		}
		began := time.Now()
		ctx, cancel := context.WithTimeout(s.ended, s.o.Lease*3/10) // there is time for two
		err := s.renew(ctx)
		cancel()
		if err == nil {
			ctx, cancel = context.WithTimeout(s.ended, every)
			s.catchUp(ctx)
			cancel()
			next.Reset(max(every-time.Since(began), 0))
		} else {
			if !failed && s.ended.Err() == nil {
				s.o.Log.Warn("this server's lease cannot be renewed", "error", err)
			}
			next.Reset(every / 5)
		}
		failed = err != nil
		s.wake()
	}
}

// catchUp reads the keys, if the watch has not brought what this server wrote before
// its last renewal: the broker that it was at may be gone, and it takes a while until
// that shows.
func (s *Share) catchUp(ctx context.Context) {
	s.mu.Lock()
	behind := s.heard < s.before
	keys := make([]string, 0, len(s.core.servers)+len(s.core.parts))
	for id := range s.core.servers {
		keys = append(keys, serverPrefix+id)
	}
	s.mu.Unlock()
	if !behind {
		return
	}
	slices.Sort(keys)
	for i := range s.o.Partitions {
		keys = append(keys, partitionPrefix+strconv.Itoa(i))
	}
	for _, key := range keys {
		if s.learn(ctx, key) != nil {
			return // the next renewal does it again
		}
	}
}

// renew writes this server's key.
func (s *Share) renew(ctx context.Context) error {
	s.mu.Lock()
	s.core.self.Beat++
	self, key, revision := s.core.self, serverPrefix+s.o.Self.ID, s.own
	s.mu.Unlock()
	value, err := json.Marshal(self)
	if err != nil {
		panic("share: " + err.Error()) // there is nothing in it that has no JSON
	}
	sent := s.now()
	next, err := s.kv.Update(ctx, key, value, revision)
	if wrongRevision(err) { // it was swept, or an earlier renewal came through after all
		var e Entry
		if e, err = s.kv.Get(ctx, key); errors.Is(err, jetstream.ErrKeyNotFound) {
			next, err = s.kv.Create(ctx, key, value)
		} else if err == nil {
			next, err = s.kv.Update(ctx, key, value, e.Revision)
		}
	}
	if err != nil {
		return err
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	wasFresh := s.core.fresh(sent)
	s.before, s.own = s.own, next
	s.core.renew(sent, s.now())
	if !wasFresh {
		s.news()
	}
	return nil
}

func wrongRevision(err error) bool {
	var api *jetstream.APIError
	return errors.As(err, &api) && api.ErrorCode == jetstream.JSErrCodeStreamWrongLastSequence
}
