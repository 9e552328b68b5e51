package journal

import (
	"context"
	"fmt"

	"github.com/nats-io/nats.go/jetstream"
)

// Writer is a server's turn at writing a partition. With another one comes a
// greater epoch.
type Writer struct {
	Name  string // of the server's journal
	Epoch uint64
	Packs int
}

// Writers reads from a broker's log who has written each of a journal's partitions,
// in order: to see afterwards that one did at a time.
func Writers(ctx context.Context, b Broker) ([][]Writer, error) {
	conn, err := b.Dial("leadline writers")
	if err != nil {
		return nil, fmt.Errorf("journal: %w", err)
	}
	defer conn.Close()
	js, err := jetstream.New(conn, jetstream.WithDefaultTimeout(callTimeout))
	if err != nil {
		return nil, fmt.Errorf("journal: %w", err)
	}
	st, err := js.Stream(ctx, streamName)
	if err != nil {
		return nil, fmt.Errorf("journal: opening the broker's stream %s: %w", streamName, err)
	}
	n, err := partitions(st.CachedInfo())
	if err != nil {
		return nil, err
	}
	out := make([][]Writer, n)
	for i := range out {
		cfg := jetstream.OrderedConsumerConfig{DeliverPolicy: jetstream.DeliverAllPolicy, FilterSubjects: []string{subject(i)}}
		err := messages(ctx, st, cfg, func(m message) error {
			var k pack
			if err := k.read(m.data); err != nil {
				return fmt.Errorf("journal: message %d: %w", m.sequence, err)
			}
			last := len(out[i]) - 1
			if last < 0 || out[i][last].Name != m.writer || out[i][last].Epoch != k.epoch {
				out[i] = append(out[i], Writer{Name: m.writer, Epoch: k.epoch})
				last++
			}
			out[i][last].Packs++
			return nil
		})
		if err != nil {
			return nil, err
		}
	}
	return out, nil
}
