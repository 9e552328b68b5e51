package journal

import (
	"fmt"
	"time"
)

// Record is one that was read.
type Record struct {
	Kind byte
	Place
	// Number counts the parts of a line from 1; a record of several has that of
	// its last. Pack is the pack that it is in, or its last part.
	Number, Pack uint64
	// Time is when the pack was written, by the broker's clock.
	Time time.Time
	Data []byte
}

// At is where a record is: its pack in the partition, or that of its last part,
// and its number in the line. First is the pack of its first part.
type At struct{ Pack, Number, First uint64 }

// Place names a line.
type Place struct {
	Partition int
	Line      uint64
}

// Line is what records belong to: see Journal.Begin. Its methods may be called
// from any goroutine; records of one line are in the order of Append.
type Line struct {
	p      *partition
	id     uint64
	number uint64 // of the last record that is in, of the committer
	first  uint64 // pack of the first part of the last record, of the committer
	// Guarded by p.mu: the first pack that is needed, and why nothing is taken.
	keep    uint64
	pressed bool // has been asked to need less
	broken  error
	ask     func()
}

// Place names the line in the journal.
func (l *Line) Place() Place { return Place{l.p.index, l.id} }

// Append puts a record into the queue of its partition. Once it is durable, or
// refused, done is called with where it is, or why; it must not wait for
// anything. The calls for one line come in its order. After one with an
// error all that follow have it, too, until Mend.
//
// Of a record that is urgent, since it lets others go, less room is asked.
func (l *Line) Append(kind byte, data []byte, urgent bool, done func(At, error)) {
	l.p.append(l, kind, data, urgent, done)
}

// Mend has a line take records again, after those that were refused.
func (l *Line) Mend() {
	l.p.mu.Lock()
	defer l.p.mu.Unlock()
	l.broken = nil
}

// Keep says that of the line's records those before a pack are not needed any
// more. What it needs is kept.
func (l *Line) Keep(pack uint64) {
	l.p.mu.Lock()
	defer l.p.mu.Unlock()
	l.keep, l.pressed = max(l.keep, pack), false
}

// OnPressed has ask called, from another goroutine, when the journal needs room
// that the line stands in the way of: it should write what it needs anew and
// then Keep that.
func (l *Line) OnPressed(ask func()) {
	l.p.mu.Lock()
	defer l.p.mu.Unlock()
	l.ask = ask
}

// Release says that none of the line's records are needed any more.
func (l *Line) Release() {
	l.p.mu.Lock()
	defer l.p.mu.Unlock()
	delete(l.p.lines, l.id)
}

func (p Place) String() string { return fmt.Sprintf("line %d of partition %d", p.Line, p.Partition+1) }
