package client

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	mathrand "math/rand/v2"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	leadlinev1 "leadline/proto/leadline/v1"
)

// Queue holds the batches of a drive that a server has not acknowledged, by the
// numbers that the server knows them by, without a gap.
type Queue interface {
	// Held returns the numbers of its batches: those after the one, up to the last.
	// A queue that never held any returns 0 and 0.
	Held() (after, last uint64)
	// Batch returns batch n, one of those.
	Batch(n uint64) ([]*leadlinev1.SensorMeasurement, error)
	// Acknowledged lets go of the batches up to n: a server has them, those up to
	// durable durably. A queue that never held any goes on after n.
	Acknowledged(n, durable uint64) error
}

// Courier brings what a queue holds to a server, over connections that break and
// servers that are restarted or have no room: it opens the drive again, and goes on
// after what the server has, without gap or double. One goroutine may use it.
type Courier struct {
	ctx     context.Context
	conn    grpc.ClientConnInterface
	drive   Drive
	queue   Queue
	feed    *Feed  // nil while there is none
	given   uint64 // the last batch that the present feed took
	durable uint64 // of the last durable receipt
	had     uint64
	wait    time.Duration // before the next try
	opened  int
}

// Waits between tries double from shortestWait to longestWait; each is between
// half of that and all of it, by chance, so that vehicles that lost one server
// do not come back all at once. A server that says when to come back is heeded,
// up to longestHint.
const (
	shortestWait = 100 * time.Millisecond
	longestWait  = 10 * time.Second
	longestHint  = time.Minute
	// A wait after the word of a server is at most so many times what it said.
	hintFor = 5
)

// maxCarried bounds a batch in bytes, so that each fits into a message of any
// server.
const maxCarried = 256 << 10

// Deliver begins to feed a drive, which is given as to Open, from a queue. It waits
// until a server has taken the drive, or ctx ends. The batches of the queue must have
// at most d.Batch measurements.
func Deliver(ctx context.Context, conn grpc.ClientConnInterface, d Drive, q Queue) (*Courier, error) {
	if d.Name == "" {
		d.Name = rand.Text()
	}
	if d.Batch == 0 {
		d.Batch = defaultBatch
	}
	c := &Courier{ctx: ctx, conn: conn, drive: d, queue: q, durable: d.Acknowledged}
	c.drive.Continue = true // the feeds do
	return c, c.Forward()
}

// Had returns the number of batches that the server had when it began.
func (c *Courier) Had() uint64 { return c.had }

// Again returns how often the drive had to be opened again.
func (c *Courier) Again() int { return c.opened - 1 }

// Forward sends what the queue holds, and waits while the server takes none. What is
// acknowledged leaves the queue, now or at the next call. An error is one that trying
// again does not help, or that of the context.
func (c *Courier) Forward() error { return c.till(func() error { return nil }) }

// Close sends what the queue holds, ends the drive and returns what the server says.
func (c *Courier) Close() (closed *leadlinev1.Closed, err error) {
	err = c.till(func() error {
		var err error
		closed, err = c.feed.Close()
		return err
	})
	if err == nil {
		err = c.forget()
	}
	return closed, err
}

// Leave sends what the queue holds, ends the stream once the server has it, and
// leaves the drive open there.
func (c *Courier) Leave() error {
	if err := c.till(func() error { return c.feed.Leave() }); err != nil {
		return err
	}
	return c.forget()
}

// Abort breaks the stream off, without another try.
func (c *Courier) Abort() {
	if c.feed != nil {
		c.feed.Abort()
	}
}

// till has the feed take all that is in the queue and then does something with it, as
// often as it takes.
func (c *Courier) till(do func() error) error {
	for {
		err := c.advance()
		if err == nil {
			err = do()
		}
		if err == nil {
			return nil
		}
		if err := c.lose(err); err != nil {
			return err
		}
	}
}

