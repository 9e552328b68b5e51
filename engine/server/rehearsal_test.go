package server

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"math/rand/v2"
	"os"
	"runtime"
	"slices"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"leadline/engine/journal"
	"leadline/engine/sensor"
	"leadline/engine/server/operate"
	"leadline/engine/server/share"
	"leadline/engine/session"
	"leadline/engine/wire"
)

// rehearsal is several servers that share a journal, and vehicles that feed them,
// moved on by a seeded scheduler: no goroutine of theirs runs but when it says so,
// and time passes when it says so. The servers' own code owns, records, commits,
// takes over and replays; the broker and the network are rehearsed, and fail.
type rehearsal struct {
	rng      *rand.Rand
	now      time.Time
	faults   bool
	plant    plant
	at       *thread
	n        int // partitions
	logs     [][]journal.Message
	sequence uint64
	keys     map[string]share.Entry
	heard    []share.Entry // all writes of keys, in order
	late     []lateDo
	nodes    []*node
	cars     []*car
	real     bool // sessions are such
	wrong    error
}

// plant is a fault that is put in on purpose, to see that it is found.
type plant int

const (
	plantNone     plant = iota
	plantUnfenced       // the log takes what is not over its last message
	plantEarly          // it says at times that something is in which is not
	plantDouble         // who recovers takes a measurement twice
	plantLease          // one server believes in its lease for too long
)

var rehearsalBegins = time.Unix(1.9e9, 0)

const rehearsalLease = 5 * time.Second

// node is a server.
type node struct {
	r           *rehearsal
	name        string
	s           *Server
	sh          *share.Share
	threads     []*thread
	owners      []*owner
	hears       int // of the keys' writes
	skew        float64
	cut, paused time.Time // until when
	dead        bool
	leaving     bool // is to stop in order
	settled     bool // and does nothing with partitions any more
	left        bool // has stopped
}

// time is by its own clock.
func (n *node) time() time.Time {
	return n.r.now.Add(time.Duration(n.skew * float64(n.r.now.Sub(rehearsalBegins))))
}

var rehearsalMetrics = sync.OnceValue(func() *operate.Metrics { return operate.NewMetrics("rehearsal") })

func (r *rehearsal) start() {
	n := &node{r: r, name: fmt.Sprint("server ", len(r.nodes)+1), skew: 0.04 * (r.rng.Float64() - 0.5)}
	cfg := Config{
		Maps: []Map{sea()}, Build: fmt.Sprint("build ", r.rng.IntN(8)/7), MaxCells: 1000,
		NewSession: func(session.Config) (Session, error) { return new(brief), nil }, RestoreSession: restoreBrief,
		Now: n.time, Metrics: rehearsalMetrics(), Log: slog.New(slog.DiscardHandler),
	}
	if r.real {
		cfg.NewSession = func(c session.Config) (Session, error) { return session.New(c) }
		cfg.RestoreSession = func(c session.Config, b []byte) (Session, error) { return session.Restore(c, b) }
	}
	if r.plant == plantDouble {
		cfg.RestoreSession = func(c session.Config, b []byte) (Session, error) {
			s, err := restoreBrief(c, b)
			if err == nil && s.Latest() != nil {
				_, err = s.Add(sensor.Event{Time: sensor.Time(s.Latest().TimeNS)})
			}
			return s, err
		}
	}
	cfg.Limits = cfg.Limits.withDefaults()
	s := newServer(cfg)
	n.s = s
	s.runs = func(o *owner) { n.owners = append(n.owners, o); s.ended.Done() }
	s.awaits = func(_ context.Context, o *owner) { n.stopped(o) }
	s.journal = journal.Rehearse(logOf{r, n}, r.n, fmt.Sprint("writer ", len(r.nodes)+1))
	lease := rehearsalLease
	if r.plant == plantLease && len(r.nodes)%2 == 0 {
		lease *= 4
	}
	n.sh = share.Rehearse(share.Options{
		Self: share.Server{ID: n.name}, Partitions: r.n, Lease: lease, Log: cfg.Log, Take: s.takePartition,
		Give: func(ctx context.Context, i int) { s.leavePartition(ctx, i, errMoved) },
		Drop: func(i int) { s.leavePartition(cancelled, i, errLost) },
	}, keysOf{r, n}, n.time)
	s.shared = &shared{Share: n.sh, open: make([]bool, r.n)}
	r.nodes = append(r.nodes, n)
	n.run(func() {
		for {
			_ = n.sh.Beat(context.Background())
			r.sleep(share.BeatEvery(rehearsalLease))
		}
	})
	n.run(func() {
		for !n.leaving {
			if !n.sh.Step() {
				r.sleep(r.ms(20, 120))
			}
		}
		n.settled = true
	})
	for i := range r.n {
		n.run(func() {
			for {
				if s.journal.Waits(i) && s.journal.Step(i) {
					s.lost(i)
				}
				r.sleep(r.ms(5, 40))
			}
		})
	}
}

