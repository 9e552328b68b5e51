package journal

import (
	"context"
	"errors"
	"time"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
)

// Log is a partitioned log as the journal writes and reads it: the broker's, or, for
// a rehearsal, one that does what may happen to the broker's.
type Log interface {
	// Publish appends to a partition over the sequence of its last message: one that
	// is not the last is refused with JetStream's error for that. With another error
	// it is not known whether the message is in, or will be.
	Publish(ctx context.Context, partition int, data []byte, writer string, after uint64) (sequence uint64, err error)
	// Last is the last message of a partition; its sequence is 0 if there is none. It
	// may not know yet of what was published just now.
	Last(ctx context.Context, partition int) (Message, error)
	// Wait waits for a while, or until ctx is done.
	Wait(ctx context.Context, d time.Duration)
}

// Message is one of a log. Sequences increase, with gaps.
type Message struct {
	Sequence uint64
	At       time.Time
	Writer   string
	Data     []byte
}

// atBroker is the broker's log.
type atBroker struct{ j *Journal }

func (l atBroker) Publish(ctx context.Context, partition int, data []byte, writer string, after uint64) (uint64, error) {
	b := l.j.broker.Load()
	ctx, cancel := b.asked(ctx)
	defer cancel()
	ack, err := b.js.PublishMsg(ctx, &nats.Msg{Subject: subject(partition), Data: data, Header: nats.Header{writerHeader: {writer}}},
		jetstream.WithExpectLastSequencePerSubject(after), jetstream.WithRetryAttempts(0))
	if err != nil {
		return 0, err
	}
	return ack.Sequence, nil
}

func (l atBroker) Last(ctx context.Context, partition int) (Message, error) {
	ctx, cancel := l.j.broker.Load().asked(ctx)
	defer cancel()
	st, err := l.j.stream(ctx)
	if err != nil {
		return Message{}, err
	}
	m, err := st.GetLastMsgForSubject(ctx, subject(partition))
	if errors.Is(err, jetstream.ErrMsgNotFound) {
		return Message{}, nil
	}
	if err != nil {
		return Message{}, err
	}
	return Message{m.Sequence, m.Time, m.Header.Get(writerHeader), m.Data}, nil
}

func (l atBroker) Wait(ctx context.Context, d time.Duration) {
	select {
	case <-ctx.Done():
	case <-time.After(d):
	}
}
