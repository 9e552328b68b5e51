package journal

import (
	"context"
	"errors"
	"fmt"
	"sync"
	"time"
)

// partition is one subject and its committer.
type partition struct {
	j       *Journal
	index   int
	subject string

	mu     sync.Mutex
	queue  []waiting
	bytes  int // of the queue
	taken  int // records that are being committed
	closed bool
	down   error         // why commits fail
	wake   chan struct{} // holds a token when there is something to do
	idle   chan struct{} // closed when the committer has ended
	lines  map[uint64]*Line
	pack   pack // the last that is in; its records are none
	places []indexed
	// written is when the last pack was; copies are where packs are that stand
	// for those from which something was erased, by their number.
	written time.Time
	copies  map[uint64]uint64

	// done when it is given up, or the journal is closed.
	ended  context.Context
	cancel context.CancelFunc

	// Of the committer.
	last uint64 // the broker's sequence of the last pack
	lost bool   // another journal writes it
	busy bool   // of a rehearsal: a step is under way
	buf  []byte
}

// waiting is a part of a record in the queue; without a line it is none, and
// waits for a commit with or after all that waits already.
type waiting struct {
	line   *Line
	part   part
	urgent bool
	first  uint64          // pack of the record's first part, once that is in
	done   func(At, error) // of the last part
	// refused is why it is not to be committed, where that was known when it came.
	refused error
}

// indexed is where a pack is at the broker: of one in indexEvery, and oftener
// where records are kept for a time.
type indexed struct {
	number, sequence uint64
	at               time.Time
}

const indexEvery = 16

// maxQueued bounds the bytes that wait in a partition, of four or more; fewer have
// as much together.
const maxQueued = 64 << 20

func (j *Journal) maxQueued() int { return max(maxQueued, 4*maxQueued/len(j.parts)) }

func newPartition(j *Journal, i int) *partition {
	p := &partition{
		j: j, index: i, subject: subject(i), lines: map[uint64]*Line{}, copies: map[uint64]uint64{},
		wake: make(chan struct{}, 1), idle: make(chan struct{}), pack: pack{first: 1},
	}
	p.ended, p.cancel = context.WithCancel(j.ended)
	return p
}

func (p *partition) append(l *Line, kind byte, data []byte, urgent bool, done func(At, error)) {
	p.mu.Lock()
	err := l.broken
	switch {
	case p.closed:
		err = ErrClosed
	case err == nil && p.down != nil && p.bytes > 0:
		err = p.down // what waits already shows when it is over
	case err == nil && p.bytes+len(data) > p.j.maxQueued() && p.bytes > 0:
		err = fmt.Errorf("%w: %d MiB wait to be committed", ErrDown, p.bytes>>20)
	}
	switch {
	case err == nil:
		p.push(l, kind, data, urgent, done)
	case p.taken > 0 || len(p.queue) > 0: // what was before it is told of first
		l.broken = err
		p.queue = append(p.queue, waiting{line: l, done: done, refused: err})
	default:
		l.broken = err
		p.mu.Unlock()
		p.j.refused.Add(1)
		done(At{}, err)
		return
	}
	p.mu.Unlock()
	p.poke()
}

// push puts a record into the queue, in parts.
func (p *partition) push(l *Line, kind byte, data []byte, urgent bool, done func(At, error)) {
	p.bytes += len(data)
	for parts := byte(firstPart); ; parts = 0 {
		w := waiting{line: l, part: part{kind: kind, parts: parts, line: l.id, data: data}, urgent: urgent}
		if len(data) > maxPart {
			w.part.data, data = data[:maxPart:maxPart], data[maxPart:]
			p.queue = append(p.queue, w)
			continue
		}
		w.part.parts |= lastPart
		w.done = done
		p.queue = append(p.queue, w)
		return
	}
}

// header has an empty pack committed, and waits for it.
func (p *partition) header(ctx context.Context) error {
	done := make(chan error, 1)
	p.mu.Lock()
	if p.closed {
		p.mu.Unlock()
		return ErrClosed
	}
	p.queue = append(p.queue, waiting{urgent: true, done: func(_ At, err error) { done <- err }})
	p.mu.Unlock()
	p.poke()
	select {
	case err := <-done:
		return err
	case <-ctx.Done():
		return ctx.Err()
	}
}

func (p *partition) poke() {
	select {
	case p.wake <- struct{}{}:
	default:
	}
}

