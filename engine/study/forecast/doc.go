// Package forecast says beforehand how good positions will be along a planned
// route, or anywhere on a map: for who has to decide where a map is good enough.
//
// A route (routefile.go) is laid on the map (path.go, match.go) and a suite's
// sensors on the route (plan.go). What they will measure is invented by the suite's
// own models (world.go, weighing.go): the forecast believes the suite as the filter
// does, and is as good as that.
//
//   - The Cramér–Rao recursion (recursion.go) bounds the error of a vehicle of which
//     is known that there is no other place: quick, and on roads and over heights
//     within a few per cent of the radius that a located filter states.
//   - Runs (runs.go) filter drives that are simulated, and give quantiles of what
//     posteriors will state, and of their errors.
//   - Ambiguity (ambiguity.go) is the probability of being elsewhere that the filter
//     itself keeps after a stretch, if before it the place was hardly known.
//   - Weak stretches (weak.go) are those beyond the limit; what would help is
//     computed anew with it.
package forecast