// advance opens the drive, if it is not, and sends what it has not taken yet.
func (c *Courier) advance() error {
	if c.feed == nil {
		if err := c.open(); err != nil {
			return err
		}
	}
	// A stream that broke while nothing was sent is opened again now, not at the
	// next batch.
	if err := c.feed.broken(); err != nil {
		return err
	}
	if err := c.forget(); err != nil {
		return err
	}
	for _, last := c.queue.Held(); c.given < last; {
		batch, err := c.queue.Batch(c.given + 1)
		if err != nil {
			return hopeless{err}
		}
		if most := c.feed.drive.Batch; len(batch) > most {
			return hopeless{fmt.Errorf("client: batch %d of drive %q has %d measurements, and the server takes %d at once: set Batch", c.given+1, c.drive.Name, len(batch), most)}
		}
		for _, m := range batch {
			if err := c.feed.Send(m); err != nil {
				return err
			}
		}
		if err := c.feed.Flush(); err != nil {
			return err
		}
		c.given++
		if err := c.forget(); err != nil {
			return err
		}
	}
	return nil
}

func (c *Courier) open() error {
	c.drive.Acknowledged = c.durable
	f, err := Open(c.ctx, c.conn, c.drive)
	if err != nil {
		return err
	}
	c.opened++
	c.feed = f
	after, last := c.queue.Held()
	if c.opened == 1 {
		c.had = f.have
		if last == 0 { // it is new, and goes on after what the server has
			after, last = f.have, f.have
		}
	}
	switch {
	case f.have < after:
		return hopeless{fmt.Errorf("client: %w: the server has %d batches of drive %q, and had %d", ErrForgotten, f.have, c.drive.Name, after)}
	case f.have > last:
		return hopeless{fmt.Errorf("client: the server has %d batches of drive %q, and %d to %d were sent: does another one feed it?", f.have, c.drive.Name, after, last)}
	}
	c.given = f.have
	if c.drive.OnOpened != nil {
		c.drive.OnOpened()
	}
	return nil
}

// ErrForgotten is of a server that has acknowledged batches, though not as durable,
// and does not have them any more: it keeps no journal, and was restarted.
var ErrForgotten = errors.New("the server has forgotten the drive")

// hopeless is an error that another try does not help.
type hopeless struct{ error }

func (h hopeless) Unwrap() error { return h.error }

// forget lets go of what is acknowledged.
func (c *Courier) forget() error {
	n, durable := c.feed.Acknowledged()
	c.durable = max(c.durable, durable)
	after, last := c.queue.Held()
	if n > after {
		c.wait = 0
	}
	if n > after || last == 0 {
		if err := c.queue.Acknowledged(n, c.durable); err != nil {
			return hopeless{err}
		}
	}
	return nil
}

// lose gives the feed up after an error, and waits; or returns the error, if
// another try would not help.
func (c *Courier) lose(err error) error {
	if c.feed != nil {
		c.feed.Abort()
		forgetting := c.forget()
		c.feed = nil
		if forgetting != nil {
			return forgetting
		}
	}
	if !passing(err) || c.ctx.Err() != nil {
		return err
	}
	if c.drive.OnLost != nil {
		c.drive.OnLost(err)
	}
	c.wait = min(max(2*c.wait, shortestWait), longestWait)
	hint := min(RetryAfter(err), longestHint)
	if hint > 0 { // the server is there, and knows better
		c.wait = min(c.wait, max(hintFor*hint, shortestWait))
	}
	wait := c.wait/2 + mathrand.N(c.wait/2)
	if hint > wait {
		wait = hint + mathrand.N(hint/4+1)
	}
	late := time.NewTimer(wait)
	defer late.Stop()
	select {
	case <-late.C:
		return nil
	case <-c.ctx.Done():
		return c.ctx.Err()
	}
}

// passing reports whether an error is one that may be over later.
func passing(err error) bool {
	if errors.Is(err, errSilent) {
		return true
	}
	if errors.As(err, new(hopeless)) {
		return false
	}
	switch status.Code(err) {
	case codes.Unavailable, codes.ResourceExhausted, codes.DeadlineExceeded, codes.Canceled:
		return true
	case codes.Unknown, codes.Internal: // the connection broke, and gRPC has no better word
		_, grpcs := status.FromError(err)
		_, ours := WhyOf(err)
		return grpcs && !ours
	}
	return false
}
