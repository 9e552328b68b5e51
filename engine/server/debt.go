package server

import (
	"runtime"
	"time"
)

// What a server would have to compute again if it was killed now is its debt: the
// time that drives have taken since their last checkpoints. Past a bound those
// that owe the most write checkpoints, so that a server is back soon however many
// drives it has, as long as the disk keeps up with them.
const (
	// debtMost is the debt for each processor beyond which checkpoints are asked
	// for. A killed server is to be back within 2 s: what is left is for reading
	// the journal.
	debtMost = 400 * time.Millisecond
	// debtEvery is how often it is looked at, and the least time between two
	// checkpoints of a drive.
	debtEvery = time.Second
	// debtBytes is about how many bytes a second of checkpoints are asked for.
	debtBytes = 8 << 20
)

// owes adds to a drive's debt what it has taken since a time.
func (o *owner) owes(since time.Time) { o.rec.checks.debt.Add(int64(time.Since(since))) }

// watchDebt asks for checkpoints until the server stops.
func (s *Server) watchDebt() {
	if s.journal == nil {
		return
	}
	tick := time.NewTicker(debtEvery)
	defer tick.Stop()
	for {
		select {
		case <-s.draining:
			return
		case <-tick.C:
			s.settleDebt(time.Now())
		}
	}
}

// settleDebt asks drives for checkpoints if all together owe too much.
func (s *Server) settleDebt(now time.Time) {
	s.mu.Lock()
	defer s.mu.Unlock()
	most, sum := int64(debtMost)*int64(runtime.GOMAXPROCS(0)), int64(0)
	for _, o := range s.owners {
		sum += o.rec.checks.debt.Load()
	}
	if sum <= most {
		return
	}
	for _, o := range s.owners {
		c := &o.rec.checks
		pause := max(debtEvery, time.Duration(float64(c.size.Load())*float64(len(s.owners))/debtBytes*float64(time.Second)))
		if c.debt.Load() <= most/int64(len(s.owners)) || now.Sub(c.asked) < pause {
			continue
		}
		c.asked = now
		c.pressed.Store(true)
		o.rec.wake()
	}
}
