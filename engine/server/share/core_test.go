package share

import (
	"fmt"
	"math/rand/v2"
	"os"
	"testing"
	"time"

	"go.uber.org/goleak"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// rehearsal is several servers, a broker's keys and a journal's log, moved on by a
// seeded scheduler that delays, stops, kills and starts them.
type rehearsal struct {
	rng     *rand.Rand
	now     time.Time
	n       int // partitions
	keys    map[string]key
	events  []event // all writes of keys, in order
	logs    []int   // of each partition: how many records it has
	fences  []string
	servers []*actor
	born    int
	took    int
}

type key struct {
	value    string
	server   Server
	revision uint64
}

type event struct {
	name string
	key  key
}

// actor is one server.
type actor struct {
	*core
	id     string
	heard  int // of the events
	own    uint64
	sent   time.Time // of the last renewal
	paused time.Time // does nothing before
	dead   bool
	held   *step  // decided and not done yet
	last   []int  // of each partition that it serves: the records that it knows of
	fed    []bool // a client feeds it
}

const rehearsedLease = 5 * time.Second

func (r *rehearsal) start() {
	r.born++
	id := fmt.Sprint("server ", r.born)
	r.servers = append(r.servers, &actor{core: newCore(Server{ID: id}, r.n, rehearsedLease), id: id, last: make([]int, r.n), fed: make([]bool, r.n)})
}

// write is the broker's: over a revision.
func (r *rehearsal) write(name string, k key, over uint64) (uint64, bool) {
	if r.keys[name].revision != over {
		return 0, false
	}
	k.revision = uint64(len(r.events) + 1)
	r.keys[name] = k
	r.events = append(r.events, event{name, k})
	return k.revision, true
}

func partitionKey(i int) string { return fmt.Sprint(partitionPrefix, i) }

// act moves one server on by a little.
func (r *rehearsal) act(a *actor) {
	if r.now.Before(a.paused) {
		return
	}
	if r.rng.IntN(3) > 0 { // else its watch is behind
		for a.heard < len(r.events) && r.rng.IntN(20) > 0 {
			e := r.events[a.heard]
			a.heard++
			var i int
			if _, err := fmt.Sscanf(e.name, partitionPrefix+"%d", &i); err == nil {
				a.sawPartition(i, e.key.value, e.key.revision, r.now)
			} else {
				a.sawServer(e.key.server.ID, e.key.server, e.key.revision, e.key.value == "gone", r.now)
			}
		}
	}
	if r.now.Sub(a.sent) >= rehearsedLease/beats {
		a.sent = r.now
		k := r.keys[a.id]
		if revision, ok := r.write(a.id, key{value: "here", server: a.self}, k.revision); ok {
			a.own = revision
			a.renew(r.now, r.now)
		}
	}
	// What clients bring it: they come to one that answers, and stay.
	i := r.rng.IntN(r.n)
	a.fed[i] = a.fed[i] || a.answers(i, r.now)
	if a.fed[i] && a.parts[i].state == mine {
		if r.fences[i] == a.id && r.logs[i] == a.last[i] {
			r.logs[i]++
			a.last[i]++
		} else { // the log refuses it
			a.parts[i].state, a.fed[i] = away, false
			a.later(i, r.now.Add(time.Second))
		}
	}
	if a.held == nil {
		if s := a.next(r.now); s.verb != nothing {
			a.held = &s
		}
	}
	if a.held != nil && r.rng.IntN(3) == 0 {
		s := *a.held
		a.held = nil
		r.do(a, s)
	}
}

func (r *rehearsal) do(a *actor, s step) {
	i := s.partition
	failed := func() {
		a.later(i, r.now.Add(time.Second))
		if k := r.keys[partitionKey(i)]; k.revision > 0 {
			a.sawPartition(i, k.value, k.revision, r.now)
		}
	}
	put := func(owner string) {
		if revision, ok := r.write(partitionKey(i), key{value: owner}, s.revision); ok {
			a.wrote(i, owner, revision, r.now)
			return
		}
		failed()
	}
	switch s.verb {
	case drop:
		a.parts[i].state, a.fed[i] = away, false
	case take:
		a.last[i] = r.logs[i] // and a pack that says so, of nothing
		r.fences[i] = a.id
		a.parts[i].state = mine
		r.took++
	case give:
		a.parts[i].state, a.fed[i] = away, false
		put("")
	case claim:
		if k := r.keys[s.dead]; s.dead != "" && k.value == "here" && k.revision != s.deadAt {
			a.sawServer(s.dead, k.server, k.revision, false, r.now)
			return
		}
		put(a.id)
	case hold:
		put(a.id)
	case sweep:
		if k := r.keys[s.dead]; k.revision == s.deadAt {
			r.write(s.dead, key{value: "gone", server: k.server}, s.deadAt)
		}
		delete(a.servers, s.dead)
	}
}

// check is that of two servers at most one answers for a partition, and that it
// knows all of its log.
func (r *rehearsal) check() error {
	for i := range r.n {
		who := ""
		for _, a := range r.servers {
			if a.dead || r.now.Before(a.paused) || !a.answers(i, r.now) {
				continue
			}
			if who != "" {
				return fmt.Errorf("%s and %s answer for partition %d", who, a.id, i)
			}
			if who = a.id; a.last[i] != r.logs[i] {
				return fmt.Errorf("%s answers for partition %d and knows %d of its %d records", who, i, a.last[i], r.logs[i])
			}
		}
	}
	return nil
}

// settled is that every partition has a living server, and each server its part.
func (r *rehearsal) settled() error {
	n := map[string]int{}
	living := 0
	for _, a := range r.servers {
		if a.dead {
			continue
		}
		living++
		for i := range r.n {
			if a.answers(i, r.now) {
				n[a.id]++
			}
		}
	}
	sum := 0
	for _, a := range r.servers {
		if k := n[a.id]; !a.dead {
			if sum += k; k < r.n/living || k > (r.n+living-1)/living {
				return fmt.Errorf("%s has %d of %d partitions, and there are %d servers", a.id, k, r.n, living)
			}
		}
	}
	if sum != r.n {
		return fmt.Errorf("%d of %d partitions are served", sum, r.n)
	}
	return nil
}

func rehearse(seed uint64) error {
	r := &rehearsal{rng: rand.New(rand.NewPCG(seed, 1)), now: time.Unix(1e9, 0), keys: map[string]key{}}
	r.n = 1 + r.rng.IntN(12)
	r.logs, r.fences = make([]int, r.n), make([]string, r.n)
	for range 1 + r.rng.IntN(4) {
		r.start()
	}
	run := func(d time.Duration, faults bool) error {
		for end := r.now.Add(d); r.now.Before(end); {
			r.now = r.now.Add(time.Duration(1+r.rng.IntN(60)) * time.Millisecond)
			a := r.servers[r.rng.IntN(len(r.servers))]
			if !a.dead {
				r.act(a)
			}
			if err := r.check(); err != nil {
				return err
			}
			if !faults || r.rng.IntN(150) > 0 {
				continue
			}
			switch r.rng.IntN(4) {
			case 0:
				a.dead = true // killed
				r.start()
			case 1:
				a.paused = r.now.Add(time.Duration(r.rng.IntN(20)) * time.Second)
			case 2:
				if len(r.servers) < 8 {
					r.start()
				}
			case 3:
				a.self.Leaving = !a.dead && r.rng.IntN(2) == 0
			}
		}
		return nil
	}
	if err := run(60*time.Second, true); err != nil {
		return err
	}
	for _, a := range r.servers {
		a.paused = time.Time{}
		if a.self.Leaving {
			a.dead = true
		}
	}
	living := 0
	for _, a := range r.servers {
		if !a.dead {
			living++
		}
	}
	if living == 0 {
		r.start()
	}
	if err := run(4*time.Minute, false); err != nil {
		return err
	}
	return r.settled()
}

// TestRehearsal has servers share partitions while they are stopped, killed and
// started, and while what they hear is late, on many seeds: at no time two of them
// answer for one partition, who answers knows all of its log, and once nothing
// happens any more each has its part.
func TestRehearsal(t *testing.T) {
	seeds := uint64(60)
	if os.Getenv("LEADLINE_LONG") != "" {
		seeds = 1000
	}
	for seed := range seeds {
		if err := rehearse(seed); err != nil {
			t.Errorf("seed %d: %v", seed, err)
		}
	}
}
