// Package monitor tells from a stream of measurements whether they are as they
// are said to be: cumulative sum tests (Page, "Continuous inspection schemes",
// Biometrika 41, 1954) on normal scores, for each sensor and for all together.
//
// A score z = Φ⁻¹(u) is where a measurement fell in the distribution that was
// expected of it: standard normal, one like the other, if belief, map and noise
// are right. A chart adds up the log likelihood ratio of a score under what it
// watches for, and starts again from 0 whenever that falls below:
//
//	S ← max(0, S + ln p₁(z) - ln p₀(z)),
//
// which is alarmed from a threshold on. Where the noise allows for outliers, scores of
// large errors saturate: there the chart of the spread adds the log ratio of the
// measurement's densities with noise twice as wide and as stated, which is given with
// the score, under the same threshold. The threshold is computed from the rate
// of false alarms that is allowed (runlength.go). Nothing here has a clock: times
// come with the scores, so the same scores give the same alarms.
package monitor
