// Package sensor holds the kinds of measurement, what each says about a
// vehicle, and the suite: a vehicle's sensors, their mounting and error
// models.
//
// A kind is either a motion or a likelihood. Motion collects the increments
// of one time segment and turns them into one filter.Step; Likelihoods turns
// any other measurement into what filter.Update takes. Suite.Prepare comes
// first: it fills in what the suite knows and checks the rest.
//
// Outliers are a flat part of a measurement's density, with a probability
// from the suite and a density that is one over the documented span of the
// kind: 1/2π for directions, one over the suite's plausible heights for
// heights, one over the largest range for ranges, and one over a square of
// 10 km for fixes. Measurements whose errors last longer than their spacing
// are tempered by Power = spacing / correlation time, so that their rate does
// not count.
package sensor
