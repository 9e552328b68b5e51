package server

import (
	"cmp"
	"context"
	"slices"
	"sync"
	"time"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"

	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Bounds of what a server remembers of alarms.
const (
	maxCleared    = 1000
	maxOpenAlarms = 64 // of a vehicle, that are on record
)

// alarmBook is the record of alarms. Owners bring what is raised and cleared,
// and never wait; readers are told of what changes.
type alarmBook struct {
	now func() time.Time

	mu      sync.Mutex
	last    uint64
	records map[uint64]*leadlinev1.AlarmRecord // a record is replaced and never changed
	cleared []uint64                           // the oldest first
	readers map[*alarmReader]bool
}

func newAlarmBook(now func() time.Time) *alarmBook {
	return &alarmBook{now: now, records: map[uint64]*leadlinev1.AlarmRecord{}, readers: map[*alarmReader]bool{}}
}

// alarmReader is one who is told of alarms. The book's lock guards it.
type alarmReader struct {
	wake    chan struct{} // of one
	waiting []uint64      // numbers of records to tell, each once
}

// read returns a reader who is told of all records first. It must be given back
// with leave.
func (b *alarmBook) read() *alarmReader {
	b.mu.Lock()
	defer b.mu.Unlock()
	r := &alarmReader{wake: make(chan struct{}, 1)}
	for n := range b.records {
		r.waiting = append(r.waiting, n)
	}
	slices.Sort(r.waiting)
	b.readers[r] = true
	return r
}

func (b *alarmBook) leave(r *alarmReader) {
	b.mu.Lock()
	defer b.mu.Unlock()
	delete(b.readers, r)
}

// take returns the next record to tell; nil if there is none.
func (b *alarmBook) take(r *alarmReader) *leadlinev1.AlarmRecord {
	b.mu.Lock()
	defer b.mu.Unlock()
	for len(r.waiting) > 0 {
		a := b.records[r.waiting[0]]
		r.waiting = r.waiting[1:]
		if a != nil { // not forgotten since
			return a
		}
	}
	return nil
}

// put makes a record the one of its number. The lock is held.
func (b *alarmBook) put(a *leadlinev1.AlarmRecord) {
	b.records[a.GetNumber()] = a
	for r := range b.readers {
		if !slices.Contains(r.waiting, a.GetNumber()) {
			r.waiting = append(r.waiting, a.GetNumber())
		}
		select {
		case r.wake <- struct{}{}:
		default:
		}
	}
}

// forget takes all records of a vehicle out; of alarms that hold the owner must
// be gone.
func (b *alarmBook) forget(vehicle string) {
	b.mu.Lock()
	defer b.mu.Unlock()
	for n, a := range b.records {
		if a.GetVehicle() == vehicle {
			delete(b.records, n)
			b.cleared = slices.DeleteFunc(b.cleared, func(c uint64) bool { return c == n })
		}
	}
}

// of returns the first records of a drive's alarms, by number.
func (b *alarmBook) of(vehicle, drive string) (out []*leadlinev1.AlarmRecord) {
	b.mu.Lock()
	defer b.mu.Unlock()
	for _, a := range b.records {
		if a.GetVehicle() == vehicle && a.GetDrive() == drive {
			out = append(out, a)
		}
	}
	slices.SortFunc(out, func(a, b *leadlinev1.AlarmRecord) int { return cmp.Compare(a.GetNumber(), b.GetNumber()) })
	return out[:min(len(out), maxTrailAlarms)]
}

// raise begins a record and returns its number.
func (b *alarmBook) raise(a *leadlinev1.AlarmRecord) uint64 {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.last++
	a.Number, a.RaisedAt = b.last, timestamppb.New(b.now())
	b.put(a)
	return a.GetNumber()
}

// clear ends a record.
func (b *alarmBook) clear(number uint64, reason string) {
	b.mu.Lock()
	defer b.mu.Unlock()
	a := proto.CloneOf(b.records[number])
	a.ClearedAt, a.ClearedReason = timestamppb.New(b.now()), reason
	b.put(a)
	if b.cleared = append(b.cleared, number); len(b.cleared) > maxCleared {
		delete(b.records, b.cleared[0])
		b.cleared = b.cleared[1:]
	}
}

// SeeAlarm notes who has seen an alarm: see the .proto file.
func (s *Server) SeeAlarm(ctx context.Context, req *leadlinev1.SeeAlarmRequest) (*leadlinev1.SeeAlarmResponse, error) {
	who := by(ctx, req.GetWho())
	if who == "" {
		return nil, badField("who", "who is missing: say who has seen the alarm")
	}
	if err := wire.Name("who", who); err != nil {
		return nil, badField("who", "%v", err)
	}
	if err := wire.Name("note", req.GetNote()); err != nil {
		return nil, badField("note", "%v", err)
	}
	b := s.alarms
	b.mu.Lock()
	defer b.mu.Unlock()
	a := b.records[req.GetNumber()]
	if a == nil && s.shared != nil && !forwarded(ctx) {
		b.mu.Unlock()
		found, err := s.seenElsewhere(ctx, req)
		b.mu.Lock()
		if found != nil || err != nil {
			return found, err
		}
	}
	if a == nil {
		return nil, refuse(leadlinev1.Reason_REASON_UNKNOWN_ALARM, about{"field": "number"}, "there is no alarm of number %d on record: it was cleared long ago, or the server has been started anew", req.GetNumber())
	}
	if a.GetSeenAt() == nil {
		a = proto.CloneOf(a)
		a.SeenAt, a.SeenBy, a.Note = timestamppb.New(b.now()), who, req.GetNote()
		b.put(a)
	}
	return &leadlinev1.SeeAlarmResponse{Alarm: a}, nil
}

// alarmKey tells the alarms of a vehicle apart.
type alarmKey struct {
	kind                leadlinev1.AlarmKind
	sensor, mkind, post string
	lost                bool
}

// recordAlarms brings the record of alarms up to the latest posterior. It runs
// on the owner's goroutine.
func (o *owner) recordAlarms() {
	p := o.sess.Latest()
	if p == nil || len(p.Alarms) == 0 && !p.LostAlarm && len(o.alarms) == 0 {
		return
	}
	now := &leadlinev1.Posterior{}
	monitored(now, p)
	holds := map[alarmKey]bool{}
	raise := func(k alarmKey, a *leadlinev1.AlarmRecord) {
		holds[k] = true
		if _, known := o.alarms[k]; known || len(o.alarms) >= maxOpenAlarms {
			return
		}
		a.Vehicle, a.Drive = o.vehicle, o.drive
		o.alarms[k] = o.srv.alarms.raise(a)
	}
	for _, a := range now.GetAlarms() {
		raise(alarmKey{kind: a.GetKind(), sensor: a.GetSensor(), mkind: a.GetMeasurementKind(), post: a.GetPost()}, &leadlinev1.AlarmRecord{Alarm: a})
	}
	if p.LostAlarm {
		raise(alarmKey{lost: true}, &leadlinev1.AlarmRecord{Lost: true})
	}
	for _, k := range o.openAlarms() {
		if !holds[k] {
			o.clearAlarm(k, k.over())
		}
	}
}

// over says why an alarm holds no more.
func (k alarmKey) over() string {
	switch {
	case k.lost:
		return "the vehicle has been located again"
	case k.kind == leadlinev1.AlarmKind_ALARM_KIND_ISOLATED:
		return "the sensor agrees again, and is used again"
	case k.kind == leadlinev1.AlarmKind_ALARM_KIND_IMPOSSIBLE:
		return "later measurements were possible"
	}
	return "as much evidence has spoken for the measurements as had spoken against them"
}

// openAlarms are the keys of those on record, in order.
func (o *owner) openAlarms() []alarmKey {
	var out []alarmKey
	for k := range o.alarms {
		out = append(out, k)
	}
	slices.SortFunc(out, func(a, b alarmKey) int { return cmp.Compare(o.alarms[a], o.alarms[b]) })
	return out
}

func (o *owner) clearAlarm(k alarmKey, reason string) {
	o.srv.alarms.clear(o.alarms[k], reason)
	delete(o.alarms, k)
}

// clearAlarms ends all records of a drive that is over.
func (o *owner) clearAlarms(reason string) {
	for _, k := range o.openAlarms() {
		o.clearAlarm(k, reason)
	}
}
