package journal

import (
	"context"
	"errors"
	"fmt"
	"time"

	"github.com/nats-io/nats.go/jetstream"
)

// Found is what Open read.
type Found struct {
	Packs, Records int
	Bytes          int64
	// Damage is what is missing or cannot be read, in the order in which it was
	// found.
	Damage []Damage
}

// Damage is something missing from the journal.
type Damage struct {
	Place // Line is 0 where it is not of one line
	// From and To are the first and the last number that is missing: of a
	// line's records if Line is set, else of the partition's packs.
	From, To uint64
	Why      string
}

func (d Damage) String() string {
	if d.Line == 0 {
		return fmt.Sprintf("packs %d to %d of partition %d: %s", d.From, d.To, d.Partition+1, d.Why)
	}
	return fmt.Sprintf("records %d to %d of %v: %s", d.From, d.To, d.Place, d.Why)
}

// purgeBefore are the options that purge a subject's messages before a sequence.
func purgeBefore(subject string, sequence uint64) []jetstream.StreamPurgeOpt {
	return []jetstream.StreamPurgeOpt{jetstream.WithPurgeSubject(subject), jetstream.WithPurgeSequence(sequence)}
}

// reader takes the packs of a journal in order.
type reader struct {
	j     *Journal
	of    []*partition // that are read
	stale []uint64
	fetch func(sequence uint64) ([]byte, time.Time, error) // a message at the broker
	take  func(Record) error
	found Found
	parts []reading
}

// reading is how far a partition has been read.
type reading struct {
	from   uint64 // the first pack that is there; 0 before it
	first  uint64 // that should be there, as the last pack says
	unread uint64 // damaged packs since the last that was read
	why    string // of the last of them
	lines  map[uint64]*lineRead
}

type lineRead struct {
	number uint64
	began  bool // a record of several parts
	kind   byte
	data   []byte
}

// read reads all that the stream has of partitions, and returns the sequences of
// packs whose copies are in, too.
func (j *Journal) read(ctx context.Context, st jetstream.Stream, info *jetstream.StreamInfo, ps []*partition, take func(Record) error) (found *Found, stale []uint64, err error) {
	r := &reader{j: j, of: ps, take: take, parts: make([]reading, len(j.parts))}
	for i := range r.parts {
		r.parts[i].lines = map[uint64]*lineRead{}
	}
	r.found.Bytes = int64(info.State.Bytes)
	if j.rehearsed != nil {
		for _, p := range ps {
			if err := j.rehearsed.Read(ctx, p.index, func(m Message) error {
				return r.message(message{p.subject, m.Sequence, m.At, m.Data, m.Writer})
			}); err != nil {
				return nil, nil, fmt.Errorf("journal: reading: %w", err)
			}
		}
	}
	if info.State.Msgs > 0 {
		if err := r.copies(ctx, st); err != nil {
			return nil, nil, err
		}
		cfg := jetstream.OrderedConsumerConfig{DeliverPolicy: jetstream.DeliverAllPolicy}
		if len(ps) < len(j.parts) {
			for _, p := range ps {
				cfg.FilterSubjects = append(cfg.FilterSubjects, p.subject)
			}
		}
		if err := messages(ctx, st, cfg, r.message); err != nil {
			return nil, nil, err
		}
	}
	for _, p := range ps {
		i := p.index
		rd := &r.parts[i]
		if rd.from > rd.first {
			r.lost(i, rd.first, rd.from-1)
		}
		if rd.unread > 0 { // at the end
			r.lost(i, p.pack.number+1, p.pack.number+rd.unread)
			p.pack.number += rd.unread
		}
		if m := j.marks; m != nil && m.found[i] > p.pack.number {
			r.damaged(Damage{Place{Partition: i}, p.pack.number + 1, m.found[i], "they were durable and are gone from the end"})
			// Numbers are not given twice.
			p.pack.number = m.found[i]
		}
	}
	return &r.found, r.stale, nil
}

func (r *reader) damaged(d Damage) {
	r.found.Damage = append(r.found.Damage, d)
}

// lost says that packs are missing, and why if one of them was there.
func (r *reader) lost(partition int, from, to uint64) {
	why := r.parts[partition].why
	if why == "" {
		why = "they are missing at the broker"
	}
	r.damaged(Damage{Place{Partition: partition}, from, to, why})
}

// message is one of the broker's.
type message struct {
	subject  string
	sequence uint64
	at       time.Time
	data     []byte
	writer   string
}

// heartbeat is how often the broker says that it is at it while it has nothing to
// send. After two without one it is asked again: the first question may have come to a
// broker of a cluster that does not know yet who is to answer it, and then nobody does.
const heartbeat = 500 * time.Millisecond

