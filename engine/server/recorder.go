package server

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"sync"
	"time"

	"google.golang.org/protobuf/proto"

	"leadline/engine/journal"
	leadlinev1 "leadline/proto/leadline/v1"
)

// The journal holds what came of a drive before its session sees it: a batch is
// durable as it came, then taken, then acknowledged. So a session is never ahead
// of its journal, a batch that is refused for want of room has changed nothing,
// and every posterior that goes out can be computed again. While a batch is
// being written, others follow it there, and the owner answers questions.

// The kinds of records. Numbers are not used again.
const (
	kindOpened      = 1 // the drive begins: openedRecord
	kindBatch       = 2 // a Batch, as it came
	kindMeasurement = 3 // a SensorMeasurement beside the batches
	kindEnd         = 4 // the drive ends
	kindWholeCheck  = 5 // checkpointRecord and the session, as earlier versions wrote it
	kindDropped     = 6 // the drive is given up
	kindErase       = 7 // in a line of its own: all of a vehicle is to go, whose name it is
	kindCheckpoint  = 8 // checkpointRecord and the session, compressed
)

// openedRecord is what a drive begins with, in JSON.
type openedRecord struct {
	Version     string    `json:"version"` // of the server
	Build       string    `json:"build"`
	OpenedAt    time.Time `json:"opened_at"`
	Open        []byte    `json:"open"` // the Open, in protobuf
	Fingerprint string    `json:"map_fingerprint"`
	Suite       string    `json:"suite"` // in YAML, with its defaults; empty for none
	MaxCells    int       `json:"max_cells"`
}

// recorder is an owner's side of the journal. Its line is nil where there is no
// journal: then all is as if it was durable at once.
type recorder struct {
	line    *journal.Line
	opened  openedRecord
	waiting []entry // in order
	failed  bool    // what waits was refused
	checks  checks

	poke    chan struct{} // holds a token when results have come
	mu      sync.Mutex
	results []result
}

// entry is what is done once a record is durable, or was refused.
type entry struct {
	recorded bool // it has a record; else it waits for those before it alone
	done     func()
	fail     func(error)
}

type result struct {
	at  journal.At
	err error
}

// windowBatches is how many batches of a drive may be on their way to the
// journal: one is written while another is taken, and two wait.
const windowBatches = 4

func newRecorder(line *journal.Line) *recorder {
	return &recorder{line: line, poke: make(chan struct{}, 1)}
}

// recordIn has an owner record in a line.
func (o *owner) recordIn(l *journal.Line) {
	r := newRecorder(l)
	r.checks.last = o.srv.cfg.Now()
	l.OnPressed(func() {
		r.checks.pressed.Store(true)
		r.wake()
	})
	o.rec = r
}

// busy reports whether something is on its way, and full whether nothing more
// may be.
func (r *recorder) busy() bool { return len(r.waiting) > 0 }
func (r *recorder) full() bool { return len(r.waiting) >= windowBatches }

// encode is a message as it is recorded; nil without a journal.
func (r *recorder) encode(m proto.Message) ([]byte, error) {
	if r.line == nil {
		return nil, nil
	}
	return proto.Marshal(m)
}

// record has a record written; done runs on the owner's goroutine once it is
// durable, in the order of the calls, or fail if it is not to be.
func (o *owner) record(kind byte, data []byte, done func(), fail func(error)) {
	r := o.rec
	if r.line == nil {
		done()
		return
	}
	r.waiting = append(r.waiting, entry{true, done, fail})
	r.line.Append(kind, data, false, r.arrived)
}

// after runs done after what is on its way.
func (o *owner) after(done func()) {
	if !o.rec.busy() {
		done()
		return
	}
	o.rec.waiting = append(o.rec.waiting, entry{done: done})
}

// arrived is called by the journal.
func (r *recorder) arrived(at journal.At, err error) {
	r.mu.Lock()
	r.results = append(r.results, result{at, err})
	r.mu.Unlock()
	r.wake()
}

func (r *recorder) wake() {
	select {
	case r.poke <- struct{}{}:
	default:
	}
}

// settle takes note of what the journal has said.
func (o *owner) settle() {
	r := o.rec
	r.mu.Lock()
	results := r.results
	r.results = nil
	r.mu.Unlock()
	for _, x := range results {
		e := r.waiting[0] // those without a record have been taken
		r.waiting = r.waiting[1:]
		if x.err != nil {
			r.failed = true
			e.fail(x.err)
		} else {
			r.checks.took(x.at)
			e.done()
		}
		for len(r.waiting) > 0 && !r.waiting[0].recorded {
			e := r.waiting[0]
			r.waiting = r.waiting[1:]
			e.done()
		}
	}
	if r.line != nil && o.checkpointDue() {
		o.checkpoint(nil)
	}
	if len(r.waiting) > 0 {
		return
	}
	r.waiting = nil
	if r.failed {
		r.failed = false
		o.submitted = o.sequence
		r.line.Mend()
	}
}

// unrecorded ends the stream, since the journal takes nothing: the drive is as
// it was.
func (o *owner) unrecorded(err error) {
	if o.at != nil && (len(o.out) == 0 || !o.out[len(o.out)-1].last) {
		o.log.Warn("measurements refused", "error", err)
		o.hangup(o.journalRefusal(err))
	}
}

