package diagnose

import "errors"

// Work is counted in cells or Gaussians that are moved or weighed, which is
// what a session's time goes into: it is a function of the log, and not of the
// machine, so that what is tried is, too.
//
// budget is the work that a diagnosis may take.
type budget struct {
	most, spent float64
}

const (
	// workPerS is the work of one second of one core (measured, see
	// BenchmarkWork; within a factor of two of it on roads and planes).
	workPerS = 7e5
	// timesReplay is how many replays' worth a diagnosis may take that is made
	// unasked; leastS and mostS bound it, in seconds of one core.
	timesReplay, leastS, mostS = 60.0, 10.0, 60.0
	// A mistake that takes more than one costlyShare-th of the budget is out:
	// it leaves the vehicle anywhere, and explains nothing.
	costlyShare = 8.0
)

var errCostly = errors.New("it takes too much work")

// budgetOf is the budget beside a replay that was recorded; nil: none was.
func budgetOf(replay *Record) budget {
	if replay == nil {
		return budget{most: mostS * workPerS}
	}
	return budget{most: min(max(timesReplay*replay.work, leastS*workPerS), mostS*workPerS)}
}

// work is what an entrant has taken.
func (e *entrant) work() float64 {
	if e.run == nil {
		return 0
	}
	return e.run.log.work
}

// cut ends the opening after a round if the next one would take more than what
// is left: about as much as those who go on have taken so far, since it is as
// long as all before.
func (c *course) cut(all, goOn []*entrant, round int) {
	if !c.mayCut || round == len(c.rounds)-1 {
		return
	}
	sum := c.budget.spent
	for _, e := range all {
		sum += e.work()
	}
	for _, e := range goOn {
		sum += e.work()
	}
	if sum > c.budget.most {
		c.rounds, c.whole = c.rounds[:round+1], c.rounds
	}
}

// cutShort reports whether all but the finalists end before the opening does.
func (c *course) cutShort() bool { return c.whole != nil }

// left reports whether there is work left to do.
func (c *course) left() bool { return c.budget.spent < c.budget.most }
