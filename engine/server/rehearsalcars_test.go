package server

import (
	"context"
	"encoding/binary"
	"fmt"
	"hash/fnv"
	"time"

	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// brief is a session of a rehearsal: its posteriors say which measurements it has
// taken, in which order, and how often.
type brief struct {
	sum, count uint64
	last       *summary.Posterior
}

func (s *brief) Add(ev sensor.Event) ([]*summary.Posterior, error) {
	h := fnv.New64a()
	_ = binary.Write(h, binary.LittleEndian, []uint64{s.sum, uint64(ev.Time), ev.Number})
	s.sum, s.count = h.Sum64(), s.count+1
	s.last = &summary.Posterior{TimeNS: int64(ev.Time), Status: summary.Unsure}
	return []*summary.Posterior{s.last}, nil
}
func (s *brief) Flush() []*summary.Posterior        { return nil }
func (s *brief) Withdrawn() []sensor.Time           { return nil }
func (s *brief) Latest() *summary.Posterior         { return s.last }
func (s *brief) Counts() (accepted, refused uint64) { return s.count, 0 }
func (s *brief) Hash() string                       { return fmt.Sprintf("%016x", s.sum) }

func (s *brief) Checkpoint() []byte {
	var at int64
	if s.last != nil {
		at = s.last.TimeNS
	}
	le := binary.LittleEndian
	return le.AppendUint64(le.AppendUint64(le.AppendUint64(nil, s.sum), s.count), uint64(at))
}

func restoreBrief(_ session.Config, b []byte) (Session, error) {
	if len(b) != 24 {
		return nil, fmt.Errorf("a checkpoint of %d bytes", len(b))
	}
	le := binary.LittleEndian
	s := &brief{sum: le.Uint64(b), count: le.Uint64(b[8:])}
	if s.count > 0 {
		s.last = &summary.Posterior{TimeNS: int64(le.Uint64(b[16:])), Status: summary.Unsure}
	}
	return s, nil
}

// car is a vehicle, which does as a client does.
type car struct {
	r       *rehearsal
	name    string
	batches []*leadlinev1.Batch
	events  int
	hash    string // that it is to end with
	acked   uint64 // the highest durable receipt
	done    bool
	wait    time.Time // does nothing before
	due     time.Time // of its next batch

	// Of its stream, if there is one.
	at     *node
	o      *owner
	a      *attachment
	begun  bool // the owner has taken it
	opened bool // and said so
	flying []work
	had    uint64 // that the server had when it opened
	sent   uint64
	ended  bool // the end is sent
	heard  time.Time
}

// window and silence are as in clients.
const (
	carWindow  = 4
	carSilence = 5 * time.Second
)

// lose breaks the stream off.
func (c *car) lose() {
	if c.o != nil && !c.at.dead {
		c.at.s.leave(c.o)
		if c.o.at == c.a {
			c.o.at, c.o.out = nil, nil
		}
	}
	c.o, c.a, c.at = nil, nil, nil
	c.wait = c.r.now.Add(c.r.ms(50, 800))
}

func (c *car) act() {
	r := c.r
	switch {
	case c.done || r.now.Before(c.wait):
	case c.o == nil:
		c.open()
	case c.at.dead || r.chance(300):
		c.lose()
	case r.now.Sub(c.heard) > carSilence:
		c.lose()
	case r.now.Before(c.at.paused):
	default:
		c.drive()
	}
}

// open goes to any server, which may send it on.
func (c *car) open() {
	r := c.r
	n := r.nodes[r.rng.IntN(len(r.nodes))]
	c.wait = r.now.Add(r.ms(20, 300))
	for range 2 {
		if n == nil || n.dead || r.now.Before(n.paused) {
			return
		}
		at := n.sh.Where(n.s.journal.Partition(c.name))
		if at.Mine {
			o, err := n.s.open(context.Background(), &leadlinev1.Open{Header: header(c.name), Drive: "d", Acknowledged: c.acked, Reply: leadlinev1.Reply_REPLY_NONE})
			if err != nil {
				if got := saidBy(err); got.reason != leadlinev1.Reason_REASON_RECOVERING && got.reason != leadlinev1.Reason_REASON_STOPPING {
					r.fail("%s at %s with %d batches acknowledged: %v", c.name, n.name, c.acked, err)
				}
				return
			}
			c.at, c.o, c.heard = n, o, r.now
			c.a = &attachment{reply: leadlinev1.Reply_REPLY_NONE, acknowledged: c.acked, taken: make(chan struct{}), gone: make(chan struct{})}
			c.begun, c.opened, c.flying, c.ended = false, false, nil, false
			c.wait = time.Time{}
			return
		}
		if at.Server == nil {
			return
		}
		n = r.node(at.Server.ID)
	}
}

// drive sends, has the owner do what it may, and hears.
func (c *car) drive() {
	r, o := c.r, c.o
	if c.opened && !r.now.Before(c.due) && c.sent < uint64(len(c.batches)) && c.sent < max(c.acked, c.had)+carWindow {
		c.sent++
		c.flying = append(c.flying, work{batch: c.batches[c.sent-1]})
		c.due = r.now.Add(r.ms(100, 1500))
	}
	if c.opened && c.sent == uint64(len(c.batches)) && !c.ended {
		c.ended = true
		c.flying = append(c.flying, work{end: true})
	}
	c.at.move(o)
	select {
	case <-o.quit:
		c.lose()
		return
	case <-c.a.taken:
		c.lose()
		return
	default:
	}
	if !c.begun && o.mayAttach() {
		c.begun = true
		o.take(c.a)
	}
	if !c.begun || o.at != c.a {
		return
	}
	for len(o.out) > 0 {
		it := o.out[0]
		o.out = o.out[1:]
		c.heard = r.now
		c.hear(it)
		if it.last {
			c.lose()
			return
		}
	}
	if len(c.flying) > 0 && o.mayWork() {
		w := c.flying[0]
		c.flying = c.flying[1:]
		o.work(w)
	}
	if c.opened && len(c.flying) == 0 && !o.rec.busy() {
		c.heard = r.now // there is nothing to hear
	}
}

func (c *car) hear(it item) {
	switch {
	case it.last && it.err != nil:
		if got := saidBy(it.err); got.reason == leadlinev1.Reason_REASON_JOURNAL_DAMAGED || got.reason == leadlinev1.Reason_REASON_OUT_OF_ORDER {
			c.r.fail("%s: %v", c.name, it.err)
		}
	case it.message.GetOpened() != nil:
		c.opened, c.sent = true, it.message.GetOpened().GetSequence()
		c.had = c.sent
		if c.sent < c.acked {
			c.r.fail("%s has receipts for %d batches, and %s has %d", c.name, c.acked, c.at.name, c.sent)
		}
	case it.message.GetReceipt() != nil:
		if rc := it.message.GetReceipt(); rc.GetDurable() {
			c.acked = max(c.acked, rc.GetSequence())
		}
	case it.message.GetClosed() != nil:
		got := it.message.GetClosed()
		c.done = true
		if got.GetAccepted() != uint64(c.events) || got.GetPosteriorSha256() != c.hash {
			c.r.fail("%s ends with %d measurements and %.16s, and sent %d, which come to %.16s", c.name, got.GetAccepted(), got.GetPosteriorSha256(), c.events, c.hash)
		}
	}
}
