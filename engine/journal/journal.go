package journal

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"hash/fnv"
	"os"
	"path/filepath"
	"sync"
	"sync/atomic"
	"time"

	"github.com/nats-io/nats.go/jetstream"
)

// Why a record is not taken. What is refused is not in the journal.
var (
	// ErrFull says that there is no room, on the disk or within the bound; there
	// may be later.
	ErrFull = errors.New("the journal is full")
	// ErrDown says that the broker cannot be reached, fails, or is behind; it
	// may be back later.
	ErrDown = errors.New("the journal cannot be written")
	// ErrTaken says that another server writes this journal. It stays so.
	ErrTaken = errors.New("another server writes this journal")
	// ErrClosed says that the journal has been closed.
	ErrClosed = errors.New("the journal is closed")
)

// Journal is one that is open. Its methods may be called from any goroutine.
type Journal struct {
	o     Options
	lock  *os.File
	marks *marks
	// writer tells this journal's packs from those of others at the broker.
	writer string
	log    Log
	// rehearsed is the log where this is one; else nil.
	rehearsed Readable

	mu    sync.RWMutex
	parts []*partition // of a shared journal those that are not its own are nil

	broker atomic.Pointer[broker]
	reopen sync.Mutex // held while a broker within is started again

	bytes   atomic.Int64 // of the stream, about
	records atomic.Uint64
	commits atomic.Uint64
	refused atomic.Uint64
	room    room
	sweep   sync.Mutex // held while packs are let go or replaced

	ended context.Context // done when the journal is closed
	end   context.CancelFunc
	tasks sync.WaitGroup
}

// Open opens a journal, or makes one, reads all that it holds, and takes it
// over: whoever wrote it until then has ErrTaken. take is given each record, in
// the order of its line; it must not keep the data, and its error ends Open. Of a
// shared journal nothing is read or taken over: see Take.
func Open(ctx context.Context, o Options, take func(Record) error) (*Journal, *Found, error) {
	if err := o.Validate(); err != nil {
		return nil, nil, err
	}
	o = o.withDefaults()
	j := &Journal{o: o, writer: rand.Text()}
	j.log = atBroker{j}
	j.ended, j.end = context.WithCancel(context.Background())
	fail := func(err error) (*Journal, *Found, error) {
		j.end()
		if b := j.broker.Load(); b != nil {
			b.close()
		}
		j.unlock()
		return nil, nil, err
	}
	if o.Dir != "" {
		if err := os.MkdirAll(o.Dir, 0o700); err != nil {
			return fail(fmt.Errorf("journal: %w", err))
		}
		var err error
		if j.lock, err = lockDir(o.Dir); err != nil {
			return fail(fmt.Errorf("journal: %w", err))
		}
	}
	b, err := connect(&o)
	if err != nil {
		return fail(err)
	}
	j.broker.Store(b)
	// A broker that has just started may be reading its files still.
	starting, started := context.WithTimeout(ctx, startTimeout)
	defer started()
	st, info, err := b.streamSoon(starting, &o)
	if err != nil {
		return fail(err)
	}
	n, err := partitions(info)
	if err != nil {
		return fail(err)
	}
	if o.Dir != "" {
		if j.marks, err = openMarks(filepath.Join(o.Dir, "marks"), n); err != nil {
			return fail(fmt.Errorf("journal: %w", err))
		}
	}
	j.parts = make([]*partition, n)
	j.bytes.Store(int64(info.State.Bytes))
	found := new(Found)
	if !o.Shared {
		all := make([]*partition, n)
		for i := range all {
			all[i] = newPartition(j, i)
		}
		if found, err = j.takeAll(ctx, st, info, all, take); err != nil {
			return fail(err)
		}
	}
	j.tasks.Go(j.keep)
	return j, found, nil
}

// takeAll reads partitions, writes an empty pack of a new epoch to each, and begins
// to commit to them.
func (j *Journal) takeAll(ctx context.Context, st jetstream.Stream, info *jetstream.StreamInfo, ps []*partition, take func(Record) error) (*Found, error) {
	found, stale, err := j.read(ctx, st, info, ps, take)
	if err != nil {
		return nil, err
	}
	var epoch uint64
	for _, p := range ps {
		epoch = max(epoch, p.pack.epoch+1)
	}
	for _, p := range ps {
		p.pack.epoch = epoch
		if err := p.commit(ctx, nil); err != nil {
			return nil, fmt.Errorf("journal: partition %d of %d: %w", p.index+1, len(j.parts), err)
		}
	}
	for _, sequence := range stale { // an erasure was interrupted
		if err := st.SecureDeleteMsg(ctx, sequence); err != nil && !errors.Is(err, jetstream.ErrMsgNotFound) {
			return nil, fmt.Errorf("journal: erasing message %d: %w", sequence, err)
		}
	}
	j.mu.Lock()
	defer j.mu.Unlock()
	for _, p := range ps {
		j.parts[p.index] = p
		if j.rehearsed == nil {
			j.tasks.Go(p.run)
		}
	}
	return found, nil
}

// Take reads one partition of a shared journal and takes it over, as Open does with
// all of one that is not shared. Whoever writes it meanwhile may be in the way
// (ErrTaken): it may be taken later.
func (j *Journal) Take(ctx context.Context, index int, take func(Record) error) (*Found, error) {
	if j.part(index) != nil {
		panic("journal: a partition is taken twice")
	}
	var st jetstream.Stream
	info := new(jetstream.StreamInfo)
	if j.rehearsed == nil {
		var err error
		if st, err = j.stream(ctx); err != nil {
			return nil, fmt.Errorf("%w: %w", ErrDown, err)
		}
		info = st.CachedInfo()
	}
	p := newPartition(j, index)
	found, err := j.takeAll(ctx, st, info, []*partition{p}, take)
	if err != nil {
		p.cancel()
	}
	return found, err
}

