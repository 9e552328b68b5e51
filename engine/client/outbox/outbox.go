// Package outbox is for programs on vehicles that lose their server: what they
// measure goes into a file first, and from there to a server, in order and once each,
// whatever ends meanwhile: the connection, the server, or the program itself.
//
//	box, err := outbox.Open("van.outbox", outbox.Options{Drive: client.Drive{Header: header}})
//	box.Start(ctx, conn)
//	err = box.Add(measurement) // as often as there are some; does not wait for the server
//	closed, err := box.Close(ctx)
//
// A file is one drive's. Open it again to go on.
package outbox

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"sync"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/protobuf/proto"

	"leadline/engine/client"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Options say what a file holds, and how.
type Options struct {
	// Drive is given as to client.Open. Of a file that has a drive already, its name
	// must be that one or "", and its header the same or nil.
	Drive client.Drive
	// MaxBytes bounds the measurements that the file holds; 0 is 1 GiB.
	MaxBytes int64
	// MaxWait is how long a measurement may wait for others to be written and sent
	// with it, and so how much a failure of power can cost; 0 is 100 ms.
	MaxWait time.Duration
	// OnForgotten, if set, is called when the server has forgotten a drive that it did
	// not keep durably, and what the file still holds goes on as the drive of another
	// name.
	OnForgotten func(name string)
}

// maxBatch bounds a batch in bytes, so that each fits into a message of any server.
const maxBatch = 256 << 10

// Outbox keeps a drive's measurements until a server has them. Add and Flush may be
// called from several goroutines.
type Outbox struct {
	o    Options
	file *file

	mu     sync.Mutex
	batch  []*leadlinev1.SensorMeasurement
	bytes  int
	timer  *time.Timer // flushes batch; nil: it is empty
	failed error       // of a flush by the timer
	closed bool

	more   chan struct{} // there is more in the file, or less to come
	finish chan bool     // true: end the drive; false: leave it
	cancel context.CancelFunc
	done   chan struct{} // closed when nothing is carried any more; then:
	said   *leadlinev1.Closed
	err    error
}

// ErrFull is of a measurement that was not taken: the file holds as much as it may.
// Those before it are kept.
var ErrFull = errors.New("outbox: the file is full")

// Open opens a file, or makes it. Close, Leave or Abort must be called in any case.
func Open(path string, o Options) (*Outbox, error) {
	o.MaxBytes, o.MaxWait = cmp.Or(o.MaxBytes, 1<<30), cmp.Or(o.MaxWait, 100*time.Millisecond)
	if o.Drive.Batch == 0 {
		o.Drive.Batch = 64
	}
	if o.MaxBytes < 0 || o.MaxWait < 0 || o.Drive.Batch < 1 {
		return nil, fmt.Errorf("outbox: MaxBytes %d, MaxWait %v and Batch %d must be positive", o.MaxBytes, o.MaxWait, o.Drive.Batch)
	}
	f, err := openFile(path, &o.Drive)
	if err != nil {
		return nil, err
	}
	return &Outbox{o: o, file: f, more: make(chan struct{}, 1), finish: make(chan bool, 1), done: make(chan struct{})}, nil
}

// Name is the drive's name; after OnForgotten another one.
func (b *Outbox) Name() string { return b.file.drive() }

// KeepOpen notes in the file whether the drive is to be left open when the file is sent:
// for whoever sends it, since Close ends the drive in any case.
func (b *Outbox) KeepOpen(open bool) error { return b.file.keepOpen(open) }

// KeptOpen is what KeepOpen noted last, false if nothing.
func (b *Outbox) KeptOpen() bool {
	b.file.mu.Lock()
	defer b.file.mu.Unlock()
	return b.file.state.open
}

// Waiting is how many measurements the file holds that no server has yet.
func (b *Outbox) Waiting() int { return b.file.waiting() }

// Add takes a measurement, which it keeps. It is in the file after MaxWait at the
// latest, or when Flush returns. An error of the file is returned by each call after it.
func (b *Outbox) Add(m *leadlinev1.SensorMeasurement) error {
	b.mu.Lock()
	defer b.mu.Unlock()
	if err := b.usable(); err != nil {
		return err
	}
	size := proto.Size(m)
	if b.file.bytes()+int64(b.bytes+size) > b.o.MaxBytes {
		return ErrFull
	}
	if b.bytes+size > maxBatch {
		if err := b.write(); err != nil {
			return err
		}
	}
	b.batch, b.bytes = append(b.batch, m), b.bytes+size
	if len(b.batch) >= b.o.Drive.Batch {
		return b.write()
	}
	if b.timer == nil {
		b.timer = time.AfterFunc(b.o.MaxWait, func() {
			b.mu.Lock()
			defer b.mu.Unlock()
			if b.usable() == nil {
				_ = b.write() // the next call returns it
			}
		})
	}
	return nil
}

