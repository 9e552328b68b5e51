package server

import (
	"bytes"
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"iter"
	"time"

	"github.com/nats-io/nats.go/jetstream"

	"leadline/engine/journal"
	"leadline/engine/server/share"
)

// The broker of a rehearsal: logs and keys that lose questions and answers, are late
// and are behind, as those of a cluster may, and keep what they have said is in.

// thread is what would be a goroutine: it runs until it waits for the broker or the
// time, and is resumed by the scheduler.
type thread struct {
	yield func(time.Duration) bool
	next  func() (time.Duration, bool)
	stop  func()
	wake  time.Time
	over  bool
}

// killed unwinds a thread whose server is dead.
type killed struct{}

func newThread(f func()) *thread {
	t := new(thread)
	t.next, t.stop = iter.Pull(iter.Seq[time.Duration](func(yield func(time.Duration) bool) {
		t.yield = yield
		defer func() {
			if r := recover(); r != nil && r != (killed{}) {
				panic(r)
			}
		}()
		f()
	}))
	return t
}

// resume runs a thread until it waits.
func (r *rehearsal) resume(t *thread) {
	was := r.at
	r.at = t
	d, more := t.next()
	r.at = was
	t.wake, t.over = r.now.Add(d), !more
}

// sleep is called within a thread.
func (r *rehearsal) sleep(d time.Duration) {
	if !r.at.yield(d) {
		panic(killed{})
	}
}

func (r *rehearsal) ms(least, most int) time.Duration {
	return time.Duration(least+r.rng.IntN(most-least+1)) * time.Millisecond
}

// chance is true once in n times while there are faults.
func (r *rehearsal) chance(n int) bool { return r.faults && r.rng.IntN(n) == 0 }

var errNoAnswer = errors.New("rehearsal: no answer")

func wrongLast() error {
	return &jetstream.APIError{ErrorCode: jetstream.JSErrCodeStreamWrongLastSequence}
}

// ask has something done at the broker for a server: in time, late, or never, and the
// answer comes or does not.
func (r *rehearsal) ask(ctx context.Context, of *node, do func() error) error {
	r.sleep(r.ms(1, 8))
	if r.now.Before(of.cut) || r.chance(60) { // the question is lost, or on its way for long
		if r.chance(3) {
			r.late = append(r.late, lateDo{r.now.Add(r.ms(100, 12_000)), do})
		}
		r.sleep(r.ms(500, 2500))
		return errNoAnswer
	}
	err := do()
	if r.chance(60) { // the answer is
		r.sleep(r.ms(500, 2500))
		return errNoAnswer
	}
	r.sleep(r.ms(1, 8))
	if ctx.Err() != nil {
		return errNoAnswer
	}
	return err
}

type lateDo struct {
	at time.Time
	do func() error
}

// logOf is the log as a server reaches it.
type logOf struct {
	r *rehearsal
	n *node
}

func (l logOf) Publish(ctx context.Context, partition int, data []byte, writer string, after uint64) (sequence uint64, err error) {
	data = bytes.Clone(data)
	err = l.r.ask(ctx, l.n, func() error {
		sequence, err = l.r.append(partition, data, writer, after)
		return err
	})
	return sequence, err
}

// append is the log's: over a sequence.
func (r *rehearsal) append(partition int, data []byte, writer string, after uint64) (uint64, error) {
	log := r.logs[partition]
	last := journal.Message{}
	if len(log) > 0 {
		last = log[len(log)-1]
	}
	if last.Sequence != after && r.plant != plantUnfenced {
		return 0, wrongLast()
	}
	r.sequence++
	if r.plant == plantEarly && r.chance(8) { // said to be in, and is not
		return r.sequence, nil
	}
	r.logs[partition] = append(log, journal.Message{Sequence: r.sequence, At: r.now, Writer: writer, Data: data})
	if last.Sequence > 0 {
		was, is := binary.LittleEndian.Uint64(last.Data[4:]), binary.LittleEndian.Uint64(data[4:])
		if is < was || is == was && writer != last.Writer {
			r.fail("partition %d: a pack of epoch %d by %s follows one of epoch %d by %s", partition, is, writer, was, last.Writer)
		}
	}
	return r.sequence, nil
}

// known is the log as somebody sees it who may be behind.
func (r *rehearsal) known(partition int) []journal.Message {
	log := r.logs[partition]
	if n := len(log); n > 0 && r.chance(10) {
		return log[:n-1-r.rng.IntN(min(n, 2))]
	}
	return log
}

func (l logOf) Last(ctx context.Context, partition int) (m journal.Message, err error) {
	err = l.r.ask(ctx, l.n, func() error {
		if log := l.r.known(partition); len(log) > 0 {
			m = log[len(log)-1]
		}
		return nil
	})
	return m, err
}

func (l logOf) Read(ctx context.Context, partition int, take func(journal.Message) error) error {
	var log []journal.Message
	if err := l.r.ask(ctx, l.n, func() error { log = l.r.known(partition); return nil }); err != nil {
		return err
	}
	for i, m := range log {
		if i%16 == 15 {
			l.r.sleep(l.r.ms(0, 2))
		}
		if err := take(m); err != nil {
			return err
		}
	}
	return nil
}

func (l logOf) Wait(_ context.Context, d time.Duration) { l.r.sleep(d) }

// keysOf are the keys as a server reaches them.
type keysOf struct {
	r *rehearsal
	n *node
}

func (k keysOf) Get(ctx context.Context, key string) (e share.Entry, err error) {
	err = k.r.ask(ctx, k.n, func() error {
		var ok bool
		if e, ok = k.r.keys[key]; !ok || e.Gone {
			return jetstream.ErrKeyNotFound
		}
		return nil
	})
	return e, err
}

func (k keysOf) put(ctx context.Context, e share.Entry, over func(share.Entry) bool) (revision uint64, err error) {
	e.Value = bytes.Clone(e.Value)
	err = k.r.ask(ctx, k.n, func() error {
		if !over(k.r.keys[e.Key]) {
			return wrongLast()
		}
		e.Revision = uint64(len(k.r.heard) + 1)
		k.r.keys[e.Key] = e
		k.r.heard = append(k.r.heard, e)
		revision = e.Revision
		return nil
	})
	return revision, err
}

func (k keysOf) Update(ctx context.Context, key string, value []byte, revision uint64) (uint64, error) {
	return k.put(ctx, share.Entry{Key: key, Value: value}, func(e share.Entry) bool { return e.Revision == revision })
}

func (k keysOf) Create(ctx context.Context, key string, value []byte) (uint64, error) {
	return k.put(ctx, share.Entry{Key: key, Value: value}, func(e share.Entry) bool { return e.Revision == 0 || e.Gone })
}

func (k keysOf) Delete(ctx context.Context, key string, revision uint64) error {
	_, err := k.put(ctx, share.Entry{Key: key, Gone: true}, func(e share.Entry) bool { return e.Revision == revision })
	return err
}

// fail notes the first thing that must not be.
func (r *rehearsal) fail(format string, args ...any) {
	if r.wrong == nil {
		r.wrong = fmt.Errorf("after %.1f s: "+format, append([]any{r.now.Sub(rehearsalBegins).Seconds()}, args...)...)
	}
}
