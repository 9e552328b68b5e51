package server

import (
	"sync/atomic"
	"time"

	leadlinev1 "leadline/proto/leadline/v1"
)

// A server that cannot reach the broker that it shares may be alone in that, and
// vehicles still reach it: what it served, others serve by then. So it ends the
// streams of vehicles and sends those who call elsewhere. If it is the broker that
// is away for all, they come back.

// errCutOff says so. Clients that know several servers turn to another one by what
// it is about.
var errCutOff = refuse(leadlinev1.Reason_REASON_RECOVERING, about{"server": "cut off"}, "this server is cut off from the broker that it shares with others: call another one")

const (
	// cutAfter is for how long a lease that could not be renewed must have been over:
	// others have claimed by then what this server had.
	cutAfter = 2 * time.Second
	// cutWait is for how long a call waits then.
	cutWait = time.Second
)

// spell is a channel that is closed while something lasts.
type spell struct {
	now  atomic.Pointer[chan struct{}]
	over bool // it is open
}

func (p *spell) wait() <-chan struct{} {
	if c := p.now.Load(); c != nil {
		return *c
	}
	return nil
}

// put says whether it lasts; one goroutine calls it.
func (p *spell) put(lasts bool) {
	switch c := p.now.Load(); {
	case !lasts && !p.over:
		fresh := make(chan struct{})
		p.now.Store(&fresh)
		p.over = true
	case lasts && p.over:
		close(*c)
		p.over = false
	}
}

// cutOff is closed while this server is cut off; nil where it shares nothing.
func (s *Server) cutOff() <-chan struct{} {
	if s.shared == nil {
		return nil
	}
	return s.shared.cut.wait()
}

// watchLease notes when this server is cut off, until it stops.
func (s *Server) watchLease() {
	j := s.joined()
	if j == nil {
		return
	}
	tick := time.NewTicker(cutAfter / 20)
	defer tick.Stop()
	for held := time.Now(); ; {
		now := time.Now()
		if j.Fresh() {
			held = now
		}
		s.shared.cut.put(now.Sub(held) >= cutAfter)
		select {
		case <-tick.C:
		case <-s.draining:
			return
		}
	}
}
