package client

import (
	"context"
	"errors"
	"fmt"

	"google.golang.org/grpc"
	"google.golang.org/protobuf/proto"

	leadlinev1 "leadline/proto/leadline/v1"
)

// Carrier feeds a drive as a Courier does, from memory: it keeps each batch until it
// is acknowledged. One goroutine may use it.
type Carrier struct {
	*Courier
	kept  kept
	batch []*leadlinev1.SensorMeasurement
	bytes int
}

// Carry begins to feed a drive, which is given as to Open. It waits until a
// server has taken it, or ctx ends.
func Carry(ctx context.Context, conn grpc.ClientConnInterface, d Drive) (*Carrier, error) {
	c := &Carrier{}
	var err error
	if c.Courier, err = Deliver(ctx, conn, d, &c.kept); err != nil {
		return nil, err
	}
	if !d.Continue && c.had > 0 {
		err := fmt.Errorf("client: the server has %d batches of drive %q: set Continue to go on after them", c.had, c.drive.Name)
		return nil, errors.Join(err, c.Leave())
	}
	return c, nil
}

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
	c.kept.batches = append(c.kept.batches, c.batch)
	c.batch, c.bytes = nil, 0
	return c.Forward()
}

// Close sends what waits, ends the drive and returns what the server says.
func (c *Carrier) Close() (*leadlinev1.Closed, error) {
	if err := c.Flush(); err != nil {
		return nil, err
	}
	return c.Courier.Close()
}

// Leave sends what waits, ends the stream once the server has it, and leaves the
// drive open there.
func (c *Carrier) Leave() error {
	if err := c.Flush(); err != nil {
		return err
	}
	return c.Courier.Leave()
}

// kept is a queue in memory.
type kept struct {
	after   uint64
	batches [][]*leadlinev1.SensorMeasurement
}

var _ Queue = (*kept)(nil)

func (k *kept) Held() (after, last uint64) { return k.after, k.after + uint64(len(k.batches)) }

func (k *kept) Batch(n uint64) ([]*leadlinev1.SensorMeasurement, error) {
	return k.batches[n-k.after-1], nil
}

func (k *kept) Acknowledged(n, _ uint64) error {
	gone := min(n-k.after, uint64(len(k.batches)))
	clear(k.batches[:gone])
	k.after, k.batches = n, k.batches[gone:]
	return nil
}
