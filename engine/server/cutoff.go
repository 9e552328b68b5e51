package server

import (
	"context"
	"sync"
	"sync/atomic"
	"time"

	healthv1 "google.golang.org/grpc/health/grpc_health_v1"

	"leadline/engine/server/share"
	leadlinev1 "leadline/proto/leadline/v1"
)

// A server that cannot reach the broker that it shares may be alone in that, and
// vehicles still reach it: what it served, others serve by then. So it ends the
// streams of vehicles and sends those who call elsewhere. If the broker is away for
// all, as while a cluster elects, that would have vehicles wander about: so it asks the
// others, and stays as it is while those that answer are no better off.

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

// isOver reports whether a channel is closed.
func isOver(c <-chan struct{}) bool {
	select {
	case <-c:
		return true
	default:
		return false
	}
}

// watchLease notes when this server is cut off, until it stops.
func (s *Server) watchLease() {
	j := s.joined()
	if j == nil {
		return
	}
	const every = cutAfter / 20
	tick := time.NewTicker(every)
	defer tick.Stop()
	var asking chan bool
	stop, cancel := s.untilDraining(context.Background())
	defer cancel()
	for held := time.Now(); ; {
		now := time.Now()
		status := healthv1.HealthCheckResponse_NOT_SERVING
		if j.Fresh() {
			status, held = healthv1.HealthCheckResponse_SERVING, now
		} else if asking == nil {
			asking = make(chan bool, 1)
			go func() { asking <- s.awayForAll(stop, j.Known()) }()
		}
		s.health.SetServingStatus(leaseService, status)
		s.shared.cut.put(now.Sub(held) >= cutAfter)
		select {
		case <-tick.C:
		case away := <-asking:
			if asking = nil; away {
				held = time.Now()
			}
			select {
			case <-tick.C:
			case <-s.draining:
			}
		case <-s.draining:
		}
		if isOver(s.draining) {
			if asking != nil {
				<-asking
			}
			return
		}
	}
}

// leaseService is what the health service calls a server's lease: it serves while that
// holds. It is for other servers.
const leaseService = "leadline.lease"

// askedFor is for how long another server is waited for.
const askedFor = 500 * time.Millisecond

// awayForAll reports whether other servers answer, or there are none, and none has a
// lease.
func (s *Server) awayForAll(ctx context.Context, others []share.Server) bool {
	ctx, cancel := context.WithTimeout(ctx, askedFor)
	defer cancel()
	var answered, leased atomic.Int64
	var all sync.WaitGroup
	for _, at := range others {
		all.Go(func() {
			c, err := s.shared.peers.conn(at.Address)
			if err != nil {
				return
			}
			r, err := healthv1.NewHealthClient(c).Check(ctx, &healthv1.HealthCheckRequest{Service: leaseService})
			switch {
			case err != nil:
			case r.GetStatus() == healthv1.HealthCheckResponse_SERVING:
				leased.Add(1)
			case r.GetStatus() == healthv1.HealthCheckResponse_NOT_SERVING:
				answered.Add(1)
			}
		})
	}
	all.Wait()
	return leased.Load() == 0 && (answered.Load() > 0 || len(others) == 0)
}
