package diagnose

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"sync"

	"leadline/engine/sensor"
	"leadline/engine/session"
)

// course is what all runs of a diagnosis share.
type course struct {
	config session.Config
	suite  *sensor.Suite // with its defaults
	voices []voice
	events []sensor.Event // the opening, in order
	start  sensor.Time
	rounds []sensor.Time // ascending; the last is the end
	each   func(n int, f func(i int))
	stop   func() error // before each measurement
	budget budget
	// whole are the rounds of the whole opening where, for want of budget, all but
	// the finalists end before it does; else nil.
	whole  []sensor.Time
	mayCut bool // in the first race
	// tick hears how much of a round is done, one at a time.
	tick func(round int, share float64)
}

// entrant is a mistake in a race.
type entrant struct {
	mistake *Mistake
	run     *run
	err     error
	nats    []float64 // by round, as far as it came
}

// isLog reports that it is the log as it stands.
func (e *entrant) isLog() bool { return e.mistake.of == nil }

func (e *entrant) last() float64 { return e.nats[len(e.nats)-1] }

// behindNats is by how much an entrant may fall behind the best and stay. If
// the measurements are as an entrant says, the chance that another one is ever
// k nats ahead of it is at most e^-k (Ville's inequality: the ratio of their
// likelihoods is then a martingale of mean 1). 30 nats of that are 1e-13; the
// model is not the world, and so it is twice that.
//
// farNats is the same for the log as it stands, which the others are compared
// with, for a mistake of which nothing has come yet (the first fix after minutes),
// which is that log so far, and for the best of a family that is searched for a value, which its
// finer values go on from. What stands for its neighbours is allowed what that
// may have cost it.
const (
	behindNats = 60.0
	farNats    = 300.0
)

// race runs mistakes side by side, and drops after each round those that have
// fallen behind. Which these are depends on nothing but the log.
func (c *course) race(ms []Mistake) []*entrant {
	es := make([]*entrant, len(ms))
	for i := range ms {
		es[i] = &entrant{mistake: &ms[i]}
	}
	alive := slices.Clone(es)
	for round := 0; round < len(c.rounds); round++ {
		c.together(alive, round)
		goOn := keep(alive)
		c.cut(es, goOn, round)
		for _, e := range alive {
			if round == len(c.rounds)-1 || !slices.Contains(goOn, e) {
				e.leave()
			}
		}
		alive = goOn
	}
	for _, e := range es {
		c.budget.spent += e.work()
	}
	return es
}

// together runs entrants up to the end of a round.
func (c *course) together(es []*entrant, round int) {
	var mu sync.Mutex
	done := 0
	c.each(len(es), func(i int) {
		c.advance(es[i], round)
		mu.Lock()
		defer mu.Unlock()
		done++
		c.tick(round, float64(done)/float64(len(es)))
	})
}

// errBroken drops a mistake under which the session broke a rule of its own,
// such as one that leaves no place where the vehicle can be.
var errBroken = errors.New("the session broke")

// advance runs an entrant up to the end of a round.
func (c *course) advance(e *entrant, round int) {
	defer func() {
		if broke := recover(); broke != nil {
			e.err = fmt.Errorf("%w: %v", errBroken, broke)
		}
	}()
	if e.run == nil {
		if e.run, e.err = newRun(c.config, c.suite, c.events, e.mistake); e.err != nil {
			return
		}
	}
	most := math.Inf(1)
	if !e.isLog() || c.cutShort() && !c.mayCut { // what it was compared with before stands
		most = c.budget.most / costlyShare
	}
	if e.err = e.run.advance(c.rounds[round], round == len(c.rounds)-1, most, c.stop); e.err != nil {
		return
	}
	e.nats = append(e.nats, e.run.nats())
	e.run.s.Rest() // many wait for their next round
}

// leave gives the memory of its session back.
func (e *entrant) leave() {
	if e.run != nil {
		e.run.latest, e.run.s, e.run.events = e.run.s.Latest(), nil, nil
	}
}

// errRefused drops a mistake under which a vehicle would move as none does.
var errRefused = errors.New("motions are refused")

// keep returns who goes on, in order.
func keep(es []*entrant) []*entrant {
	var best *entrant
	of := map[string]*entrant{} // looked up only
	refused := math.MaxInt
	for _, e := range es {
		if e.err == nil {
			refused = min(refused, e.run.motions)
		}
	}
	better := func(e, than *entrant) bool { return than == nil || e.last() > than.last() }
	for _, e := range es {
		if e.err == nil && e.run.motions > refused && !e.isLog() {
			e.err = errRefused
		}
		if e.err != nil {
			continue
		}
		if better(e, best) {
			best = e
		}
		if f := e.mistake.family; e.mistake.search != nil && better(e, of[f]) {
			of[f] = e
		}
	}
	var out []*entrant
	for _, e := range es {
		if e.err != nil {
			continue
		}
		behind := behindNats
		if !e.run.begun || of[e.mistake.family] == e {
			behind = farNats
		}
		if s := e.mistake.search; s != nil && s.broadens() {
			if e.last() < of[s.family].last()-behindNats {
				continue
			}
			behind += s.lossNats * e.run.log.weight(s.sensor)
		}
		if e.last() >= best.last()-behind {
			out = append(out, e)
		}
	}
	return out
}

// finished reports whether an entrant came to the end.
func (c *course) finished(e *entrant) bool { return e.err == nil && len(e.nats) == len(c.rounds) }

// better reports whether an entrant came farther than another one, or as far
// with more evidence.
func (c *course) better(e, than *entrant) bool {
	if than == nil || c.finished(e) != c.finished(than) {
		return than == nil || c.finished(e)
	}
	if len(e.nats) != len(than.nats) {
		return len(e.nats) > len(than.nats)
	}
	return e.last() > than.last()
}

// gain is by how much an entrant's evidence exceeds that of the log as it
// stands, for as long as both ran. Where that was given up before, it counts
// as keeping its distance from the best: the gain is then at least that.
func (e *entrant) gain(base, best *entrant) float64 {
	n, m := len(e.nats), len(base.nats)
	if n <= m {
		return e.last() - base.nats[n-1]
	}
	return e.last() - best.nats[n-1] + best.nats[m-1] - base.nats[m-1]
}
