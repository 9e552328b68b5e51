// Package summary turns a belief into the posterior that goes out: where the
// vehicle is, how sure that is, what else it could be, and how far off it may
// be at a stated risk.
//
// The belief is read as what it is, a mixture of Gaussians in the plane of the
// map's frame. Every figure is a figure of that mixture, not of one Gaussian
// fitted to it, so that none depends on the width of the cells:
//
//   - mean and covariance are its moments;
//   - a radius holds what it says around the mean, each Gaussian's own tail
//     counted (tail.go, radius.go);
//   - a mode is a peak of its density at the scale of the alert limit
//     (modes.go);
//   - the entropy is that of the density (quantities.go).
//
// On roads a belief says where along the road the vehicle is. The posterior
// adds a lateral spread across it, Options.LateralSigmaM: the lane, and the
// map's own error.
//
// Nothing here reads a clock, starts a goroutine or hides a random source; sums
// run in the order of the belief. The same calls give the same bits.
package summary
