package server

import (
	"maps"
	"slices"
	"sync"
	"time"

	"leadline/engine/sensor"
	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// hub passes news of vehicles on to those who follow them. Owners bring it and
// never wait: a follower has a slot for each vehicle, which holds what is still
// to be told and is skipped forward when the follower is slow.
type hub struct {
	now      func() time.Time
	limits   Limits
	thins    func() bool // less is to be told for now
	instance [8]byte     // in resume tokens, so that another server's are known

	// mu guards all below, and the followers and slots. It is held for moments
	// only: what takes time, such as a region, is computed outside.
	mu       sync.Mutex
	subjects map[string]*subject // by vehicle
	all      []*follower         // that follow every vehicle
	named    map[string][]*follower
	streams  map[streamID]*follower // those that can be resumed included
	reading  int                    // followers with a stream
}

// subject is a drive as followers see it.
type subject struct {
	vehicle, drive string
	onMap          Map
	recomputed     bool          // see Posterior.recomputed
	lateNS         int64         // how late a posterior may be withdrawn
	poke           chan struct{} // of one: asks the owner to call present
	recent         recent
	latest         *bulletin // nil before the first
	end            *leadlinev1.Farewell
	gone           bool // the server no longer knows it
	waits          bool // somebody has to wait for a picture, and will be seen to
}

// bulletin is a posterior as it is told; what it points to no longer changes.
type bulletin struct {
	of        *subject
	p         *summary.Posterior
	malformed uint64 // measurements refused before they reached the session
	extra     *extra
}

func newHub(limits Limits, now func() time.Time, thins func() bool) *hub {
	return &hub{
		now: now, limits: limits, thins: thins, instance: newInstance(),
		subjects: map[string]*subject{}, named: map[string][]*follower{}, streams: map[streamID]*follower{},
	}
}

// begin makes a drive its vehicle's. What it replaces is over.
func (h *hub) begin(sub *subject) {
	h.mu.Lock()
	defer h.mu.Unlock()
	if old := h.subjects[sub.vehicle]; old != nil {
		h.over(old, &leadlinev1.Farewell{Reason: "the vehicle has opened another drive in place of this one"})
		old.gone = true
	}
	h.subjects[sub.vehicle] = sub
}

// told brings what one measurement released and withdrew; latest is the last
// posterior that holds, mostly the last one released. It runs on the owner's
// goroutine.
func (h *hub) told(sub *subject, ps []*summary.Posterior, withdrawn []sensor.Time, latest *summary.Posterior, malformed uint64, a answerer) {
	if len(ps) == 0 && len(withdrawn) == 0 {
		return
	}
	h.mu.Lock()
	if sub.gone {
		h.mu.Unlock()
		return
	}
	h.expire()
	followers := h.followers(sub.vehicle)
	if sub.latest = nil; latest != nil {
		sub.latest = &bulletin{of: sub, p: latest, malformed: malformed}
	}
	for _, f := range followers {
		for _, t := range withdrawn {
			f.withdraw(sub, t)
		}
	}
	if len(followers) > 0 {
		now := h.now()
		for _, p := range ps {
			n := &bulletin{of: sub, p: p, malformed: malformed}
			for _, f := range followers {
				f.offer(n, now, p == latest)
			}
		}
		if latest != nil && !slices.Contains(ps, latest) {
			for _, f := range followers {
				f.fallBack(sub, now)
			}
		}
	}
	asked := slices.ContainsFunc(followers, func(f *follower) bool { return f.asks(sub) })
	h.mu.Unlock()
	if asked {
		h.present(sub, a, false)
	}
}

// farewell ends a drive, by its owner's word. a is nil if the owner cannot be
// asked any more.
func (h *hub) farewell(sub *subject, fw *leadlinev1.Farewell, a answerer) {
	if a != nil {
		h.mu.Lock()
		for _, f := range h.followers(sub.vehicle) {
			f.hurry(sub)
		}
		h.mu.Unlock()
		h.present(sub, a, true)
	}
	h.mu.Lock()
	defer h.mu.Unlock()
	h.over(sub, fw)
}

// over tells a drive's end, once.
func (h *hub) over(sub *subject, fw *leadlinev1.Farewell) {
	if sub.end != nil {
		return
	}
	sub.end = fw
	for _, f := range h.followers(sub.vehicle) {
		f.over(sub)
	}
}

// forget takes out a drive that the server no longer knows.
func (h *hub) forget(sub *subject) {
	h.mu.Lock()
	defer h.mu.Unlock()
	h.over(sub, &leadlinev1.Farewell{Reason: "the server has dropped the drive unfinished"})
	sub.gone = true
	if h.subjects[sub.vehicle] == sub {
		delete(h.subjects, sub.vehicle)
	}
	for _, f := range h.followers(sub.vehicle) {
		f.tidy(sub.vehicle)
	}
}

// moved takes out a drive that another server goes on with: those who follow it
// hear of it from there.
func (h *hub) moved(sub *subject) {
	h.mu.Lock()
	defer h.mu.Unlock()
	sub.gone = true
	if h.subjects[sub.vehicle] == sub {
		delete(h.subjects, sub.vehicle)
	}
	for _, f := range h.followers(sub.vehicle) {
		f.tidy(sub.vehicle)
	}
}

// erase takes out what waits for followers of a drive that is gone; that it is
// over they are told.
func (h *hub) erase(sub *subject) {
	h.mu.Lock()
	defer h.mu.Unlock()
	sub.latest = nil
	sub.recent.clear()
	for _, f := range h.streams {
		if s := f.slots[sub.vehicle]; s != nil {
			s.erase(sub)
		}
		for i := range f.sent {
			if s := f.sent[i].slot; s != nil {
				s.erase(sub)
			}
		}
	}
}

// present adds what followers ask for beside the latest posterior: on the
// owner's goroutine, since it reads the session, and once for all who ask the
// same. Who has to wait, unless it is the last, goes on asking.
func (h *hub) present(sub *subject, a answerer, last bool) {
	type asker struct {
		f    *follower
		want want
	}
	h.mu.Lock()
	n := sub.latest
	var askers []asker
	var later time.Duration
	for _, f := range h.followers(sub.vehicle) {
		switch {
		case sub.gone || !f.asks(sub):
		case n == nil:
			f.dismiss(sub)
		default:
			w := f.wants(sub)
			if d := a.wait(n.p, w); d > 0 && !last {
				later = d
				continue
			}
			askers = append(askers, asker{f, w})
		}
	}
	if later > 0 && !sub.waits {
		sub.waits = true
		time.AfterFunc(later, func() { h.waited(sub) })
	}
	h.mu.Unlock()
	if len(askers) == 0 {
		return
	}
	answers := make([]*extra, len(askers))
	errs := make([]error, len(askers))
	began := time.Now()
	for i, k := range askers {
		answers[i], errs[i] = a.extra(n.p, k.want)
	}
	a.charge(time.Since(began))
	h.mu.Lock()
	defer h.mu.Unlock()
	now := h.now()
	for i, k := range askers {
		if errs[i] != nil {
			k.f.fail(errs[i])
			continue
		}
		k.f.deliver(&bulletin{of: sub, p: n.p, malformed: n.malformed, extra: answers[i]}, now)
	}
}

// waited has the owner look at those again who had to wait.
func (h *hub) waited(sub *subject) {
	h.mu.Lock()
	defer h.mu.Unlock()
	sub.waits = false
	select {
	case sub.poke <- struct{}{}:
	default: // it has been asked
	}
}

// followers are those who follow a vehicle.
func (h *hub) followers(vehicle string) []*follower {
	if len(h.named) == 0 {
		return h.all
	}
	return append(slices.Clip(h.all), h.named[vehicle]...)
}

// known lists the drives that a follower follows, by vehicle.
func (h *hub) known(f *follower) []*subject {
	var out []*subject
	for _, vehicle := range slices.Sorted(maps.Keys(h.subjects)) {
		if f.vehicles == nil || f.vehicles[vehicle] {
			out = append(out, h.subjects[vehicle])
		}
	}
	return out
}
