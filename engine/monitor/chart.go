package monitor

import (
	"math"

	"leadline/engine/kernel"
)

// What charts watch for.
const (
	// spreadRatio: errors of twice the standard deviation that was expected. A
	// ratio r has the drift -ln 2 + 0.375 r² a score: errors less than 1.36 times
	// as large as expected never build up.
	spreadRatio = 2.0
	// shiftSigma: errors about ±1.5 standard deviations instead of 0. The drift of
	// a shift s is 1.5 s - 1.125: shifts below 0.75 never build up.
	shiftSigma = 1.5
	// mostScore bounds what one measurement may say, however far out it lies: at
	// most 5.3 nats, so that no single one raises an alarm. A standard normal
	// score is beyond it once in 16 000.
	mostScore = 4.0
)

// statistic is a log likelihood ratio of a score, in nats.
type statistic int

const (
	spread statistic = iota
	high
	low
)

// ratio is ln p₁(z) - ln p₀(z).
func (s statistic) ratio(z float64) float64 {
	z = math.Max(-mostScore, math.Min(mostScore, z))
	switch s {
	case high:
		return shiftSigma*z - 0.5*shiftSigma*shiftSigma
	case low:
		return -shiftSigma*z - 0.5*shiftSigma*shiftSigma
	}
	return float64(spreadGain*float64(z*z)) - logSpreadRatio
}

// widening is what a score says of the spread: what was computed, where it was, within
// what a score may say.
func widening(z float64, ratios []float64, row int) float64 {
	if row < len(ratios) {
		return math.Max(-logSpreadRatio, math.Min(spread.ratio(mostScore), ratios[row]))
	}
	return spread.ratio(z)
}

const spreadGain = 0.5 * (1 - 1/(spreadRatio*spreadRatio))

var logSpreadRatio = kernel.Log(spreadRatio)

// below is the probability of a ratio of at most x for a standard normal score.
func (s statistic) below(x float64) float64 {
	if x >= s.ratio(mostScore) && s != low || s == low && x >= s.ratio(-mostScore) {
		return 1
	}
	if s != spread {
		z := (x + 0.5*shiftSigma*shiftSigma) / shiftSigma
		if z < -mostScore {
			return 0
		}
		return 1 - kernel.NormalUpper(z)
	}
	z2 := (x + logSpreadRatio) / spreadGain
	if z2 <= 0 {
		return 0
	}
	return 1 - 2*kernel.NormalUpper(math.Sqrt(z2))
}

// chart is one cumulative sum. Its threshold follows from the rate at which
// scores come, measured since the first.
type chart struct {
	what  statistic
	sum   float64
	limit float64 // the threshold, by the rate at the last score
	taken int
	first int64 // time of the first score
	// began is when the sum last left 0: the best guess of when the change was
	// (Page). raised is when it was alarmed.
	began, raised int64
	alarmed       bool
}

// take adds a score. everyS is for how long, on average, there is to be no false
// alarm.
//
// The sum stays at the threshold while it is alarmed, and the alarm ends when it
// is back at 0: when as much has spoken for what was expected as had to speak
// against it.
func (c *chart) take(at int64, z, everyS float64) { c.add(at, c.what.ratio(z), everyS) }

// add is take of what a score says, in nats.
func (c *chart) add(at int64, ratio, everyS float64) {
	if c.taken == 0 {
		c.first = at
	}
	c.taken++
	if c.sum == 0 {
		c.began = at
	}
	c.sum = math.Max(0, c.sum+ratio)
	c.limit = c.threshold(at, everyS)
	switch {
	case c.sum >= c.limit:
		c.sum = c.limit
		if !c.alarmed {
			c.alarmed, c.raised = true, at
		}
	case c.sum == 0:
		c.alarmed = false
	}
}

// threshold follows from the rate so far.
func (c *chart) threshold(at int64, everyS float64) float64 {
	spacingS := slowestS
	if c.taken > 1 {
		spacingS = float64(at-c.first) / 1e9 / float64(c.taken-1)
	}
	spacingS = math.Max(fastestS, math.Min(slowestS, spacingS))
	return threshold(c.what, everyS/spacingS)
}

// Scores count as coming once in fastestS to slowestS seconds.
const (
	fastestS = 0.01
	slowestS = 60.0
)
