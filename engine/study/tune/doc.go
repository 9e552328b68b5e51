// Package tune finds noise and drift figures of a suite by which recorded drives are
// the most probable: maximum likelihood, the likelihood being the evidence that the
// filter sums up, which integrates over all ways that a vehicle may have gone.
//
// Figures are taken by their logarithm, within bounds. The search is Nelder and
// Mead's (gonum/optimize), since beliefs on a grid leave the evidence a little rough;
// standard errors come from the curvature at the maximum, by differences wide enough
// to see over that. What the drives do not say is said, and not a number: a figure
// that may be anything within its bounds, or of which only a limit is known.
//
// Measurements of a sensor whose noise is tuned lose the sigmas they carry, which
// would keep the suite's from having any effect.
package tune