func (b *Outbox) usable() error {
	if b.closed {
		return errors.New("outbox: it is closed")
	}
	return b.failed
}

// Flush writes the measurements that wait for others: they survive a failure of power.
func (b *Outbox) Flush() error {
	b.mu.Lock()
	defer b.mu.Unlock()
	if err := b.usable(); err != nil {
		return err
	}
	return b.write()
}

// write puts the batch into the file. The lock is held.
func (b *Outbox) write() error {
	if b.timer != nil {
		b.timer.Stop()
		b.timer = nil
	}
	if len(b.batch) == 0 {
		return nil
	}
	if err := b.file.add(b.batch); err != nil {
		b.failed = err
		return err
	}
	b.batch, b.bytes = nil, 0
	select {
	case b.more <- struct{}{}:
	default:
	}
	return nil
}

// Start begins to carry the file to a server, until it is closed or ctx ends. It is
// called once.
func (b *Outbox) Start(ctx context.Context, conn grpc.ClientConnInterface) {
	ctx, b.cancel = context.WithCancel(ctx)
	go func() {
		defer close(b.done)
		for {
			b.said, b.err = b.carry(ctx, conn)
			if b.err != nil && ctx.Err() != nil {
				b.err = ctx.Err()
			}
			if !errors.Is(b.err, client.ErrForgotten) {
				return
			}
			if b.err = b.file.anew(); b.err != nil {
				return
			}
			if b.o.OnForgotten != nil {
				b.o.OnForgotten(b.Name())
			}
		}
	}()
}

// Done is closed when nothing is carried any more: Close and Leave then say why. Until
// they are called, what is added is kept.
func (b *Outbox) Done() <-chan struct{} { return b.done }

// settleEvery is how often the file lets go of what was acknowledged, and a
// connection that broke is noticed, while there is nothing to send.
const settleEvery = time.Second

// carry is in the goroutine of Start.
func (b *Outbox) carry(ctx context.Context, conn grpc.ClientConnInterface) (*leadlinev1.Closed, error) {
	d := b.o.Drive
	d.Name, d.Acknowledged = b.file.drive(), b.file.durable()
	c, err := client.Deliver(ctx, conn, d, b.file)
	if err != nil {
		return nil, err
	}
	defer c.Abort()
	tick := time.NewTicker(settleEvery)
	defer tick.Stop()
	for {
		select {
		case <-b.more:
		case <-tick.C:
			if err := b.file.settle(); err != nil {
				return nil, err
			}
		case end := <-b.finish:
			if !end {
				return nil, c.Leave()
			}
			closed, err := c.Close()
			if errors.Is(err, client.ErrForgotten) {
				b.finish <- end // once it goes on
			}
			return closed, err
		case <-ctx.Done():
			return nil, ctx.Err()
		}
		if err := c.Forward(); err != nil {
			return nil, err
		}
	}
}

// Close has the server take what the file holds, ends the drive, removes the file and
// returns what the server says. If it does not come to that before ctx ends, the file
// keeps what is left, and Open goes on with it.
func (b *Outbox) Close(ctx context.Context) (*leadlinev1.Closed, error) {
	if err := b.conclude(ctx, true); err != nil {
		return nil, errors.Join(err, b.file.Close())
	}
	return b.said, b.file.remove()
}

// Leave has the server take what the file holds, until ctx ends, and leaves the drive
// open: the file keeps what is left, and where the drive is.
func (b *Outbox) Leave(ctx context.Context) error {
	err := b.conclude(ctx, false)
	return errors.Join(err, b.file.Close())
}

// Abort stops at once. The file keeps what it holds.
func (b *Outbox) Abort() error {
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	err := b.conclude(ctx, false)
	if errors.Is(err, context.Canceled) {
		err = nil
	}
	return errors.Join(err, b.file.Close())
}

// conclude writes the last batch and ends the goroutine of Start.
func (b *Outbox) conclude(ctx context.Context, end bool) error {
	b.mu.Lock()
	err := b.usable()
	if err == nil {
		err = b.write()
	}
	b.closed = true
	b.mu.Unlock()
	if b.cancel == nil {
		if end {
			err = errors.Join(err, errors.New("outbox: it was not started: nothing is carried"))
		}
		return err
	}
	defer b.cancel()
	if err == nil {
		b.finish <- end
		stop := context.AfterFunc(ctx, b.cancel)
		defer stop()
	} else {
		b.cancel()
	}
	<-b.done
	return errors.Join(err, b.err)
}