func (p *partition) close() {
	p.mu.Lock()
	p.closed = true
	p.mu.Unlock()
	p.poke()
}

// run is the committer.
func (p *partition) run() {
	defer close(p.idle)
	for {
		batch, closed := p.take()
		if len(batch) == 0 {
			if closed {
				return
			}
			select {
			case <-p.wake:
			case <-p.ended.Done():
				p.close()
			}
			continue
		}
		p.serve(batch)
	}
}

// take takes what makes one pack off the queue: in its order, but of long records no
// more than mostLong parts while others wait, who would else wait for several packs.
func (p *partition) take() (batch []waiting, closed bool) {
	p.mu.Lock()
	defer p.mu.Unlock()
	size := 0
	add := func(w *waiting) {
		size += partBytes + len(w.part.data)
		p.bytes -= len(w.part.data)
		batch = append(batch, *w)
	}
	long := 0
	var later []waiting        // in order
	behind := map[*Line]bool{} // lines of which some are later: so are all that follow
	n := 0
	for ; n < len(p.queue); n++ {
		w := &p.queue[n]
		if w.line == nil && len(later) > 0 { // it comes after all that waits
			break
		}
		if len(w.part.data) == maxPart && long == mostLong || behind[w.line] {
			behind[w.line] = true
			later = append(later, *w)
			continue
		}
		if len(batch) > 0 && size+partBytes+len(w.part.data) > maxPack {
			break
		}
		if len(w.part.data) == maxPart {
			long++
		}
		add(w)
	}
	rest := p.queue[n:]
	if len(rest) == 0 || rest[0].line == nil { // nobody else waits
		for len(later) > 0 && size+partBytes+len(later[0].part.data) <= maxPack {
			add(&later[0])
			later = later[1:]
		}
	}
	if len(later) > 0 {
		rest = append(later, rest...)
	}
	clear(p.queue[:n])
	if p.queue = rest; len(p.queue) == 0 {
		p.queue = nil
	}
	p.taken = len(batch)
	return batch, p.closed
}

// mostLong is how many full parts, which are those of long records, go into a pack
// while others wait.
const mostLong = 2

// serve commits a batch and tells who waits for it, of each line in order. What
// there is no room for is left out, with all else of its lines.
func (p *partition) serve(batch []waiting) {
	refusal := p.j.full(0)
	var urgent error
	if refusal != nil {
		urgent = p.j.full(1)
	}
	kept := batch[:0:0]
	var left []waiting
	broken := map[*Line]error{}
	for _, w := range batch {
		err := refusal
		if w.urgent {
			err = urgent
		}
		if w.refused != nil {
			err = w.refused
		}
		if w.line != nil && broken[w.line] != nil {
			err = broken[w.line]
		}
		if err != nil {
			if w.line != nil {
				broken[w.line] = err
			}
			left = append(left, w)
			continue
		}
		kept = append(kept, w)
	}
	var err error
	if len(kept) > 0 {
		err = p.commit(p.ended, kept)
	}
	if err != nil {
		if errors.Is(err, ErrTaken) {
			p.lost = true
			if lost := p.j.o.Lost; lost != nil {
				go lost(p.index)
			}
		}
		for _, w := range kept {
			if w.line != nil {
				broken[w.line] = err
			}
		}
		left, kept, refusal = append(kept, left...), nil, err
	}
	for _, w := range kept {
		if w.done != nil {
			w.done(At{p.pack.number, w.part.number, w.first}, nil)
		}
	}
	if len(left) > 0 {
		p.refuse(left, broken, refusal)
	}
	p.j.records.Add(uint64(len(kept)))
	p.mu.Lock()
	defer p.mu.Unlock()
	p.down, p.taken = err, 0
}

// refuse tells of parts that were left out, and of all else of their lines that
// waits.
func (p *partition) refuse(parts []waiting, broken map[*Line]error, err error) {
	p.mu.Lock()
	for l, e := range broken {
		l.broken = e
	}
	var rest []waiting
	for _, w := range p.queue {
		if w.line != nil && broken[w.line] != nil {
			parts = append(parts, w)
			p.bytes -= len(w.part.data)
		} else {
			rest = append(rest, w)
		}
	}
	p.queue = rest
	p.mu.Unlock()
	for _, w := range parts {
		if w.done == nil {
			continue
		}
		p.j.refused.Add(1)
		e := err
		if w.line != nil {
			e = broken[w.line]
		}
		w.done(At{}, e)
	}
}
