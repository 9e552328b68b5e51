package journal

import (
	"context"
	"errors"
	"fmt"
	"slices"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
)

// Erased is what an erasure has taken out.
type Erased struct{ Lines, Packs, Records int }

// Erase takes a line out of the journal with all its records, and of the lines
// that began before it in its partition those of which owns, given one of their
// records, says that they are to go. What is taken out is overwritten at the
// broker; everything else stays. Nothing may be appended to these lines any more.
//
// It holds for the records too, of other lines, that are in the same packs as
// those: they are copied before. An error leaves the journal whole, with a part
// of the records erased, the oldest first: the line that is given goes last.
func (j *Journal) Erase(ctx context.Context, upTo *Line, owns func(Record) bool) (Erased, error) {
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	defer context.AfterFunc(j.ended, cancel)()
	j.sweep.Lock()
	defer j.sweep.Unlock()
	e := eraser{j: j, p: upTo.p, upTo: upTo.id, owns: owns, gone: map[uint64]bool{upTo.id: true}, reading: map[uint64]*lineRead{}, holds: map[uint64][]uint64{}}
	// Two empty packs: the first with or after all that is to go, the second
	// without any of it, so that the last pack is none that is overwritten.
	for range 2 {
		if err := e.p.header(ctx); err != nil {
			return Erased{}, err
		}
	}
	st, err := j.stream(ctx)
	if err != nil {
		return Erased{}, fmt.Errorf("%w: %w", ErrDown, err)
	}
	if err := e.find(ctx, st); err != nil {
		return Erased{}, err
	}
	if err := e.replace(ctx, st); err != nil {
		return e.done, err
	}
	e.p.mu.Lock()
	defer e.p.mu.Unlock()
	for line := range e.gone {
		delete(e.p.lines, line)
	}
	e.done.Lines = len(e.gone)
	return e.done, nil
}

// eraser is one erasure.
type eraser struct {
	j       *Journal
	p       *partition
	upTo    uint64
	owns    func(Record) bool
	gone    map[uint64]bool // lines
	reading map[uint64]*lineRead
	numbers []uint64            // of packs, in order
	holds   map[uint64][]uint64 // which lines up to upTo have records in them
	at      map[uint64]uint64   // where they are at the broker
	done    Erased
}

// find reads the partition: which packs hold which lines, and which lines go.
func (e *eraser) find(ctx context.Context, st jetstream.Stream) error {
	e.at = map[uint64]uint64{}
	cfg := jetstream.OrderedConsumerConfig{DeliverPolicy: jetstream.DeliverAllPolicy, FilterSubjects: []string{e.p.subject, copySubject(e.p.index)}}
	copied := false
	err := messages(ctx, st, cfg, func(m message) error {
		var k pack
		whole := k.read(m.data) == nil // or it is damaged, as was said when the journal was opened
		copied = copied || m.subject != e.p.subject
		if !whole {
			return nil
		}
		if _, known := e.at[k.number]; !known {
			e.numbers = append(e.numbers, k.number)
		}
		e.at[k.number] = m.sequence
		if !copied {
			e.look(&k, m)
		}
		return nil
	})
	if err != nil || !copied {
		return err
	}
	// Copies come after what follows their packs: once more, in the packs' order.
	slices.Sort(e.numbers)
	clear(e.reading)
	clear(e.holds)
	for _, number := range e.numbers {
		m, err := st.GetMsg(ctx, e.at[number])
		if err != nil {
			return fmt.Errorf("journal: reading message %d: %w", e.at[number], err)
		}
		var k pack
		if err := k.read(m.Data); err != nil {
			return fmt.Errorf("journal: reading message %d: %w", m.Sequence, err)
		}
		e.look(&k, message{subject: m.Subject, sequence: m.Sequence, at: m.Time, data: m.Data})
	}
	return nil
}

// look notes what a pack holds.
func (e *eraser) look(k *pack, m message) {
	for i := range k.records {
		x := &k.records[i]
		if x.line > e.upTo {
			continue
		}
		if h := e.holds[k.number]; len(h) == 0 || h[len(h)-1] != x.line {
			e.holds[k.number] = append(h, x.line)
		}
		if e.gone[x.line] {
			continue
		}
		l := e.reading[x.line]
		if l == nil {
			l = &lineRead{}
			e.reading[x.line] = l
		}
		if x.parts&firstPart != 0 {
			l.began, l.kind, l.data = true, x.kind, nil
		}
		l.data = append(l.data, x.data...)
		if x.parts&lastPart == 0 || !l.began {
			continue
		}
		if e.owns(Record{Kind: x.kind, Place: Place{e.p.index, x.line}, Number: x.number, Pack: k.number, Time: m.at, Data: l.data}) {
			e.gone[x.line] = true
			delete(e.reading, x.line)
			continue
		}
		l.began, l.data = false, l.data[:0]
	}
}

// replace puts copies without the lines in the place of all packs that have any,
// the oldest first.
func (e *eraser) replace(ctx context.Context, st jetstream.Stream) error {
	for _, number := range e.numbers {
		if !slices.ContainsFunc(e.holds[number], func(line uint64) bool { return e.gone[line] }) {
			continue
		}
		n, err := e.copyWithout(ctx, st, number)
		if err != nil {
			return fmt.Errorf("erasing from pack %d of partition %d: %w", number, e.p.index+1, err)
		}
		e.done.Packs++
		e.done.Records += n
	}
	return nil
}

// copyWithout replaces one pack, and returns how many records are left out.
func (e *eraser) copyWithout(ctx context.Context, st jetstream.Stream, number uint64) (records int, err error) {
	sequence := e.at[number]
	m, err := st.GetMsg(ctx, sequence)
	if err != nil {
		return 0, err
	}
	var k pack
	if err := k.read(m.Data); err != nil {
		return 0, err
	}
	kept := k.records[:0:0]
	for _, x := range k.records {
		switch {
		case !e.gone[x.line]:
			kept = append(kept, x)
		case x.parts&lastPart != 0:
			records++
		}
	}
	k.records = kept
	ack, err := e.j.broker.Load().js.PublishMsg(ctx, &nats.Msg{Subject: copySubject(e.p.index), Data: k.appendTo(nil)})
	if err != nil {
		if noRoom(err) {
			err = fmt.Errorf("%w: %w", ErrFull, err)
		}
		return 0, err
	}
	e.p.mu.Lock()
	e.p.copies[number] = ack.Sequence
	e.p.mu.Unlock()
	err = st.SecureDeleteMsg(ctx, sequence)
	if errors.Is(err, jetstream.ErrMsgNotFound) {
		err = nil
	}
	return records, err
}
