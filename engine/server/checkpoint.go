package server

import (
	"time"

	"leadline/engine/journal"
	"leadline/engine/session"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// checkpointRecord is what a checkpoint has beside the session, in JSON.
type checkpointRecord struct {
	After uint64 `json:"after"` // number of the last record that it holds
}

func (c *histories) checkpoint(*history, journal.Record) error { return nil }

func headerOf(o *leadlinev1.Open) (wire.Header, error) { return wire.ToHeader(o.GetHeader()) }

// replay makes a drive's owner and has it take what the journal holds.
func (s *Server) replay(h *history, m *mapUse, cfg session.Config, beside *searches) (*owner, error) {
	sess, err := s.newSession(cfg)
	if err != nil {
		return nil, err
	}
	o := newOwner(s, h.open, m, sess, beside)
	o.openedAt, o.streams, o.idleSince = h.opened.OpenedAt, 0, s.cfg.Now()
	o.rec = newRecorder(s.journal.Line(h.place))
	o.rec.opened, o.rec.checkpointed = h.opened, time.Now()
	s.hub.begin(o.subject)
	for _, r := range h.records {
		if err := o.again(r); err != nil {
			return nil, err
		}
	}
	o.submitted = o.sequence
	return o, nil
}
