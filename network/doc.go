// Package network holds road maps: directed edges between junctions, cut into
// cells, as a filter.LineSpace.
//
// A Graph is roads as they were read and repaired (leadline/network/roadfile
// does that); New turns it into a Map, whose columns (Data) are what a
// compiled map file holds, so that a Map from New and one from a memory-mapped
// file are the same arrays. A Map is immutable.
//
// A directed edge, called a chart, is one direction of travel along a road
// between two junctions; a road open both ways is two charts, each the other's
// twin. Its geometry is a polyline in the map's metric frame, with the
// distance along it in true metres: frame length divided by the frame's scale
// there.
package network