// journalRefusal words why the journal takes nothing.
func (o *owner) journalRefusal(err error) error {
	const later = "send again later what was not acknowledged"
	switch {
	case errors.Is(err, journal.ErrFull):
		return refuse(leadlinev1.Reason_REASON_JOURNAL_FULL, o.about(), "the server has no room to keep measurements: %v: %s", err, later)
	case errors.Is(err, journal.ErrTaken):
		return refuse(leadlinev1.Reason_REASON_JOURNAL_DOWN, o.about(), "this server owns the drive no more: %v: go to that one", err)
	case errors.Is(err, journal.ErrClosed):
		return errStopping
	}
	return refuse(leadlinev1.Reason_REASON_JOURNAL_DOWN, o.about(), "the server cannot keep measurements: %v: %s", err, later)
}

// lostAcknowledged is the refusal of a client that has receipts for more than
// the server has.
func lostAcknowledged(on about, theirs, ours uint64) error {
	return refuse(leadlinev1.Reason_REASON_JOURNAL_DAMAGED, on, "open: the client has a receipt for batch %d of drive %q, and the server has %d: what lies between is lost: open another drive, with replace", theirs, on["drive"], ours)
}

// recordOpening writes what the drive begins with; until it is durable no stream
// is answered.
func (o *owner) recordOpening(opened openedRecord) {
	r := o.rec
	r.opened = opened
	data, err := json.Marshal(opened)
	if err != nil {
		panic("server: " + err.Error()) // there is nothing in it that has no JSON
	}
	o.record(kindOpened, data, func() {}, func(err error) {
		o.stop(o.journalRefusal(err))
		o.srv.forget(o)
	})
}

// record has the journal begin with a new drive; s.mu is held.
func (s *Server) record(o *owner, opened openedRecord) {
	if s.journal == nil {
		return
	}
	if k := s.kept[o.vehicle]; k != nil { // given up
		delete(s.kept, o.vehicle)
		s.dropLine(s.journal.Line(k.place))
	}
	o.recordIn(s.journal.Begin(o.vehicle)) // it is this server's: resumeLocked has seen
	o.recordOpening(opened)
}

// opening is what a drive begins with.
func (s *Server) opening(req *leadlinev1.Open, m *mapUse) (openedRecord, error) {
	out := openedRecord{
		Version: s.cfg.Version, Build: s.cfg.Build, OpenedAt: s.cfg.Now().UTC(),
		Fingerprint: m.fingerprint(), MaxCells: s.cfg.MaxCells,
	}
	var err error
	if out.Open, err = proto.Marshal(req); err != nil {
		return out, fmt.Errorf("open: %w", err)
	}
	out.Suite, err = s.suiteText(req.GetHeader().GetSuite(), m)
	return out, err
}

// suiteText is a suite as it is now, with its defaults; empty for none.
func (s *Server) suiteText(name string, m *mapUse) (string, error) {
	suite := s.cfg.Suites[name]
	if suite == nil {
		return "", nil
	}
	dim := 2
	if m.onRoads() {
		dim = 1
	}
	text, err := suite.YAML(dim)
	return string(text), err
}

// addOne enters one measurement beside what the vehicle sends, or says why it is
// refused; it has been recorded when addOne returns. The message must not change
// any more.
func (o *owner) addOne(ctx context.Context, m *leadlinev1.SensorMeasurement) (*leadlinev1.Refusal, error) {
	data, err := o.rec.encode(m)
	if err != nil {
		return nil, badField("measurement", "measurement: %v", err)
	}
	type outcome struct {
		refused *leadlinev1.Refusal
		err     error
	}
	answer := make(chan outcome, 1)
	err = o.do(ctx, func() {
		o.record(kindMeasurement, data, func() {
			if o.ended {
				answer <- outcome{err: refuse(leadlinev1.Reason_REASON_DRIVE_ENDED, o.about(), "drive %q of vehicle %q has ended: nothing can be added", o.drive, o.vehicle)}
				return
			}
			answer <- outcome{refused: o.takeOne(m)}
		}, func(err error) { answer <- outcome{err: o.journalRefusal(err)} })
	})
	if err != nil {
		return nil, err
	}
	select {
	case a := <-answer:
		return a.refused, a.err
	case <-o.dead:
		return nil, o.err
	case <-ctx.Done():
		return nil, ctx.Err()
	}
}

// takeOne hands a measurement that is durable to the session.
func (o *owner) takeOne(m *leadlinev1.SensorMeasurement) *leadlinev1.Refusal {
	var n news
	refused := o.enter(&n, 0, m)
	o.tell(&n)
	return refused
}

// dropLine writes that a drive is given up; nobody waits for it.
func (s *Server) dropLine(l *journal.Line) {
	if l == nil {
		return
	}
	l.Append(kindDropped, nil, true, func(_ journal.At, err error) {
		if err == nil {
			l.Release()
		}
	})
}

// again takes a record that the journal held.
func (o *owner) again(r journal.Record) error {
	wrong := func(err error) error {
		return refuse(leadlinev1.Reason_REASON_JOURNAL_DAMAGED, o.about(), "drive %q of vehicle %q: record %d of the server's journal cannot be read: %v: open another drive, with replace", o.drive, o.vehicle, r.Number, err)
	}
	switch r.Kind {
	case kindBatch:
		b := new(leadlinev1.Batch)
		if err := proto.Unmarshal(r.Data, b); err != nil {
			return wrong(err)
		}
		if !o.ended && b.GetSequence() != o.sequence+1 {
			return wrong(fmt.Errorf("it is batch %d after batch %d", b.GetSequence(), o.sequence))
		}
		o.takeBatch(b)
	case kindMeasurement:
		m := new(leadlinev1.SensorMeasurement)
		if err := proto.Unmarshal(r.Data, m); err != nil {
			return wrong(err)
		}
		if !o.ended {
			o.takeOne(m)
		}
	case kindEnd:
		o.closing()
	}
	o.rec.checks.took(journal.At{Pack: r.Pack, Number: r.Number})
	return nil
}
