package share

import (
	"hash/fnv"
	"maps"
	"slices"
	"time"
)

// Server is one of those that share a journal.
type Server struct {
	ID string `json:"id"`
	// Address is where the others reach it.
	Address string `json:"address"`
	Version string `json:"version"`
	// Leaving says that it takes nothing any more.
	Leaving bool `json:"leaving,omitempty"`
	// Beat changes with each renewal.
	Beat uint64 `json:"beat"`
}

// core is what one server knows, and what follows from it. It reads no clock and
// does nothing itself: whoever drives it does what next says, and tells it what
// came of that. It is not safe for several goroutines.
type core struct {
	self    Server
	lease   time.Duration
	servers map[string]*seen
	parts   []part
	// renewed is when the last renewal that came through was sent. term changes with
	// one that came so late that others may have taken what this server had.
	renewed time.Time
	term    uint64
	began   time.Time // of the term
}

// seen is another server, or this one.
type seen struct {
	Server
	revision uint64
	at       time.Time // when it was seen to have changed
}

// part is a partition.
type part struct {
	owner    string // of its key; empty: nobody's
	revision uint64 // of its key, 0: there never was one
	free     time.Time
	state    state
	term     uint64    // in which its key was written by this server
	retry    time.Time // not before
}

type state int

const (
	away state = iota // another server's, or nobody's
	mine
)

// verb is what is to be done.
type verb int

const (
	nothing verb = iota
	drop         // stop at once what this server does with a partition: another has it
	take         // read a partition, whose key names this server, and serve it
	give         // stop in order, then free the key
	claim        // write the key
	hold         // write it once more, of a partition that is served: it may be another's
	sweep        // take out the key of a server that is long dead
)

// step is one thing to do.
type step struct {
	verb      verb
	partition int
	revision  uint64 // of the key that is written
	// dead is the server that a claim is against, or that is swept, and deadAt the
	// revision of its key: it lives if that is another one.
	dead   string
	deadAt uint64
}

func newCore(self Server, partitions int, lease time.Duration) *core {
	return &core{self: self, lease: lease, servers: map[string]*seen{}, parts: make([]part, partitions)}
}

// sawServer notes a server's key; gone says that it was taken out.
func (c *core) sawServer(id string, s Server, revision uint64, gone bool, now time.Time) {
	old := c.servers[id]
	switch {
	case old != nil && old.revision >= revision:
	case gone:
		delete(c.servers, id)
	default:
		c.servers[id] = &seen{s, revision, now}
	}
}

// sawPartition notes a partition's key; an empty owner says that it is free.
func (c *core) sawPartition(i int, owner string, revision uint64, now time.Time) {
	p := &c.parts[i]
	if revision <= p.revision {
		return
	}
	if owner == "" || owner != p.owner {
		p.free = now
	}
	p.owner, p.revision = owner, revision
}

// renew notes a renewal that came through.
func (c *core) renew(sent, received time.Time) {
	if received.Sub(c.renewed) >= c.holds() {
		c.term++
		c.began = received
	}
	c.renewed = sent
}

// holds is for how long after a renewal was sent no other server can have seen the
// lease end.
func (c *core) holds() time.Duration { return c.lease * 4 / 5 }

// wrote notes that this server has written a partition's key.
func (c *core) wrote(i int, owner string, revision uint64, now time.Time) {
	c.sawPartition(i, owner, revision, now)
	c.parts[i].term = c.term
}

// answers reports whether this server may speak for a partition.
func (c *core) answers(i int, now time.Time) bool {
	p := &c.parts[i]
	return p.owner == c.self.ID && p.state == mine && p.term == c.term && c.fresh(now)
}

// fresh reports whether what this server knows of its own partitions holds: no
// other one can have seen its lease end.
func (c *core) fresh(now time.Time) bool { return now.Sub(c.renewed) < c.holds() }

// alive reports whether a server is.
func (c *core) alive(id string, now time.Time) bool {
	s := c.servers[id]
	return id == c.self.ID || s != nil && now.Sub(s.at) < c.lease
}

