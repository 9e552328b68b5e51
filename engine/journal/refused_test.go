package journal

import (
	"context"
	"errors"
	"slices"
	"testing"
	"time"
)

// faltering is a log that does not answer the first question, and the first about it.
type faltering struct {
	meanwhile func()
	asked     int
	last      Message
}

func (l *faltering) Publish(_ context.Context, _ int, data []byte, writer string, after uint64) (uint64, error) {
	if l.asked++; l.asked == 2 { // the first is of the takeover
		return 0, errors.New("no answer")
	}
	l.last = Message{Sequence: after + 1, Writer: writer, Data: slices.Clone(data)}
	return after + 1, nil
}

func (l *faltering) Last(context.Context, int) (Message, error) {
	if l.meanwhile != nil {
		return Message{}, errors.New("no answer")
	}
	return l.last, nil
}

func (l *faltering) Wait(context.Context, time.Duration) {
	if l.meanwhile != nil {
		l.meanwhile()
	}
	l.meanwhile = nil
}

func (l *faltering) Read(context.Context, int, func(Message) error) error { return nil }

// TestToldInOrder proves that what is refused at once, while the broker does not
// answer, is told after what came before it: who waits takes the first answer for that
// of the first record.
func TestToldInOrder(t *testing.T) {
	log := new(faltering)
	j := Rehearse(log, 1, "this")
	if _, err := j.Take(t.Context(), 0, func(Record) error { return nil }); err != nil {
		t.Fatal(err)
	}
	line := j.Begin("a")
	type told struct {
		n  byte
		ok bool
	}
	var got []told
	add := func(n byte) {
		line.Append(1, []byte{n}, false, func(_ At, err error) { got = append(got, told{n, err == nil}) })
	}
	add(1)
	log.meanwhile = func() { add(2); add(3) }
	for j.Waits(0) {
		j.Step(0)
	}
	if want := []told{{1, true}, {2, true}, {3, false}}; !slices.Equal(got, want) {
		t.Errorf("told %v, want %v", got, want)
	}
	j.Give(t.Context(), 0)
}