// Give lets a partition of a shared journal go: what waits is committed until ctx
// is done, and what is not then has ErrClosed, as all has that comes later.
func (j *Journal) Give(ctx context.Context, index int) {
	j.mu.Lock()
	p := j.parts[index]
	j.parts[index] = nil
	j.mu.Unlock()
	if p == nil {
		return
	}
	p.close()
	if j.rehearsed != nil {
		p.giveRehearsed(ctx)
	}
	select {
	case <-p.idle:
	case <-ctx.Done():
	}
	p.cancel()
	<-p.idle
}

// part is a partition, nil if it is not this journal's; own are all that are.
func (j *Journal) part(i int) *partition {
	j.mu.RLock()
	defer j.mu.RUnlock()
	return j.parts[i]
}

func (j *Journal) own() (ps []*partition) {
	j.mu.RLock()
	defer j.mu.RUnlock()
	for _, p := range j.parts {
		if p != nil {
			ps = append(ps, p)
		}
	}
	return ps
}

// Close commits what waits and closes the journal; what cannot be committed
// within a while has ErrClosed.
func (j *Journal) Close() error {
	own := j.own()
	for _, p := range own {
		p.close()
	}
	idle := make(chan struct{})
	go func() {
		for _, p := range own {
			<-p.idle
		}
		close(idle)
	}()
	select {
	case <-idle:
	case <-time.After(callTimeout):
	}
	j.end()
	j.tasks.Wait()
	<-idle
	j.broker.Load().close()
	j.unlock()
	return nil
}

func (j *Journal) unlock() {
	if j.marks != nil {
		j.marks.close()
	}
	if j.lock != nil {
		j.lock.Close()
	}
}

// Partitions is how many there are, Partition which one a key's lines are in.
func (j *Journal) Partitions() int { return len(j.parts) }

// Partition is that of a key.
func (j *Journal) Partition(key string) int {
	h := fnv.New64a()
	h.Write([]byte(key))
	return int(mix(h.Sum64()) % uint64(len(j.parts)))
}

// mix spreads the bits of a hash: the low ones of FNV-1a know only the low bits
// of what went in. Source: the finalizer of splitmix64 (Steele, Lea, Flood 2014).
func mix(x uint64) uint64 {
	x = (x ^ x>>30) * 0xbf58476d1ce4e5b9
	x = (x ^ x>>27) * 0x94d049bb133111eb
	return x ^ x>>31
}

// Begin begins a line. Those of one key are in one partition, in the order in
// which they began. It is nil where the partition is not this journal's.
func (j *Journal) Begin(key string) *Line {
	p := j.part(j.Partition(key))
	if p == nil {
		return nil
	}
	p.mu.Lock()
	defer p.mu.Unlock()
	p.pack.lines++
	l := &Line{p: p, id: p.pack.lines, keep: p.pack.number + 1}
	p.lines[l.id] = l
	return l
}

// Line returns a line that Open found; nil if there is none.
func (j *Journal) Line(at Place) *Line {
	p := j.part(at.Partition)
	if p == nil {
		return nil
	}
	p.mu.Lock()
	defer p.mu.Unlock()
	return p.lines[at.Line]
}

// State is how a journal is doing.
type State struct {
	// Where is the folder or the broker.
	Where string
	// Epoch counts how often it was opened; of a shared one, the greatest that its
	// partitions have here. Own is how many of the partitions are this server's.
	Epoch           uint64
	Partitions, Own int
	// Bytes is what it takes, MaxBytes what it may, FreeBytes what is free on
	// its disk (-1: not known), LeaveBytes what is to be left free.
	Bytes, MaxBytes, FreeBytes, LeaveBytes int64
	// Waiting is the number of records that are not committed yet; Records,
	// Commits and Refused count since it was opened.
	Waiting                   int
	Records, Commits, Refused uint64
	// Lines is how many lines it keeps records for.
	Lines int
	// Oldest is when the oldest record that is kept was written; zero if there is
	// none. MaxAge is for how long records are kept at most.
	Oldest time.Time
	MaxAge time.Duration
	// Err is why new records are refused now; nil if they are taken.
	Err error
}

// State tells how the journal is doing.
func (j *Journal) State() State {
	s := State{
		Where: j.o.Dir, Partitions: len(j.parts),
		Bytes: j.bytes.Load(), MaxBytes: j.o.MaxBytes, FreeBytes: -1, LeaveBytes: j.o.FreeBytes,
		MaxAge: j.o.MaxAge, Records: j.records.Load(), Commits: j.commits.Load(), Refused: j.refused.Load(),
	}
	if s.Where == "" {
		s.Where, s.LeaveBytes = j.o.Broker.address(), 0
	} else if free, err := freeBytes(j.o.Dir); err == nil {
		s.FreeBytes = free
	}
	for _, p := range j.own() {
		p.mu.Lock()
		s.Own++
		s.Epoch = max(s.Epoch, p.pack.epoch)
		s.Waiting += len(p.queue) + p.taken
		s.Lines += len(p.lines)
		if len(p.places) > 0 && p.pack.number > p.places[0].number && (s.Oldest.IsZero() || p.places[0].at.Before(s.Oldest)) {
			s.Oldest = p.places[0].at
		}
		s.Err = errors.Join(s.Err, p.down)
		p.mu.Unlock()
	}
	if s.Err == nil {
		s.Err = j.full(0)
	}
	return s
}

// stream is the broker's stream.
func (j *Journal) stream(ctx context.Context) (jetstream.Stream, error) {
	return j.broker.Load().js.Stream(ctx, streamName)
}
