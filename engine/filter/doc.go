// Package filter carries a probability over a map's cells through motion and
// measurement.
//
// A Belief is a set of Gaussians, each at home in one cell: a mass, and a
// mean and covariance over a few quantities, of which the first are the
// position within the cell (one along a road, two on a plane) and the rest
// are nuisances such as the vehicle's heading or the odometer's scale. A
// plane without nuisances needs none of that: there a belief is mass on the
// points of a lattice, kept in tiles.
//
// A Space is topology and columns: how long the charts are, what they lead
// to, and what a map says at a position. A Step moves a belief (Predict), a
// Likelihood reweights it (Update). Predict is the one place that moves,
// splits and merges Gaussians, always by moments and in a fixed order; Update
// is the one place that exponentiates and normalises.
//
// This is a marginalised (Rao-Blackwellised) filter on a grid: given the cell,
// the nuisances are linear and Gaussian, and each cell has a Kalman filter for
// them. docs/nuisances.md derives it, and states what merging loses.
//
// Nothing here does I/O, reads a clock, starts a goroutine or hides a random
// source: the same calls give the same bits.
package filter
