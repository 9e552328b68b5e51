package journal

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"time"

	"github.com/nats-io/nats.go/jetstream"
)

// commit publishes one pack with what is given; nil says that it is durable,
// another error that what is given is not in and never will be. While nobody knows, it
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
	sequence, in, refusal := p.publish(ctx, &next)
	if !in {
		return refusal
	}
	if refusal != nil { // an empty one is in
		clear(numbers)
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
	return refusal
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
// where the broker does not say. in says that a pack is, with or without an error.
func (p *partition) publish(ctx context.Context, next *pack) (sequence uint64, in bool, err error) {
	unknown, quick := false, 0 // some try may come through yet
	for try := 1; ; try++ {
		sequence, err := p.j.log.Publish(ctx, p.index, p.buf, p.j.writer, p.last)
		if err == nil {
			return sequence, true, nil
		}
		if ctx.Err() != nil {
			return 0, false, ErrClosed
		}
		var api *jetstream.APIError
		unknown = unknown || !errors.As(err, &api)
		last, settledErr := p.settle(ctx, next, err)
		switch {
		case settledErr != nil:
			return 0, false, settledErr
		case last.Sequence > 0 && !bytes.Equal(last.Data, p.buf):
			return 0, false, fmt.Errorf("%w: pack %d of partition %d is in, and is another one", ErrTaken, next.number, p.index+1)
		case last.Sequence > 0:
			return last.Sequence, true, nil
		}
		refusal := p.j.full(0)
		if refusal == nil && noRoom(err) {
			refusal = fmt.Errorf("%w: %w", ErrFull, err)
		}
		if refusal == nil && try == tries {
			refusal = fmt.Errorf("%w: %w", ErrDown, err)
		}
		switch {
		case refusal != nil && unknown:
			return p.replace(ctx, next, refusal)
		case refusal != nil:
			return 0, false, refusal
		}
		if errors.Is(err, jetstream.ErrNoStreamResponse) && quick < tries*tries { // said at once, while brokers elect
			quick, try = quick+1, try-1
			if p.j.log.Wait(ctx, longestPause); ctx.Err() != nil {
				return 0, false, ErrClosed
			}
		}
	}
}

// replace publishes an empty pack in the place of one that is given up and may be on
// its way still: with that it can come no more. If it has come it is in.
func (p *partition) replace(ctx context.Context, next *pack, refusal error) (sequence uint64, in bool, err error) {
	empty := *next
	empty.records = nil
	data := empty.appendTo(nil)
	for wait := shortestWait; ; wait = min(2*wait, time.Second) {
		sequence, err := p.j.log.Publish(ctx, p.index, data, p.j.writer, p.last)
		if err == nil {
			return sequence, true, refusal
		}
		if ctx.Err() != nil {
			return 0, false, ErrClosed
		}
		last, settledErr := p.settle(ctx, next, err)
		switch {
		case settledErr != nil:
			return 0, false, settledErr
		case last.Sequence > 0 && bytes.Equal(last.Data, p.buf):
			return last.Sequence, true, nil
		case last.Sequence > 0:
			return last.Sequence, true, refusal
		}
		p.fallDown(err)
		if p.j.log.Wait(ctx, min(wait, longestPause)); ctx.Err() != nil {
			return 0, false, ErrClosed
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

const (
	shortestWait = 20 * time.Millisecond
	longestPause = 200 * time.Millisecond // of one who asks whether there is a broker again
)

// writerHeader of a message names the journal that wrote it: two that take a
// partition over at once would give their packs the same numbers.
const writerHeader = "Leadline-Writer"

// settle finds out whether a pack of that number is in: which, if one is; its
// sequence is 0 if none is. It asks until the broker answers.
func (p *partition) settle(ctx context.Context, next *pack, why error) (in Message, err error) {
	var api *jetstream.APIError
	outOfDate := errors.As(why, &api) && api.ErrorCode == jetstream.JSErrCodeStreamWrongLastSequence
	for wait := shortestWait; ; wait = min(2*wait, time.Second) {
		m, last, err := p.lastAtBroker(ctx)
		switch {
		case err == nil && m.Sequence == p.last && outOfDate && wait < time.Second:
			// It has refused the pack since something is in, and whoever answered may not
			// know of it yet: of several brokers one is behind.
		case err == nil && m.Sequence == p.last:
			return Message{}, nil
		case err == nil && last.number == next.number && last.epoch == next.epoch && m.Writer == p.j.writer:
			return m, nil
		case err == nil && m.Sequence > p.last:
			return Message{}, fmt.Errorf("%w: pack %d of epoch %d is in partition %d, and this one's is %d of %d", ErrTaken, last.number, last.epoch, p.index+1, next.number, next.epoch)
		case err == nil && wait < time.Second: // likewise, and further behind
		case err == nil:
			return Message{}, fmt.Errorf("%w: the last pack of partition %d is gone from the broker", ErrTaken, p.index+1)
		}
		p.fallDown(why)
		p.j.revive()
		pause := wait
		if err != nil { // there is nobody to ask: as soon as there is, vehicles wait for it
			pause = min(wait, longestPause)
		}
		if p.j.log.Wait(ctx, pause); ctx.Err() != nil {
			return Message{}, ErrClosed
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

// lastAtBroker is the last pack of the partition, and its message, whose sequence is
// 0 if there is none.
func (p *partition) lastAtBroker(ctx context.Context) (m Message, last pack, err error) {
	if m, err = p.j.log.Last(ctx, p.index); err != nil || m.Sequence == 0 {
		return m, last, err
	}
	if err := last.read(m.Data); err != nil {
		return m, last, fmt.Errorf("pack at sequence %d: %w", m.Sequence, err)
	}
	return m, last, nil
}

// revive starts a broker within this process again that has given up, once
// there is room.
func (j *Journal) revive() {
	j.reopen.Lock()
	defer j.reopen.Unlock()
	if j.rehearsed != nil || j.broker.Load().up() || j.o.Dir == "" || j.full(1) != nil || j.ended.Err() != nil {
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