func (n *node) run(f func()) {
	t := newThread(f)
	t.wake = n.r.now
	n.threads = append(n.threads, t)
}

// stopped is what an owner's goroutine does when it is told to stop.
func (n *node) stopped(o *owner) {
	if (errors.Is(o.err, errMoved) || errors.Is(o.err, errStopping)) && o.rec.checks.since > 0 {
		o.checkpoint(nil)
	}
	n.owners = slices.DeleteFunc(n.owners, func(x *owner) bool { return x == o })
	close(o.dead)
}

// move does what an owner's goroutine has to do besides its stream.
func (n *node) move(o *owner) {
	select {
	case <-o.quit:
		return
	default:
	}
	if n.r.rng.IntN(40) == 0 && o.rec.checks.since > 0 {
		o.rec.checks.pressed.Store(true) // the journal needs room, or it owes too much
		o.rec.wake()
	}
	select {
	case <-o.rec.poke:
		o.settle()
	default:
	}
}

func (r *rehearsal) node(name string) *node {
	for _, n := range r.nodes {
		if n.name == name {
			return n
		}
	}
	return nil
}

func (n *node) act() {
	r := n.r
	if n.dead || r.now.Before(n.paused) {
		return
	}
	if !r.now.Before(n.cut) && r.rng.IntN(3) > 0 { // else its watch is behind
		for n.hears < len(r.heard) && r.rng.IntN(30) > 0 {
			n.sh.Heard(r.heard[n.hears])
			n.hears++
		}
	}
	for _, t := range n.threads {
		if !t.over && !r.now.Before(t.wake) {
			r.resume(t)
		}
	}
	for _, o := range slices.Clone(n.owners) {
		n.move(o)
	}
	if n.left {
		n.kill()
	}
}

// leave stops the server in order, as Shutdown does.
func (n *node) leave() {
	if n.sh.Retire(context.Background()) != nil {
		n.r.sleep(time.Second)
	}
	n.s.stopOwners()
	for _, o := range slices.Clone(n.owners) {
		n.stopped(o)
	}
	for !n.settled {
		n.r.sleep(50 * time.Millisecond)
	}
	for i := range n.r.n {
		n.s.journal.Give(context.Background(), i)
	}
	n.sh.Leave(context.Background())
	n.left = true
}

func (n *node) kill() {
	n.dead = true
	for _, t := range n.threads {
		t.stop()
	}
}

// disturb is what happens to servers.
func (r *rehearsal) disturb() {
	n := r.nodes[r.rng.IntN(len(r.nodes))]
	living := 0
	for _, x := range r.nodes {
		if !x.dead && !x.leaving {
			living++
		}
	}
	switch r.rng.IntN(5) {
	case 0:
		if !n.dead && !n.leaving {
			n.kill()
			r.start()
		}
	case 1:
		n.paused = r.now.Add(r.ms(0, 15_000))
	case 2:
		n.cut = r.now.Add(r.ms(0, 15_000))
	case 3:
		if living < 5 {
			r.start()
		}
	case 4:
		if living > 1 && !n.dead && !n.leaving { // it leaves in order
			n.leaving = true
			n.run(n.leave)
		}
	}
}

