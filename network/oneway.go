package network

import (
	"math"

	"leadline/engine/geo"
)

// Arrows of one-way roads stand this far apart, and none on what is shorter
// than the least, in pixels.
const (
	arrowEvery  = 90.0
	arrowLeast  = 14.0
	arrowLength = 9.0
	arrowHalf   = 4.5
)

// oneWay reports whether a road can be driven in one direction alone.
func (m *Map) oneWay(c int32) bool { return m.Twin(c) < 0 }

// oneWays counts the roads that can be driven in one direction alone.
func (m *Map) oneWays() (n int) {
	for c := range int32(m.Charts()) {
		if m.oneWay(c) {
			n++
		}
	}
	return n
}

// arrows puts arrows on the one-way roads, towards where they may be driven.
func (c *canvas) arrows(m *Map) {
	var line []geo.Point
	for chart := range int32(m.Charts()) {
		if !m.oneWay(chart) {
			continue
		}
		east, north := m.Polyline(chart)
		line = line[:0]
		for i := range east {
			line = append(line, c.pixel(geo.Point{E: east[i], N: north[i]}))
		}
		for _, a := range arrowsOn(line) {
			c.polygon(a)
		}
	}
	c.paint(inkColour)
}

// arrowsOn are the arrows on a line, evenly spread over its length.
func arrowsOn(line []geo.Point) (out [][]geo.Point) {
	length := 0.0
	for i := 1; i < len(line); i++ {
		length += line[i].Sub(line[i-1]).Norm()
	}
	if length < arrowLeast {
		return nil
	}
	n := max(1, math.Floor(length/arrowEvery))
	next, passed := length/n/2, 0.0
	for i := 1; i < len(line); i++ {
		v := line[i].Sub(line[i-1])
		l := v.Norm()
		for ; l > 0 && next <= passed+l; next += length / n {
			at, u := (next-passed)/l, geo.Point{E: v.E / l, N: v.N / l}
			out = append(out, arrow(geo.Point{E: line[i-1].E + at*v.E, N: line[i-1].N + at*v.N}, u))
		}
		passed += l
	}
	return out
}

// arrow is a triangle around a point that points along a unit vector.
func arrow(p, u geo.Point) []geo.Point {
	tail := geo.Point{E: p.E - arrowLength/2*u.E, N: p.N - arrowLength/2*u.N}
	across := geo.Point{E: -arrowHalf * u.N, N: arrowHalf * u.E}
	return []geo.Point{{E: p.E + arrowLength/2*u.E, N: p.N + arrowLength/2*u.N}, tail.Add(across), tail.Sub(across)}
}
