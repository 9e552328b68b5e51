package server

import (
	"fmt"
	"maps"
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"google.golang.org/protobuf/proto"

	"leadline/engine/sensor"
	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// fleet is a hub with invented vehicles, and a clock, without a server.
type fleet struct {
	*hub
	clock    time.Time
	drives   int
	valid    map[*subject]map[int64]*summary.Posterior // those that hold, by time
	said     map[string]int                            // posteriors, by vehicle
	inside   float64                                   // of what is said: the probability of every area
	answered int
	waits    time.Duration // for whoever wants something
	charged  int
	busy     bool // less is to be told
}

func newFleet(limits Limits) *fleet {
	fl := &fleet{clock: time.Unix(0, int64(began)), valid: map[*subject]map[int64]*summary.Posterior{}, said: map[string]int{}}
	fl.hub = newHub(limits.withDefaults(), func() time.Time { return fl.clock }, func() bool { return fl.busy })
	return fl
}

// extra answers at once, and says how often.
func (fl *fleet) extra(p *summary.Posterior, w want) (*extra, error) {
	fl.answered++
	x := &extra{inside: p.MostProbable.Mass}
	for range w.fractions {
		x.regions = append(x.regions, &leadlinev1.Region{AreaM2: float64(p.TimeNS)})
	}
	return x, nil
}

// wait and charge: what is wanted costs nothing, unless a test says so.
func (fl *fleet) wait(*summary.Posterior, want) time.Duration { return fl.waits }
func (fl *fleet) charge(time.Duration)                        { fl.charged++ }

// open begins a drive.
func (fl *fleet) open(vehicle string) *subject {
	fl.drives++
	sub := &subject{
		vehicle: vehicle, drive: fmt.Sprint("d", fl.drives), lateNS: 5e9,
		poke: make(chan struct{}, 1),
	}
	fl.valid[sub] = map[int64]*summary.Posterior{}
	fl.begin(sub)
	return sub
}

// say publishes posteriors at seconds from the beginning.
func (fl *fleet) say(sub *subject, status summary.Status, seconds ...int) {
	var ps []*summary.Posterior
	for _, at := range seconds {
		t := int64(began) + int64(at)*1e9
		p := &summary.Posterior{TimeNS: t, Status: status, Revises: fl.valid[sub][t] != nil, MostProbable: summary.Cell{Mass: fl.inside}}
		ps = append(ps, p)
		fl.valid[sub][t] = p
		fl.said[sub.vehicle]++
	}
	fl.told(sub, ps, nil, ps[len(ps)-1], 0, fl)
}

// poked runs what owners would, when they are asked.
func (fl *fleet) poked() (any bool) {
	for _, sub := range fl.subjects {
		select {
		case <-sub.poke:
			fl.present(sub, fl, false)
			any = true
		default:
		}
	}
	return any
}

// reader is a client: what it has been told.
type reader struct {
	t        *testing.T
	fl       *fleet
	f        *follower
	taken    chan struct{}
	req      *leadlinev1.FollowRequest
	updates  []*update
	number   uint64                                    // of the last update that arrived
	times    map[*subject]map[int64]*summary.Posterior // what it holds
	last     map[*subject]*bulletin
	over     map[*subject]bool
	skipped  uint64
	received int
	before   map[string]int // posteriors that had been said, but for the latest
}

func (fl *fleet) read(t *testing.T, req *leadlinev1.FollowRequest) *reader {
	t.Helper()
	r := &reader{t: t, fl: fl, req: req, times: map[*subject]map[int64]*summary.Posterior{}, last: map[*subject]*bulletin{}, over: map[*subject]bool{}}
	var err error
	if r.f, r.taken, err = fl.follow(req); err != nil {
		t.Fatal(err)
	}
	r.begin()
	return r
}

// begin notes what a stream without a token does not tell.
func (r *reader) begin() {
	r.before = maps.Clone(r.fl.said)
	for v, sub := range r.fl.subjects {
		if sub.latest != nil {
			r.before[v]--
		}
	}
}

// due is how many posteriors a stream should have told or skipped.
func (r *reader) due() (n int) {
	for v, said := range r.fl.said {
		if r.f.vehicles == nil || r.f.vehicles[v] {
			n += said - r.before[v]
		}
	}
	return n
}

// next takes an update off the server; nil if there is none.
func (r *reader) next() *update {
	r.t.Helper()
	for {
		u, _, err := r.fl.take(r.f, r.taken)
		if err != nil {
			r.t.Fatal(err)
		}
		if u != nil || !r.fl.poked() {
			return u
		}
	}
}

// arrives notes an update that has come through.
func (r *reader) arrives(u *update) {
	r.t.Helper()
	if u.number != r.number+1 {
		r.t.Errorf("update %d after %d", u.number, r.number)
	}
	r.number = u.number
	r.skipped += u.skipped
	r.updates = append(r.updates, u)
	switch {
	case r.over[u.of]:
		r.t.Errorf("bulletin of %s %s after its farewell", u.of.vehicle, u.of.drive)
	case u.posterior != nil:
		r.received++
		if r.times[u.of][u.posterior.p.TimeNS] == u.posterior.p {
			r.t.Errorf("%v: a posterior of %s is told twice", r.req, u.of.vehicle)
		}
		r.last[u.of] = u.posterior
		if r.times[u.of] == nil {
			r.times[u.of] = map[int64]*summary.Posterior{}
		}
		r.times[u.of][u.posterior.p.TimeNS] = u.posterior.p
	case u.withdrawn != nil:
		for _, t := range u.withdrawn {
			delete(r.times[u.of], int64(t))
		}
	default:
		r.over[u.of] = true
	}
}

// all takes and notes everything that is there, and returns it.
func (r *reader) all() []*update {
	r.t.Helper()
	n := len(r.updates)
	for u := r.next(); u != nil; u = r.next() {
		r.arrives(u)
	}
	return r.updates[n:]
}

// again breaks the stream and resumes it after the last update that arrived.
func (r *reader) again() {
	r.t.Helper()
	token := r.fl.token(r.f.id, r.number)
	r.fl.leave(r.f, r.taken)
	req := proto.CloneOf(r.req)
	if r.number > 0 {
		req.ResumeToken = token
	} else {
		r.begin()
	}
	f, taken, err := r.fl.follow(req)
	if err != nil {
		r.t.Fatal(err)
	}
	r.f, r.taken, r.number = f, taken, f.count
}

// ways are the ways to follow; those in front are told everything.
var ways = []*leadlinev1.FollowRequest{
	{},
	{Vehicles: []string{"a"}},
	{Vehicles: []string{"b", "c"}},
	{MinIntervalS: 2},
	{StatusChangesOnly: true},
	{Detail: leadlinev1.Detail_DETAIL_REGION},
	{Detail: leadlinev1.Detail_DETAIL_REGION, MinIntervalS: 2},
	{Area: square, AreaProbability: proto.Float64(0.5)},
}

const everything = 3 // of the ways

// TestFollowersModel runs invented vehicles, with late events, new drives and
// ends, past followers of all ways who read when they like and whose streams
// break with updates on their way. It proves of each that it is told nothing
// twice, that what it holds of a drive is at a pause what holds, that its latest
// is then the latest, or of the status, or on the side of the area, and that
// told and skipped make up what was said.
func TestFollowersModel(t *testing.T) {
	for seed := range uint64(150) {
		m := newModel(t, seed)
		for range 400 {
			m.step()
		}
		m.fl.clock = m.fl.clock.Add(time.Hour)
		for _, r := range m.readers {
			r.all()
			m.check(r)
		}
		if t.Failed() {
			t.Fatalf("seed %d", seed)
		}
	}
}

// model is what TestFollowersModel runs.
type model struct {
	t       *testing.T
	rng     *rand.Rand
	late    bool // late events come
	fl      *fleet
	subs    map[string]*subject
	at      map[*subject]int
	readers []*reader
}

func newModel(t *testing.T, seed uint64) *model {
	return &model{
		t: t, rng: rand.New(rand.NewPCG(seed, 3)), late: seed%2 == 0, fl: newFleet(Limits{}),
		subs: map[string]*subject{}, at: map[*subject]int{},
	}
}

func (m *model) step() {
	rng, fl := m.rng, m.fl
	fl.clock = fl.clock.Add(time.Duration(rng.IntN(1000)) * time.Millisecond)
	v := []string{"a", "b", "c"}[rng.IntN(3)]
	sub := m.subs[v]
	switch k := rng.IntN(100); {
	case sub == nil || k < 3:
		m.subs[v] = fl.open(v)
	case k < 8 && len(m.readers) < 6:
		m.readers = append(m.readers, fl.read(m.t, ways[rng.IntN(len(ways))]))
	case k < 10 && sub.end == nil:
		fl.farewell(sub, &leadlinev1.Farewell{Ended: true}, fl)
	case k < 12:
		fl.forget(sub)
		delete(m.subs, v)
	case k < 17 && m.late && sub.end == nil:
		m.lateEvent(sub)
	case k < 25 && len(m.readers) > 0:
		r := m.readers[rng.IntN(len(m.readers))]
		for range rng.IntN(4) {
			r.next() // on its way when the stream breaks
		}
		r.again()
	case k < 60 && len(m.readers) > 0:
		r := m.readers[rng.IntN(len(m.readers))]
		for range 1 + rng.IntN(3) {
			if u := r.next(); u != nil {
				r.arrives(u)
			}
		}
	case sub.end == nil:
		n := 1
		if rng.IntN(20) == 0 {
			n = ahead + rng.IntN(5) // more than waits
		}
		for range n {
			m.at[sub]++
			fl.inside = rng.Float64()
			fl.say(sub, summary.Status(1+rng.IntN(5)), m.at[sub])
		}
	}
}

// lateEvent takes some of the last four seconds back and revises others.
func (m *model) lateEvent(sub *subject) {
	var gone []sensor.Time
	var ps []*summary.Posterior
	valid := m.fl.valid[sub]
	for _, ns := range slices.Sorted(maps.Keys(valid)) {
		switch {
		case ns < int64(began)+int64(m.at[sub]-4)*1e9:
		case m.rng.IntN(2) == 0:
			gone = append(gone, sensor.Time(ns))
			delete(valid, ns)
		case m.rng.IntN(2) == 0:
			valid[ns] = &summary.Posterior{
				TimeNS: ns, Status: summary.Status(1 + m.rng.IntN(5)), Revises: true, MostProbable: summary.Cell{Mass: m.rng.Float64()},
			}
			ps = append(ps, valid[ns])
		}
	}
	var latest *summary.Posterior
	if ks := slices.Sorted(maps.Keys(valid)); len(ks) > 0 {
		latest = valid[ks[len(ks)-1]]
	}
	m.fl.told(sub, ps, gone, latest, 0, m.fl)
}

// check compares what a reader holds with what holds.
func (m *model) check(r *reader) {
	m.t.Helper()
	way := slices.IndexFunc(ways, func(w *leadlinev1.FollowRequest) bool { return proto.Equal(w, r.req) })
	bad := func(format string, args ...any) {
		m.t.Helper()
		m.t.Errorf("way %d: "+format, append([]any{way}, args...)...)
	}
	for v, sub := range m.fl.subjects {
		if r.f.vehicles != nil && !r.f.vehicles[v] {
			continue
		}
		if r.req.GetArea() == nil && r.over[sub] != (sub.end != nil) {
			bad("%s has ended: %v, told: %v", v, sub.end != nil, r.over[sub])
		}
		if sub.latest == nil {
			continue
		}
		p, last := sub.latest.p, r.last[sub]
		switch {
		case r.req.GetArea() != nil:
			told := last != nil && last.p.MostProbable.Mass >= 0.5
			if in := p.MostProbable.Mass >= 0.5; told != in && !m.late {
				bad("%s is inside: %v, told: %v", v, in, told)
			}
		case r.req.GetStatusChangesOnly():
			if !m.late && last.p.Status != p.Status {
				bad("%s is %v, told %v", v, p.Status, last.p.Status)
			}
		default:
			if ts := r.times[sub]; len(ts) == 0 || slices.Max(slices.Collect(maps.Keys(ts))) != p.TimeNS || ts[p.TimeNS] != p {
				bad("the latest of %s has not come", v)
			}
		}
	}
	for sub, ts := range r.times {
		if sub.gone && !r.over[sub] {
			continue // drives have followed one another too quickly, or it had left the area
		}
		for ns := range ts {
			if m.fl.valid[sub][ns] == nil {
				bad("%s %s still has %d, which was withdrawn", sub.vehicle, sub.drive, ns)
			}
		}
	}
	if way < everything && !m.late && r.received+int(r.skipped) != r.due() {
		bad("%d told and %d skipped of %d", r.received, r.skipped, r.due())
	}
	if again := r.all(); len(again) > 0 {
		bad("%d more updates", len(again))
	}
}

// TestFallsBack proves that where the posterior that waited is withdrawn, the
// one before is told, although it had been skipped.
func TestFallsBack(t *testing.T) {
	fl := newFleet(Limits{})
	sub := fl.open("a")
	r := fl.read(t, &leadlinev1.FollowRequest{})
	for i := range ahead + 1 {
		fl.say(sub, summary.Unsure, i)
	}
	at := func(i int) int64 { return int64(began) + int64(i)*1e9 }
	fl.told(sub, nil, []sensor.Time{sensor.Time(at(ahead))}, &summary.Posterior{TimeNS: at(ahead - 1), Status: summary.Unsure}, 0, fl)
	us := r.all()
	if len(us) != 1 || us[0].posterior == nil || us[0].posterior.p.TimeNS != at(ahead-1) || us[0].skipped != ahead-1 {
		t.Errorf("told %+v, want the posterior before the last, %d skipped", us, ahead-1)
	}
}