// check is that of all servers at most one answers for a vehicle, and knows all that
// was acknowledged.
func (r *rehearsal) check() {
	for i := range r.n {
		var who *node
		for _, n := range r.nodes {
			if n.dead || n.leaving || r.now.Before(n.paused) || !n.sh.Where(i).Mine {
				continue
			}
			if who != nil {
				r.fail("%s and %s answer for partition %d", who.name, n.name, i)
			}
			who = n
		}
		for _, c := range r.cars {
			if who == nil || c.acked == 0 || who.s.journal.Partition(c.name) != i || !who.s.shared.open[i] {
				continue
			}
			if o := who.s.owners[c.name]; o == nil {
				r.fail("%s answers for %s and does not know it", who.name, c.name)
			} else if o.sequence < c.acked {
				r.fail("%s answers for %s, and has %d of %d batches that were acknowledged", who.name, c.name, o.sequence, c.acked)
			}
		}
	}
}

func rehearse(seed uint64, what plant) error {
	r := &rehearsal{rng: rand.New(rand.NewPCG(seed, 7)), now: rehearsalBegins, keys: map[string]share.Entry{}, plant: what}
	r.n = 1 + r.rng.IntN(4)
	r.real = what == plantNone && seed%100 == 0
	r.logs = make([][]journal.Message, r.n)
	for range 1 + r.rng.IntN(3) {
		r.start()
	}
	for v := range 1 + r.rng.IntN(3) {
		r.cars = append(r.cars, r.newCar(fmt.Sprint("car ", v), seed))
	}
	defer func() {
		for _, n := range r.nodes {
			if !n.dead {
				n.kill()
			}
		}
	}()
	finished := func() bool { return !slices.ContainsFunc(r.cars, func(c *car) bool { return !c.done }) }
	const disturbed, most = 30 * time.Second, 5 * time.Minute
	for end := rehearsalBegins.Add(most); r.now.Before(end) && r.wrong == nil; {
		r.now = r.now.Add(r.ms(2, 25))
		if r.faults = r.now.Sub(rehearsalBegins) < disturbed; !r.faults && finished() {
			return r.wrong
		}
		for _, l := range r.late {
			if !r.now.Before(l.at) {
				_ = l.do()
			}
		}
		r.late = slices.DeleteFunc(r.late, func(l lateDo) bool { return !r.now.Before(l.at) })
		r.nodes[r.rng.IntN(len(r.nodes))].act()
		r.cars[r.rng.IntN(len(r.cars))].act()
		if r.chance(150) {
			r.disturb()
		}
		r.check()
	}
	if r.wrong == nil && !finished() {
		r.fail("a vehicle does not come to its end: %s", r.state())
	}
	return r.wrong
}

// state is where servers and vehicles are.
func (r *rehearsal) state() string {
	var b strings.Builder
	for _, n := range r.nodes {
		if !n.dead {
			fmt.Fprintf(&b, "%s, fresh %v, leaving %v:", n.name, n.sh.Fresh(), n.leaving)
			for i := range r.n {
				fmt.Fprintf(&b, " mine %v open %v", n.sh.Where(i).Mine, n.s.shared.open[i])
			}
			b.WriteString("; ")
		}
	}
	for _, c := range r.cars {
		fmt.Fprintf(&b, "%s: %d of %d acknowledged, open %v begun %v opened %v sent %d ended %v done %v", c.name, c.acked, len(c.batches), c.o != nil, c.begun, c.opened, c.sent, c.ended, c.done)
		if c.o != nil {
			fmt.Fprintf(&b, " at %s: %d in, %d waiting, %d out", c.at.name, c.o.sequence, len(c.o.rec.waiting), len(c.o.out))
		}
		b.WriteString("; ")
	}
	return b.String()
}

