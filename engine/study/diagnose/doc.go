// Package diagnose says why a recorded drive went wrong: which usual mistake in
// its log explains it (Look, Run), and which measurement moved the belief how
// much around a time (Explain).
//
// # Trying mistakes
//
// The opening of the drive is replayed by sessions of their own, once as it
// stands and once with each usual mistake undone: signs and axes reversed,
// feet for metres, factors of ten, a sensor's clock a second off, longitude and
// latitude swapped, heights above another datum, directions from another north.
// What has a value (an offset, an angle) is searched for, first coarsely. The
// runs go side by side in rounds, and one that falls far behind is given up
// (race.go says how far, and why that loses nothing).
//
// The runs are compared by log evidence, the sum of ln p(measurement | all
// before), constants included, over the same measurements. So that it is the
// same thing that is compared,
//
//   - a mistake that changes the unit of a measurement that is weighed gains
//     ln|∂mended/∂recorded| for each, times its power: the density is that of
//     the number in the log. For heights in feet that is ln 0.3048. Without it
//     whatever shrinks numbers would win;
//   - motions are conditions and not measurements: they say where to look and
//     have no density. So is the altitude that comes with a clearance;
//   - a measurement that one run refuses counts there like an outlying fix
//     (floorNats); a mistake under which motions are refused that others take
//     is out;
//   - comparisons with the road, of which a longer way has more, count by what
//     they exceed the mean of a vehicle that follows its road: a longer way is
//     no gain in itself.
//
// All of them stay on the map's roads and are moved by nobody (onRoads): whoever
// may be anywhere explains every log a little, which hides what a mistake costs.
//
// Stated sigmas stay as they are: they come from data sheets and not from the
// instrument.
//
// A mistake is named if its gain leaves odds of a hundred to one for it
// (verdict.go), and with it every other that is not much worse: a sensor that
// is late looks like the others being early.
//
// # What speaks for a mistake
//
// A run is suspect if it is contradicted, never located, off the map's roads for
// half of it, located away from the truth, if a sensor's measurements are refused, or if a sensor fits badly: by
// the share of its measurements that are outliers. Of each the probability that
// it is one follows from its evidence: an outlier has the density w·f, weight
// and density of the flat part of its sensor's noise, and the measurement had
// p(z | all before), of which that is a part; so P(outlier | z) = w·f/p(z),
// exactly, whatever the belief. A tempered measurement counts by its power.
package diagnose