// messages reads a stream's messages in their order.
func messages(ctx context.Context, st jetstream.Stream, cfg jetstream.OrderedConsumerConfig, take func(message) error) error {
	c, err := st.OrderedConsumer(ctx, cfg)
	if err != nil {
		return fmt.Errorf("journal: reading: %w", err)
	}
	if c.CachedInfo().NumPending == 0 {
		_ = st.DeleteConsumer(ctx, c.CachedInfo().Name) // or it ends by itself
		return nil
	}
	messages, err := c.Messages(jetstream.PullMaxMessages(512), jetstream.PullExpiry(10*time.Second), jetstream.PullHeartbeat(heartbeat))
	if err != nil {
		return fmt.Errorf("journal: reading: %w", err)
	}
	defer func() {
		messages.Stop()
		_ = st.DeleteConsumer(ctx, c.CachedInfo().Name) // or it ends by itself
	}()
	for {
		call, cancel := context.WithTimeout(ctx, time.Minute)
		m, err := messages.Next(jetstream.NextContext(call))
		cancel()
		if err != nil {
			return fmt.Errorf("journal: reading: %w", err)
		}
		meta, err := m.Metadata()
		if err != nil {
			return fmt.Errorf("journal: reading: %w", err)
		}
		if err := take(message{m.Subject(), meta.Sequence.Stream, meta.Timestamp, m.Data(), m.Headers().Get(writerHeader)}); err != nil {
			return err
		}
		if meta.NumPending == 0 {
			return nil
		}
	}
}

func (r *reader) message(m message) error {
	for _, p := range r.of {
		i := p.index
		switch m.subject {
		case copySubject(i):
			return nil // taken in the place of the one that it stands for
		case p.subject:
			p.last = m.sequence
			return r.pack(i, p, m)
		}
	}
	return fmt.Errorf("journal: the stream %s has a message of %q, which is none of its partitions: it is not a journal of this program", streamName, m.subject)
}

// pack takes one pack. A damaged one is as if it was missing, but for the
// partition's last sequence. One that has a copy is what the copy is.
func (r *reader) pack(i int, p *partition, m message) error {
	var next pack
	st := &r.parts[i]
	if err := next.read(m.data); errors.Is(err, errOther) {
		return fmt.Errorf("journal: partition %d, message %d: %w: use the version that wrote it", i+1, m.sequence, err)
	} else if err != nil {
		st.unread, st.why = st.unread+1, fmt.Sprintf("message %d is damaged: %v", m.sequence, err)
		return nil
	}
	if c, ok := p.copies[next.number]; ok && c != m.sequence {
		r.stale = append(r.stale, m.sequence)
		return r.copied(i, p, next.number)
	}
	for _, number := range r.between(p, next.number) {
		if err := r.copied(i, p, number); err != nil {
			return err
		}
	}
	if next.number <= p.pack.number {
		return fmt.Errorf("journal: partition %d, message %d: pack %d comes after pack %d: two servers have written it, or the broker mixed it up; restore it from a copy", i+1, m.sequence, next.number, p.pack.number)
	}
	if st.from == 0 {
		st.from = next.number
	} else if next.number > p.pack.number+1 {
		r.lost(i, p.pack.number+1, next.number-1)
	}
	st.first, st.unread, st.why = next.first, 0, ""
	p.pack = pack{epoch: next.epoch, number: next.number, first: next.first, lines: max(p.pack.lines, next.lines)}
	if m.subject == p.subject {
		p.note(next.number, m.sequence, m.at)
	}
	r.found.Packs++
	for k := range next.records {
		if err := r.part(p, &next.records[k], m.at); err != nil {
			return err
		}
	}
	return nil
}

// part takes a part of a record, and hands the record on when it is whole.
func (r *reader) part(p *partition, x *part, at time.Time) error {
	place := Place{p.index, x.line}
	st := r.parts[p.index].lines[x.line]
	if st == nil {
		st = &lineRead{number: x.number - 1}
		r.parts[p.index].lines[x.line] = st
	}
	switch {
	case x.number <= st.number:
		return fmt.Errorf("journal: record %d of %v comes after record %d: restore the journal from a copy", x.number, place, st.number)
	case x.number > st.number+1:
		r.damaged(Damage{place, st.number + 1, x.number - 1, "they are missing"})
		st.began = false
	}
	st.number = x.number
	l := p.lines[x.line]
	if l == nil {
		l = &Line{p: p, id: x.line, keep: p.pack.number}
		p.lines[x.line] = l
	}
	l.number = x.number
	if x.parts&firstPart != 0 {
		st.began, st.kind, st.data = true, x.kind, nil
	} else if !st.began || st.kind != x.kind {
		return nil // its beginning is missing, or was given up
	}
	if x.parts == firstPart|lastPart {
		st.data = x.data
	} else {
		st.data = append(st.data, x.data...)
	}
	if x.parts&lastPart == 0 {
		return nil
	}
	data := st.data
	st.began, st.data = false, nil
	r.found.Records++
	return r.take(Record{Kind: x.kind, Place: place, Number: x.number, Pack: p.pack.number, Time: at, Data: data})
}