func (r *rehearsal) newCar(name string, seed uint64) *car {
	evs := voyage(seed, 20+r.rng.IntN(20))
	c := &car{r: r, name: name, events: len(evs)}
	var of Session = new(brief)
	if r.real {
		h, err := wire.ToHeader(header(name))
		if err == nil {
			of, err = session.New(session.Config{Vehicle: name, Space: sea().Space, Start: start(h.Start), PosteriorS: h.PosteriorS, MaxCells: 1000})
		}
		if err != nil {
			panic(err)
		}
	}
	for len(evs) > 0 {
		n := min(len(evs), 1+r.rng.IntN(3))
		for _, ev := range evs[:n] {
			if _, err := of.Add(ev); err != nil {
				r.fail("%s: %v", name, err)
			}
		}
		c.batches = append(c.batches, batch(uint64(len(c.batches)+1), evs[:n]...).GetBatch())
		evs = evs[n:]
	}
	of.Flush()
	c.hash = of.Hash()
	return c
}

// TestRehearsal has servers and vehicles go through faults on many seeds: nothing
// that was acknowledged is lost, nothing counts twice, posteriors are those of a drive
// to which nothing happened, one server at a time answers for a vehicle and writes its
// partition, and who answers knows all that was acknowledged. LEADLINE_SEEDS says how
// many seeds (fixtures/survive has 10 000), LEADLINE_SEED from which on.
func TestRehearsal(t *testing.T) {
	first, seeds := number(t, "LEADLINE_SEED", 0), number(t, "LEADLINE_SEEDS", 100)
	var next, failed atomic.Uint64
	var all sync.WaitGroup
	for range runtime.GOMAXPROCS(0) {
		all.Go(func() {
			for i := next.Add(1) - 1; i < seeds && failed.Load() < 5; i = next.Add(1) - 1 {
				if err := rehearse(first+i, plantNone); err != nil {
					failed.Add(1)
					t.Errorf("seed %d: %v (LEADLINE_SEED=%d LEADLINE_SEEDS=1 does it again)", first+i, err, first+i)
				}
			}
		})
	}
	all.Wait()
	t.Logf("%d seeds from %d on", seeds, first)
}

func number(t *testing.T, name string, otherwise uint64) uint64 {
	text := os.Getenv(name)
	if text == "" {
		return otherwise
	}
	n, err := strconv.ParseUint(text, 10, 64)
	if err != nil {
		t.Fatalf("%s is %q: give a number", name, text)
	}
	return n
}

// TestRehearsalFinds plants faults, and proves that the rehearsal finds each within
// a few seeds.
func TestRehearsalFinds(t *testing.T) {
	for name, c := range map[string]struct {
		plant plant
		seeds uint64
	}{
		"a log that does not fence":                  {plantUnfenced, 100},
		"acknowledged before it is in":               {plantEarly, 20},
		"a measurement is counted twice in recovery": {plantDouble, 20},
		"a lease that is believed in for too long":   {plantLease, 100},
	} {
		t.Run(name, func(t *testing.T) {
			for seed := range c.seeds {
				if err := rehearse(seed, c.plant); err != nil {
					t.Logf("seed %d: %v", seed, err)
					return
				}
			}
			t.Errorf("not found within %d seeds", c.seeds)
		})
	}
}

// TestRehearsalIsTheSame proves that a seed is the same rehearsal each time.
func TestRehearsalIsTheSame(t *testing.T) {
	a, b := rehearse(3, plantEarly), rehearse(3, plantEarly)
	if fmt.Sprint(a) != fmt.Sprint(b) {
		t.Errorf("%v\n%v", a, b)
	}
}
