package journal

import (
	"context"
	"errors"
	"fmt"
	"time"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
)

// commit publishes one pack with what is given; nil says that it is durable,
// another error that it is not in and never will be. While nobody knows, it
// waits: at most for the end of ctx.
func (p *partition) commit(ctx context.Context, batch []waiting) error {
	p.mu.Lock()
	next := p.pack
	p.mu.Unlock()
	next.number++
	numbers := map[*Line]uint64{}
	for i := range batch {
		w := &batch[i]
		if w.line == nil {
			continue
		}
		n, ok := numbers[w.line]
		if !ok {
			n = w.line.number
		}
		numbers[w.line] = n + 1
		w.part.number = n + 1
		if w.part.parts&firstPart != 0 {
			w.line.first = next.number
		}
		w.first = w.line.first
		next.records = append(next.records, w.part)
	}
	p.buf = next.appendTo(p.buf[:0])
	sequence, err := p.publish(ctx, &next)
	if err != nil {
		return err
	}
	for l, n := range numbers {
		l.number = n
	}
	next.records = nil
	p.j.bytes.Add(int64(len(p.buf)) + 64)
	p.j.commits.Add(1)
	if m := p.j.marks; m != nil {
		m.set(p.index, next.number)
	}
	p.mu.Lock()
	defer p.mu.Unlock()
	next.lines, next.first = max(p.pack.lines, next.lines), max(p.pack.first, next.first)
	p.pack, p.last = next, sequence
	p.note(next.number, sequence, time.Now())
	return nil
}

// note keeps where a pack is; p.mu is held.
func (p *partition) note(number, sequence uint64, at time.Time) {
	p.written = at
	n := len(p.places)
	if n == 0 || number >= p.places[n-1].number+indexEvery || p.j.o.MaxAge > 0 && at.Sub(p.places[n-1].at) >= p.j.o.MaxAge/ages {
		p.places = append(p.places, indexed{number, sequence, at})
	}
}

// tries is how often a pack that is not in is published again before what it
// holds is refused.
const tries = 8

// publish gives the pack in p.buf to the broker, and finds out whether it is in
// where the broker does not say.
func (p *partition) publish(ctx context.Context, next *pack) (sequence uint64, err error) {
	for try := 1; ; try++ {
		b := p.j.broker.Load()
		call, cancel := b.asked(ctx)
		ack, err := b.js.PublishMsg(call, &nats.Msg{Subject: p.subject, Data: p.buf, Header: nats.Header{writerHeader: {p.j.writer}}},
			jetstream.WithExpectLastSequencePerSubject(p.last), jetstream.WithRetryAttempts(0))
		cancel()
		if err == nil {
			return ack.Sequence, nil
		}
		if ctx.Err() != nil {
			return 0, ErrClosed
		}
		in, settledErr := p.settle(ctx, next, err)
		switch {
		case settledErr != nil:
			return 0, settledErr
		case in > 0:
			return in, nil
		}
		if full := p.j.full(0); full != nil {
			return 0, full
		}
		if noRoom(err) {
			return 0, fmt.Errorf("%w: %w", ErrFull, err)
		}
		if try == tries {
			return 0, fmt.Errorf("%w: %w", ErrDown, err)
		}
	}
}

// noRoom reports whether the broker said that its stream or its disk is full.
func noRoom(err error) bool {
	var api *jetstream.APIError
	if !errors.As(err, &api) {
		return false
	}
	switch api.ErrorCode {
	case 10023, 10047, 10122: // insufficient resources, storage, bytes of a stream
		return true
	case 10077: // the store failed: with these words
		return api.Description == "maximum bytes exceeded" || api.Description == "no space left on device"
	}
	return false
}

const shortestWait = 20 * time.Millisecond

// writerHeader of a message names the journal that wrote it: two that take a
// partition over at once would give their packs the same numbers.
const writerHeader = "Leadline-Writer"

// settle finds out whether a pack is in: with its sequence if it is, 0 if it is
// not. It asks until the broker answers.
func (p *partition) settle(ctx context.Context, next *pack, why error) (sequence uint64, err error) {
	var api *jetstream.APIError
	outOfDate := errors.As(why, &api) && api.ErrorCode == jetstream.JSErrCodeStreamWrongLastSequence
	for wait := shortestWait; ; wait = min(2*wait, time.Second) {
		last, number, epoch, writer, err := p.lastAtBroker(ctx)
		switch {
		case err == nil && last == p.last && outOfDate && wait < time.Second:
			// It has refused the pack since something is in, and whoever answered may not
			// know of it yet: of several brokers one is behind.
		case err == nil && last == p.last:
			return 0, nil
		case err == nil && number == next.number && epoch == next.epoch && writer == p.j.writer:
			return last, nil
		case err == nil && last > p.last:
			return 0, fmt.Errorf("%w: pack %d of epoch %d is in partition %d, and this one's is %d of %d", ErrTaken, number, epoch, p.index+1, next.number, next.epoch)
		case err == nil:
			return 0, fmt.Errorf("%w: the last pack of partition %d is gone from the broker", ErrTaken, p.index+1)
		}
		p.fallDown(why)
		p.j.revive()
		select {
		case <-ctx.Done():
			return 0, ErrClosed
		case <-time.After(wait):
		}
	}
}

// fallDown says that it is not known whether the journal can be written.
func (p *partition) fallDown(why error) {
	p.mu.Lock()
	first := p.down == nil
	p.down = fmt.Errorf("%w: %w", ErrDown, why)
	p.mu.Unlock()
	if first {
		p.j.o.Log.Error("journal cannot be written", "partition", p.index+1, "error", why)
	}
}

// lastAtBroker is the last pack of the partition; 0 if there is none.
func (p *partition) lastAtBroker(ctx context.Context) (sequence, number, epoch uint64, writer string, err error) {
	ctx, cancel := p.j.broker.Load().asked(ctx)
	defer cancel()
	st, err := p.j.stream(ctx)
	if err != nil {
		return 0, 0, 0, "", err
	}
	m, err := st.GetLastMsgForSubject(ctx, p.subject)
	if errors.Is(err, jetstream.ErrMsgNotFound) {
		return 0, 0, 0, "", nil
	}
	if err != nil {
		return 0, 0, 0, "", err
	}
	var last pack
	if err := last.read(m.Data); err != nil {
		return 0, 0, 0, "", fmt.Errorf("pack at sequence %d: %w", m.Sequence, err)
	}
	return m.Sequence, last.number, last.epoch, m.Header.Get(writerHeader), nil
}

// revive starts a broker within this process again that has given up, once
// there is room.
func (j *Journal) revive() {
	j.reopen.Lock()
	defer j.reopen.Unlock()
	if j.broker.Load().up() || j.o.Dir == "" || j.full(1) != nil || j.ended.Err() != nil {
		return
	}
	j.broker.Load().close()
	b, err := connect(&j.o)
	if err != nil {
		j.o.Log.Error("journal's broker cannot be started again", "error", err)
		return
	}
	j.broker.Store(b)
	j.o.Log.Info("journal's broker has been started again")
}
