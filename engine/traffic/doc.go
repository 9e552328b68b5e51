// Package traffic follows an unknown number of vehicles that carry nothing and
// have no name past posts at the roadside, which hear from which direction they
// sound.
//
// Each vehicle is a label, the probability that it exists, and a density over
// position along the road and signed speed, on a grid. Vehicles that have not
// been heard yet are an intensity over the same; they enter at the road's ends.
// A scan is what a post hears at a time: bearings of vehicles, which are missed
// now and then, and bearings of nothing. Which bearing is whose is summed over,
// exactly; sound's way to the post takes its time.
//
// Nothing here does I/O, reads a clock, starts a goroutine or hides a random
// source: the same scans give the same bits.
package traffic
