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
	"google.golang.org/protobuf/proto"

	leadlinev1 "leadline/proto/leadline/v1"
)

// Carrier feeds a drive over connections that break and servers that are
// restarted or have no room: it keeps each batch until it is acknowledged, opens
// the drive again, and goes on after what the server has, without gap or double.
// One goroutine may use it.
type Carrier struct {
	ctx   context.Context
	conn  grpc.ClientConnInterface
	drive Drive
	feed  *Feed // nil while there is none

	batch   []*leadlinev1.SensorMeasurement
	bytes   int
	kept    [][]*leadlinev1.SensorMeasurement // not acknowledged
	given   int                               // of them, to the present feed
	before  uint64                            // sequence of the batch before the first of kept
	durable uint64                            // of the last durable receipt
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
)

// maxCarried bounds a batch in bytes, so that each fits into a message of any
// server.
const maxCarried = 256 << 10

// Carry begins to feed a drive, which is given as to Open. It waits until a
// server has taken it, or ctx ends.
func Carry(ctx context.Context, conn grpc.ClientConnInterface, d Drive) (*Carrier, error) {
	if d.Name == "" {
		d.Name = rand.Text()
	}
	if d.Batch == 0 {
		d.Batch = 64
	}
	c := &Carrier{ctx: ctx, conn: conn, drive: d, durable: d.Acknowledged}
	c.drive.Continue = true // the feeds do
	if err := c.till(func() error { return nil }); err != nil {
		return nil, err
	}
	if c.had = c.before; !d.Continue && c.had > 0 {
		err := fmt.Errorf("client: the server has %d batches of drive %q: set Continue to go on after them", c.had, d.Name)
		return nil, errors.Join(err, c.Leave())
	}
	return c, nil
}

// Had returns the number of batches that the server had when it began.
func (c *Carrier) Had() uint64 { return c.had }

// Again returns how often the drive had to be opened again.
func (c *Carrier) Again() int { return c.opened - 1 }

// Send sends a measurement, with its batch once that is full, and waits while the
// server takes none. It keeps m. An error is one that trying again does not help,
// or that of the context.
func (c *Carrier) Send(m *leadlinev1.SensorMeasurement) error {
	size := proto.Size(m) + perMeasurement
	if c.bytes+size > maxCarried {
		if err := c.Flush(); err != nil {
			return err
		}
	}
	c.batch = append(c.batch, m)
	c.bytes += size
	if len(c.batch) < c.drive.Batch {
		return nil
	}
	return c.Flush()
}

// Flush sends the measurements that wait for their batch to fill.
func (c *Carrier) Flush() error {
	if len(c.batch) == 0 {
		return nil
	}
	c.kept = append(c.kept, c.batch)
	c.batch, c.bytes = nil, 0
	return c.till(func() error { return nil })
}

// Close sends what waits, ends the drive and returns what the server says.
func (c *Carrier) Close() (closed *leadlinev1.Closed, err error) {
	if err := c.Flush(); err != nil {
		return nil, err
	}
	err = c.till(func() error {
		var err error
		closed, err = c.feed.Close()
		return err
	})
	return closed, err
}

// Leave sends what waits, ends the stream once the server has it, and leaves the
// drive open there.
func (c *Carrier) Leave() error {
	if err := c.Flush(); err != nil {
		return err
	}
	return c.till(func() error { return c.feed.Leave() })
}

// Abort breaks the stream off, without another try.
func (c *Carrier) Abort() {
	if c.feed != nil {
		c.feed.Abort()
	}
}

// till has the feed take all that is kept and then does something with it, as
// often as it takes.
func (c *Carrier) till(do func() error) error {
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
func (c *Carrier) advance() error {
	if c.feed == nil {
		c.drive.Acknowledged = c.durable
		f, err := Open(c.ctx, c.conn, c.drive)
		if err != nil {
			return err
		}
		c.opened++
		c.feed, c.given = f, 0
		if c.opened == 1 {
			c.before = f.have
		}
		if last := c.before + uint64(len(c.kept)); f.have < c.before || f.have > last {
			return fmt.Errorf("client: %w: the server has %d batches of drive %q, and %d to %d were sent: does another one feed it?", errAstray, f.have, c.drive.Name, c.before, last)
		}
	}
	c.forget()
	for c.given < len(c.kept) {
		for _, m := range c.kept[c.given] {
			if err := c.feed.Send(m); err != nil {
				return err
			}
		}
		if err := c.feed.Flush(); err != nil {
			return err
		}
		c.given++
		c.forget()
	}
	return nil
}

// errAstray is of a drive that is not what it should be; another try does not
// help.
var errAstray = errors.New("the drive is not where it was left")

// forget lets go of what is acknowledged.
func (c *Carrier) forget() {
	n, durable := c.feed.Acknowledged()
	c.durable = max(c.durable, durable)
	for c.before < n && len(c.kept) > 0 {
		c.before, c.kept, c.given = c.before+1, c.kept[1:], max(c.given-1, 0)
		c.wait = 0
	}
}

// lose gives the feed up after an error, and waits; or returns the error, if
// another try would not help.
func (c *Carrier) lose(err error) error {
	if c.feed != nil {
		c.forget()
		c.feed.Abort()
		c.feed = nil
	}
	if !passing(err) || c.ctx.Err() != nil {
		return err
	}
	c.wait = min(max(2*c.wait, shortestWait), longestWait)
	wait := c.wait/2 + mathrand.N(c.wait/2)
	if hint := min(RetryAfter(err), longestHint); hint > wait {
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
	if errors.Is(err, errAstray) {
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
