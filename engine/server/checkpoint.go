package server

import (
	"encoding/binary"
	"encoding/json"
	"errors"
	"fmt"
	"slices"
	"sync"
	"sync/atomic"
	"time"

	"github.com/klauspost/compress/zstd"

	"leadline/engine/journal"
	"leadline/engine/session"
	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// A checkpoint bounds what a server that starts has to replay, and lets older
// records go. A drive writes one when it has taken something since the last and
// that is checkpointEvery ago, or checkpointAfter records; when the journal
// needs the room; when too much would have to be computed again (see debt.go);
// and when the server stops in order.
const (
	checkpointEvery = 30 * time.Second
	checkpointAfter = 20_000
)

// checkpointRecord is what a checkpoint has before the session, in JSON, after
// its length (uint32, little endian). The session is a frame of Zstandard
// (RFC 8878).
type checkpointRecord struct {
	Version    string       `json:"version"`
	Build      string       `json:"build"`
	Opened     openedRecord `json:"opened"`
	After      uint64       `json:"after"` // number of the last record that it holds
	Sequence   uint64       `json:"sequence"`
	Malformed  uint64       `json:"malformed"`
	Posteriors uint64       `json:"posteriors"`
	Ended      bool         `json:"ended"`
	Recomputed bool         `json:"recomputed"`
	Trail      []byte       `json:"trail,omitempty"` // what the drive was like so far, packed
}

// checkpointer is a session that can be written.
type checkpointer interface{ Checkpoint() []byte }

var _ checkpointer = (*session.Session)(nil)

// checks is when an owner has written checkpoints.
type checks struct {
	taken   journal.At // the last record that the session has taken
	since   int        // how many it has taken since the last checkpoint
	last    time.Time
	writing bool
	pressed atomic.Bool  // the journal needs room, or too much would have to be replayed
	debt    atomic.Int64 // what it would take to replay, ns
	size    atomic.Int64 // of the last checkpoint
	asked   time.Time    // when one was asked for, for its debt; srv.mu guards it
}

func (c *checks) took(at journal.At) {
	c.taken = at
	c.since++
}

func (o *owner) checkpointDue() bool {
	c := &o.rec.checks
	if _, can := o.sess.(checkpointer); !can || c.writing || c.taken.Number == 0 {
		return false
	}
	return c.pressed.Load() || c.since >= checkpointAfter ||
		c.since > 0 && o.srv.cfg.Now().Sub(c.last) >= checkpointEvery
}

// checkpoint writes one; done, if set, is called once it is durable or is not to
// be, from another goroutine.
func (o *owner) checkpoint(done func()) {
	c := &o.rec.checks
	head, err := json.Marshal(checkpointRecord{
		Version: o.srv.cfg.Version, Build: o.srv.cfg.Build, Opened: o.rec.opened, After: c.taken.Number,
		Sequence: o.sequence, Malformed: o.malformed, Posteriors: o.posteriors, Ended: o.ended, Recomputed: o.subject.recomputed, Trail: o.packTrailSoFar(),
	})
	if err != nil {
		panic("server: " + err.Error()) // there is nothing in it that has no JSON
	}
	data := binary.LittleEndian.AppendUint32(nil, uint32(len(head)))
	data = packer().EncodeAll(o.sess.(checkpointer).Checkpoint(), append(data, head...))
	c.writing, c.since, c.last = true, 0, o.srv.cfg.Now()
	c.pressed.Store(false)
	c.debt.Store(0)
	c.size.Store(int64(len(data)))
	r, line, from := o.rec, o.rec.line, c.taken.Pack
	alone := !r.busy() // nothing is on its way: what comes is after it
	r.waiting = append(r.waiting, entry{true, func() { c.writing, c.since = false, c.since-1 }, func(error) { c.writing = false }})
	line.Append(kindCheckpoint, data, true, func(at journal.At, err error) {
		if err == nil {
			if alone {
				from = at.First
			}
			line.Keep(from)
		}
		r.arrived(at, err)
		if done != nil {
			done()
		}
	})
}

// lastCheckpoint writes one before the server stops, and waits for it.
func (o *owner) lastCheckpoint() {
	c := &o.rec.checks
	if _, can := o.sess.(checkpointer); !can || o.rec.line == nil || c.since == 0 {
		return
	}
	done := make(chan struct{})
	o.checkpoint(func() { close(done) })
	select {
	case <-done:
	case <-time.After(10 * time.Second): // what it would have held is replayed
	}
}

// checkpoint takes one that was read. What it holds need not be replayed, if it
// is of this build.
func (c *histories) checkpoint(h *history, r journal.Record) error {
	wrong := func(err error) error {
		return fmt.Errorf("journal: record %d of %v, a checkpoint, cannot be read: %w", r.Number, r.Place, err)
	}
	check, state, err := checkpointOf(r.Data)
	if err != nil {
		return wrong(err)
	}
	if h.open == nil {
		if err := h.begin(check.Opened); err != nil {
			return wrong(err)
		}
	}
	h.check, h.state, h.packed = check, slices.Clone(state), r.Kind == kindCheckpoint
	if check.Build == c.build || !h.whole {
		h.records = slices.DeleteFunc(h.records, func(r journal.Record) bool { return r.Number <= check.After })
		h.whole = false
	}
	return nil
}

// checkpointOf takes a checkpoint apart.
func checkpointOf(data []byte) (check *checkpointRecord, state []byte, err error) {
	if len(data) < 4 {
		return nil, nil, errors.New("it is cut off")
	}
	n := int(binary.LittleEndian.Uint32(data))
	if n > len(data)-4 {
		return nil, nil, errors.New("it is cut off")
	}
	check = new(checkpointRecord)
	return check, data[4+n:], json.Unmarshal(data[4:4+n], check)
}

// replay makes a drive's owner: from its checkpoint, if there is one of this
// build; else from its beginning, and if that is gone from the checkpoint of
// another build. Then it takes what the journal holds after that.
func (s *Server) replay(h *history, m *mapUse, cfg session.Config, beside *searches) (*owner, error) {
	on := about{"vehicle": h.vehicle(), "drive": h.open.GetDrive()}
	whole := h.whole && len(h.damage) == 0
	from := h.check
	if from != nil && from.Build != s.cfg.Build && whole {
		from = nil
	}
	var sess Session
	var err error
	if from == nil {
		sess, err = s.newSession(h.open.GetHeader().GetTraffic(), cfg)
	} else if sess, err = s.restoreSession(cfg, h); err != nil {
		err = refuse(leadlinev1.Reason_REASON_JOURNAL_DAMAGED, on, "the checkpoint of drive %q of vehicle %q, by version %s, cannot be used: %v, and the records before it are gone: use that version, or open another drive, with replace", h.open.GetDrive(), h.vehicle(), from.Version, err)
	}
	if err != nil {
		return nil, err
	}
	o := newOwner(s, h.open, m, sess, beside)
	o.openedAt, o.streams, o.idleSince, o.silentSince = h.opened.OpenedAt, 0, s.cfg.Now(), h.lastAt
	o.recordIn(s.journal.Line(h.place))
	o.rec.opened = h.opened
	o.subject.recomputed = h.opened.Build != s.cfg.Build
	if h.check != nil {
		o.subject.recomputed = h.check.Recomputed || h.check.Build != s.cfg.Build
	}
	s.begins(o)
	if from != nil {
		o.goOn(from)
	}
	for _, r := range h.records {
		if from != nil && r.Number <= from.After {
			continue
		}
		if err := o.again(r); err != nil {
			return nil, err
		}
	}
	o.submitted = o.sequence
	return o, nil
}

// restoreSession makes the session of a drive's checkpoint.
func (s *Server) restoreSession(cfg session.Config, h *history) (Session, error) {
	state := h.state
	if h.packed {
		var err error
		if state, err = unpacker().DecodeAll(state, nil); err != nil {
			return nil, err
		}
	}
	if h.open.GetHeader().GetTraffic() {
		return restoreRoad(cfg.Suite, state)
	}
	return s.cfg.RestoreSession(cfg, state)
}

// maxState bounds what a checkpoint may unpack to.
const maxState = 1 << 30

// packer and unpacker are for all goroutines. Half the bytes are twice as many
// drives that a server reads in a second when it starts, and the fastest level
// costs less than the disk does.
var (
	packer = sync.OnceValue(func() *zstd.Encoder {
		e, err := zstd.NewWriter(nil, zstd.WithEncoderLevel(zstd.SpeedFastest), zstd.WithLowerEncoderMem(true))
		if err != nil {
			panic("server: " + err.Error()) // the options are constant
		}
		return e
	})
	unpacker = sync.OnceValue(func() *zstd.Decoder {
		d, err := zstd.NewReader(nil, zstd.WithDecoderConcurrency(0), zstd.WithDecoderMaxMemory(maxState))
		if err != nil {
			panic("server: " + err.Error())
		}
		return d
	})
)

// goOn makes an owner what it was at a checkpoint.
func (o *owner) goOn(from *checkpointRecord) {
	o.sequence, o.malformed, o.posteriors, o.ended = from.Sequence, from.Malformed, from.Posteriors, from.Ended
	o.rec.checks.taken.Number = from.After
	if from.Trail != nil && !o.ended {
		if err := o.trail.restore(from.Trail, from.Posteriors); err != nil {
			o.log.Error("drive's past is lost", "error", err)
		}
	}
	if p := o.sess.Latest(); p != nil {
		o.latest.Store(p)
		o.told([]*summary.Posterior{p}, nil)
	}
	if o.ended {
		o.finished, o.past = true, from.Trail
		o.farewell(true, o.sess.Hash(), "the drive has ended")
	}
}
