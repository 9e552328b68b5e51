// Package geo holds geodetic positions, local metric frames, angles, and the
// Field: a height with its gradient, sampled at points.
//
// Inside, angles are radians and lengths metres. Degrees appear only in
// functions whose names say so. Directions are clockwise from north.
package geo
