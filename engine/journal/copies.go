package journal

import (
	"context"
	"fmt"
	"slices"
	"time"

	"github.com/nats-io/nats.go/jetstream"
)

// A pack from which something was erased is replaced: a copy without it, with the
// same number, goes to the partition's other subject, and then the pack itself is
// overwritten at the broker. Who reads takes the copy in the pack's place.

// copies finds the copies that there are. Of two of one pack the later counts:
// something more has been erased from it.
func (r *reader) copies(ctx context.Context, st jetstream.Stream) error {
	r.fetch = func(sequence uint64) ([]byte, time.Time, error) {
		m, err := st.GetMsg(ctx, sequence)
		if err != nil {
			return nil, time.Time{}, fmt.Errorf("journal: reading message %d: %w", sequence, err)
		}
		return m.Data, m.Time, nil
	}
	for _, p := range r.of {
		i := p.index
		cfg := jetstream.OrderedConsumerConfig{DeliverPolicy: jetstream.DeliverAllPolicy, FilterSubjects: []string{copySubject(i)}}
		err := messages(ctx, st, cfg, func(m message) error {
			var c pack
			if err := c.read(m.data); err != nil {
				return fmt.Errorf("journal: message %d, which stands for a pack of partition %d, is damaged: %w", m.sequence, i+1, err)
			}
			if old, ok := p.copies[c.number]; ok {
				r.stale = append(r.stale, old)
			}
			p.copies[c.number] = m.sequence
			return nil
		})
		if err != nil {
			return err
		}
		if len(p.copies) == 0 {
			continue
		}
		// Those of packs that were let go are left over.
		last, err := st.GetLastMsgForSubject(ctx, p.subject)
		if err != nil {
			return fmt.Errorf("journal: reading the last message of partition %d: %w", i+1, err)
		}
		var end pack
		if end.read(last.Data) != nil {
			continue // it is named when it is read
		}
		for number, sequence := range p.copies {
			if number < end.first {
				r.stale = append(r.stale, sequence)
				delete(p.copies, number)
			}
		}
	}
	return nil
}

// between lists the packs before one, after the last that was taken, that have
// copies.
func (r *reader) between(p *partition, before uint64) (numbers []uint64) {
	for number := range p.copies {
		if number > p.pack.number && number < before {
			numbers = append(numbers, number)
		}
	}
	slices.Sort(numbers)
	return numbers
}

// copied takes a copy in the place of its pack.
func (r *reader) copied(i int, p *partition, number uint64) error {
	sequence := p.copies[number]
	data, at, err := r.fetch(sequence)
	if err != nil {
		return err
	}
	return r.pack(i, p, message{subject: copySubject(i), sequence: sequence, at: at, data: data})
}
