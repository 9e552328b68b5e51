package server

import (
	"math"
	"runtime"
	"sync/atomic"
	"time"
)

// load is how busy the processors are with drives: how many take measurements
// or wait for a processor to do so, for each processor, averaged over a while.
// Past a limit less is told of them, and past refuseAt times the limit no new one
// is taken; what the posteriors are does not depend on it.
type load struct {
	limit   float64
	over    time.Duration
	working atomic.Int64
	average atomic.Uint64 // the bits of a float64
}

const (
	// refuseAt is how many times the limit new drives are refused.
	refuseAt = 4
	// thinnedTo is how often a vehicle's posterior is told to those who follow it
	// while less is told.
	thinnedTo = time.Second
)

// work counts a drive that begins to take measurements until done is called.
func (l *load) work() (done func()) {
	l.working.Add(1)
	return func() { l.working.Add(-1) }
}

// value is the load now.
func (l *load) value() float64 { return math.Float64frombits(l.average.Load()) }

// thins reports whether less is to be told, and refuses whether no new drive is
// to be taken.
func (l *load) thins() bool   { return l.value() >= l.limit }
func (l *load) refuses() bool { return l.value() >= refuseAt*l.limit }

// sample takes in how many are at work, dt after the last time. One goroutine
// calls it.
func (l *load) sample(dt time.Duration) {
	now := float64(l.working.Load()) / float64(runtime.GOMAXPROCS(0))
	share := float64(dt) / float64(dt+l.over)
	l.average.Store(math.Float64bits(l.value() + share*(now-l.value())))
}

// watchLoad samples until the server stops.
func (s *Server) watchLoad() {
	every := s.load.over / 20
	tick := time.NewTicker(every)
	defer tick.Stop()
	for {
		select {
		case <-s.draining:
			return
		case <-tick.C:
			s.load.sample(every)
		}
	}
}

// mayOpen refuses a new drive when the processors or the memory have enough to do
// with those that there are.
func (s *Server) mayOpen() error {
	if s.load.refuses() {
		return full("load", s.cfg.Limits.Load, "open: the server is overloaded, at %.0f drives at work for each processor: try later; drives that are open go on", s.load.value())
	}
	cells := 0
	s.mu.Lock()
	for _, o := range s.owners {
		cells += int(o.cells.Load())
	}
	s.mu.Unlock()
	if most := s.cfg.Limits.CellsInAll; cells >= most {
		return full("cells", most, "open: the beliefs of the drives that are open have %d cells, and %d are allowed: try later, or raise the limit", cells, most)
	}
	return nil
}