// maybeAlive is alive for those who would only ask it: a server that cannot renew, or
// could not just now, does not hear of others, which may renew all the same.
func (c *core) maybeAlive(id string, now time.Time) bool {
	return c.alive(id, now) || c.servers[id] != nil && (!c.fresh(now) || now.Sub(c.began) < c.lease)
}

// counts are how many partitions each server has that shares in them.
func (c *core) counts(now time.Time) map[string]int {
	n := map[string]int{}
	for id, s := range c.servers {
		if c.alive(id, now) && !s.Leaving {
			n[id] = 0
		}
	}
	if !c.self.Leaving {
		n[c.self.ID] = 0
	}
	for i := range c.parts {
		if _, shares := n[c.parts[i].owner]; shares {
			n[c.parts[i].owner]++
		}
	}
	return n
}

// next is what this server should do now.
func (c *core) next(now time.Time) step {
	for i := range c.parts {
		p := &c.parts[i]
		switch {
		case p.state == mine && p.owner != c.self.ID:
			return step{verb: drop, partition: i}
		case p.state == away && p.owner == c.self.ID && !now.Before(p.retry):
			if c.self.Leaving {
				return step{verb: give, partition: i, revision: p.revision}
			}
			return step{verb: take, partition: i}
		}
	}
	if !c.fresh(now) {
		return step{} // whoever cannot renew is not to take from others
	}
	for i := range c.parts {
		if p := &c.parts[i]; p.state == mine && p.term != c.term && !now.Before(p.retry) {
			return step{verb: hold, partition: i, revision: p.revision}
		}
	}
	n := c.counts(now)
	own, shares := n[c.self.ID]
	if !shares {
		return step{}
	}
	least, most := len(c.parts)/len(n), (len(c.parts)+len(n)-1)/len(n)
	poor := 0 // others that have less than everybody should
	for id, k := range n {
		if id != c.self.ID && k < least {
			poor++
		}
	}
	if own > most || own > least && poor > 0 {
		for i := len(c.parts) - 1; i >= 0; i-- {
			if p := &c.parts[i]; p.owner == c.self.ID && p.state == mine {
				return step{verb: give, partition: i, revision: p.revision}
			}
		}
	}
	if s := c.claim(now, own < least || own < most && poor == 0); s.verb != nothing {
		return s
	}
	for _, id := range slices.Sorted(maps.Keys(c.servers)) {
		if s := c.servers[id]; now.Sub(s.at) > 4*c.lease && id != c.self.ID {
			return step{verb: sweep, dead: id, deadAt: s.revision}
		}
	}
	return step{}
}

// claim chooses a partition that is free or a dead server's: if this server should
// have more, or if nobody else has taken it for as long as a lease.
func (c *core) claim(now time.Time, more bool) (best step) {
	var weight uint64
	for i := range c.parts {
		p := &c.parts[i]
		if p.owner != "" && c.alive(p.owner, now) || now.Before(p.retry) {
			continue
		}
		if p.owner != "" && now.Sub(c.began) < c.lease {
			continue // whoever could not renew has not heard of others that could not either
		}
		since := p.free
		if s := c.servers[p.owner]; s != nil {
			since = s.at.Add(c.lease)
		}
		if !more && now.Sub(since) < c.lease {
			continue
		}
		// Each server goes by an order of its own, so that they seldom want the same.
		if w := c.weight(i); best.verb == nothing || w > weight {
			weight, best = w, step{verb: claim, partition: i, revision: p.revision, dead: p.owner}
			if s := c.servers[p.owner]; s != nil {
				best.deadAt = s.revision
			}
		}
	}
	return best
}

func (c *core) weight(i int) uint64 {
	h := fnv.New64a()
	h.Write([]byte(c.self.ID))
	h.Write([]byte{byte(i), byte(i >> 8)})
	x := h.Sum64()
	x = (x ^ x>>30) * 0xbf58476d1ce4e5b9 // the finalizer of splitmix64
	return x ^ x>>27
}

// later has a partition left alone for a while, since something failed.
func (c *core) later(i int, until time.Time) { c.parts[i].retry = until }
