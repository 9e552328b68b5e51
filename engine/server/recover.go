package server

import (
	"context"
	"encoding/json"
	"fmt"
	"runtime"
	"runtime/debug"
	"slices"
	"strings"
	"sync"
	"time"

	"google.golang.org/protobuf/proto"

	"leadline/engine/journal"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// history is what the journal holds of one drive.
type history struct {
	place   journal.Place
	opened  openedRecord
	open    *leadlinev1.Open // nil: its beginning is not there
	records []journal.Record // to be taken, after the checkpoint if there is one
	check   *checkpointRecord
	state   []byte // of the checkpoint: the session
	packed  bool   // it is compressed
	whole   bool   // from the drive's beginning on
	first   uint64 // number of the first record that was there
	last    uint64
	dropped bool
	lastAt  time.Time // when the last record was written, by the broker's clock
	erase   string    // the line is of no drive: this vehicle is to be erased
	before  bool      // an erasure that began later takes it
	damage  []journal.Damage
	lacking []string // packs of its partition that are missing
}

func (h *history) vehicle() string { return h.open.GetHeader().GetVehicle() }

// histories collects what is read, by line.
type histories struct {
	build string
	of    map[journal.Place]*history
}

// take takes one record.
func (c *histories) take(r journal.Record) error {
	h := c.of[r.Place]
	if h == nil {
		h = &history{place: r.Place, first: r.Number}
		c.of[r.Place] = h
	}
	h.last, h.lastAt = r.Number, r.Time
	switch r.Kind {
	case kindErase:
		h.erase = string(r.Data)
	case kindOpened:
		var opened openedRecord
		err := json.Unmarshal(r.Data, &opened)
		if err == nil {
			err = h.begin(opened)
		}
		if err != nil {
			return fmt.Errorf("journal: record %d of %v: what the drive began with cannot be read: %w", r.Number, r.Place, err)
		}
		h.whole = true
	case kindDropped:
		h.dropped, h.records, h.state = true, nil, nil
	case kindCheckpoint, kindWholeCheck:
		return c.checkpoint(h, r)
	case kindBatch, kindMeasurement, kindEnd:
		r.Data = slices.Clone(r.Data)
		h.records = append(h.records, r)
	default:
		return fmt.Errorf("journal: record %d of %v has kind %d, which this version does not know: use the version that wrote it", r.Number, r.Place, r.Kind)
	}
	return nil
}

func (h *history) begin(opened openedRecord) error {
	h.opened, h.open = opened, new(leadlinev1.Open)
	return proto.Unmarshal(opened.Open, h.open)
}

// lost says why what is there does not make the drive; "" if it does.
func (h *history) lost() string {
	if h.open == nil {
		return fmt.Sprintf("its records before number %d are gone, and no checkpoint holds them", h.first)
	}
	var parts []string
	for _, d := range h.damage {
		if h.check == nil || d.To > h.check.After {
			parts = append(parts, d.String())
		}
	}
	return strings.Join(parts, "; ")
}

// openJournal opens the journal and goes on with the drives that it holds.
func (s *Server) openJournal() error {
	c := &histories{build: s.cfg.Build, of: map[journal.Place]*history{}}
	began := time.Now()
	o := *s.cfg.Journal
	o.Log = s.cfg.Log
	o.MaxAge = s.cfg.KeepFor
	if s.shared != nil {
		o.Lost = s.lost
	}
	j, found, err := journal.Open(context.Background(), o, c.take)
	if err != nil {
		return err
	}
	s.journal = j
	if err := s.goOnWith(c, found); err != nil {
		return err
	}
	st := j.State()
	s.cfg.Log.Info("journal opened", "where", st.Where, "epoch", st.Epoch, "partitions", st.Partitions, "records", found.Records, "bytes", found.Bytes,
		"drives", len(s.owners), "kept", len(s.kept), "seconds", time.Since(began).Seconds())
	return nil
}

// goOnWith goes on with what was read.
func (s *Server) goOnWith(c *histories, found *journal.Found) error {
	j := s.journal
	newest := map[string]*history{}
	var old []*history
	for _, d := range found.Damage {
		s.cfg.Log.Error("journal is damaged", "what", d.String())
		if h := c.of[d.Place]; h != nil {
			h.damage = append(h.damage, d)
		}
		for _, h := range c.of {
			if d.Line == 0 && h.place.Partition == d.Partition {
				h.lacking = append(h.lacking, d.String())
			}
		}
	}
	erasures := c.erasures()
	for _, h := range c.of {
		switch {
		case h.before || h.erase != "":
			continue
		case h.dropped:
			j.Line(h.place).Release()
			s.findEnded(h)
			continue
		case h.open == nil:
			s.cfg.Log.Error("drive of the journal is lost", "line", h.place.String(), "why", h.lost())
			continue
		}
		if n := newest[h.vehicle()]; n == nil || n.place.Line < h.place.Line {
			newest[h.vehicle()], h = h, n
		}
		if h != nil { // replaced by a later one
			old = append(old, h)
		}
	}
	for _, h := range old {
		s.findEnded(h)
		s.dropLine(j.Line(h.place))
	}
	for _, h := range erasures { // a server has begun and not ended it
		marker := j.Line(h.place)
		if marker == nil {
			continue // another one has taken it
		}
		if _, err := s.eraseRecords(context.Background(), h.erase, marker); err != nil {
			return fmt.Errorf("a vehicle that is to be erased is still in the journal: %w", err)
		}
	}
	s.restoreAll(newest)
	return nil
}

// erasures are the lines of erasures that have begun. What they take is marked.
func (c *histories) erasures() (lines []*history) {
	for _, e := range c.of {
		if e.erase == "" {
			continue
		}
		lines = append(lines, e)
		for _, h := range c.of {
			if h.open != nil && h.vehicle() == e.erase && h.place.Line < e.place.Line {
				h.before = true
			}
		}
	}
	return lines
}

// restoreAll goes on with drives, several at once.
func (s *Server) restoreAll(of map[string]*history) {
	todo := make(chan *history)
	var workers sync.WaitGroup
	for range runtime.GOMAXPROCS(0) {
		workers.Go(func() {
			for h := range todo {
				s.restore(h)
			}
		})
	}
	for _, h := range of {
		todo <- h
	}
	close(todo)
	workers.Wait()
}

// restore goes on with a drive, or keeps it aside with the reason why not.
func (s *Server) restore(h *history) {
	o, err := s.revive(h)
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.closed { // while a partition is taken over
		if err == nil {
			s.roads.drop(o, true)
			s.hub.moved(o.subject)
			s.releaseMap(o.m)
		}
		return
	}
	if err != nil {
		s.cfg.Log.Error("drive cannot go on", "vehicle", h.vehicle(), "drive", h.open.GetDrive(), "error", err)
		s.kept[h.vehicle()] = &kept{h, err}
		return
	}
	delete(s.kept, h.vehicle())
	s.owners[h.vehicle()] = o
	s.ended.Add(1)
	s.runs(o)
}

// kept is a drive of the journal that cannot go on, and why.
type kept struct {
	*history
	err error
}

// revive makes the owner of a drive as it was.
func (s *Server) revive(h *history) (o *owner, err error) {
	on := about{"vehicle": h.vehicle(), "drive": h.open.GetDrive(), "map": h.open.GetHeader().GetMap()}
	if lost := h.lost(); lost != "" {
		return nil, refuse(leadlinev1.Reason_REASON_JOURNAL_DAMAGED, on, "drive %q of vehicle %q is damaged in the server's journal: %s: open another drive, with replace", h.open.GetDrive(), h.vehicle(), lost)
	}
	m := &mapUse{sessions: 1} // of a road's traffic
	if !h.open.GetHeader().GetTraffic() {
		m = s.atlas.acquireFingerprint(h.open.GetHeader().GetMap(), h.opened.Fingerprint)
	}
	if m == nil && s.shared != nil {
		if m, err = s.fetchMap(context.Background(), h.open.GetHeader().GetMap(), h.opened.Fingerprint, false); err != nil {
			s.cfg.Log.Error("map cannot be had from other servers", "map", h.open.GetHeader().GetMap(), "error", err)
		}
	}
	if m == nil {
		return nil, refuse(leadlinev1.Reason_REASON_UNKNOWN_MAP, on, "drive %q of vehicle %q is in the server's journal and its map is not here: %q with the fingerprint %s: start the server with that map, or open another drive, with replace",
			h.open.GetDrive(), h.vehicle(), h.open.GetHeader().GetMap(), h.opened.Fingerprint)
	}
	defer func() {
		if r := recover(); r != nil {
			s.cfg.Log.Error("session failed", "vehicle", h.vehicle(), "panic", r, "stack", string(debug.Stack()))
			err = refuse(leadlinev1.Reason_REASON_SESSION_FAILED, on, "the session of vehicle %q failed while it was restored: report it with the server's log, and open another drive, with replace", h.vehicle())
		}
		if err != nil {
			s.releaseMap(m)
		}
	}()
	suite, err := s.suiteOf(h, m)
	if err != nil {
		return nil, refuse(leadlinev1.Reason_REASON_JOURNAL_DAMAGED, on, "drive %q of vehicle %q: its suite in the journal: %v", h.open.GetDrive(), h.vehicle(), err)
	}
	wh, err := wire.ToHeader(h.open.GetHeader())
	if err != nil {
		return nil, refuse(leadlinev1.Reason_REASON_JOURNAL_DAMAGED, on, "drive %q of vehicle %q: its header in the journal: %v", h.open.GetDrive(), h.vehicle(), err)
	}
	beside := &searches{slots: s.searching, waiting: &s.searchesWaiting}
	cfg := session.Config{
		Vehicle: h.vehicle(), Space: m.Space, Names: m.Names, Suite: suite,
		Start: start(wh.Start), PosteriorS: wh.PosteriorS, MaxCells: h.opened.MaxCells, Begin: beside.begin, Desks: &s.desks,
	}
	o, err = s.replay(h, m, cfg, beside)
	if err != nil {
		return nil, err
	}
	if len(h.lacking) > 0 {
		o.log.Error("drive may lack what came after this", "after_batch", o.sequence, "missing", strings.Join(h.lacking, "; "))
	}
	o.log.Info("drive restored", "map", m.Name, "after_batch", o.sequence, "replayed", len(h.records), "ended", o.ended)
	return o, nil
}

// suiteOf is the suite that a drive began with: that of its name, if it still
// says the same.
func (s *Server) suiteOf(h *history, m *mapUse) (*sensor.Suite, error) {
	if h.opened.Suite == "" {
		return nil, nil
	}
	name := h.open.GetHeader().GetSuite()
	if now, err := s.suiteText(name, m); err == nil && now == h.opened.Suite {
		return s.cfg.Suites[name], nil
	}
	return sensor.ParseSuite(name, []byte(h.opened.Suite))
}

// acquireFingerprint is acquire for the map of a fingerprint, under its name
// before any other.
func (a *atlas) acquireFingerprint(name, fingerprint string) *mapUse {
	a.mu.Lock()
	defer a.mu.Unlock()
	found := a.current[name]
	if found == nil || found.Space.Fingerprint() != fingerprint {
		found = nil
		for _, m := range a.current {
			if m.Space.Fingerprint() == fingerprint && (found == nil || m.Name < found.Name) {
				found = m
			}
		}
	}
	if found == nil {
		found = a.olderOf(fingerprint)
	}
	if found != nil {
		found.sessions++
	}
	return found
}
