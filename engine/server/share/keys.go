package share

import (
	"context"

	"github.com/nats-io/nats.go/jetstream"
)

// Keys are values under keys, each with a revision: the broker's, or, for a
// rehearsal, some that do what may happen to the broker's. Their errors are
// JetStream's.
type Keys interface {
	Get(ctx context.Context, key string) (Entry, error)
	// Update and Delete go over a revision, and are refused if it is not the last;
	// Create and an Update over 0 make a key that is not there.
	Update(ctx context.Context, key string, value []byte, revision uint64) (uint64, error)
	Create(ctx context.Context, key string, value []byte) (uint64, error)
	Delete(ctx context.Context, key string, revision uint64) error
}

// Entry is what a key says, or that it is gone.
type Entry struct {
	Key      string
	Value    []byte
	Revision uint64
	Gone     bool
}

func entry(e jetstream.KeyValueEntry) Entry {
	return Entry{e.Key(), e.Value(), e.Revision(), e.Operation() != jetstream.KeyValuePut}
}

// atBroker are the broker's.
type atBroker struct{ kv jetstream.KeyValue }

func (b atBroker) Get(ctx context.Context, key string) (Entry, error) {
	e, err := b.kv.Get(ctx, key)
	if err != nil {
		return Entry{}, err
	}
	return entry(e), nil
}

func (b atBroker) Update(ctx context.Context, key string, value []byte, revision uint64) (uint64, error) {
	return b.kv.Update(ctx, key, value, revision)
}

func (b atBroker) Create(ctx context.Context, key string, value []byte) (uint64, error) {
	return b.kv.Create(ctx, key, value)
}

func (b atBroker) Delete(ctx context.Context, key string, revision uint64) error {
	return b.kv.Delete(ctx, key, jetstream.LastRevision(revision))
}
