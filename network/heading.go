package network

import (
	"slices"

	"leadline/engine/geo"
)

// smoothM is the half width of the window over which the heading of the
// polyline is averaged: 3 m each way. A vertex of a drawn road stands for a
// bend, and a road vehicle with a wheelbase of 3 to 6 m turns through it over
// about its own length on either side.
const smoothM = 3.0

// segmentHeading returns the frame heading of segment i of the vertices.
func (d *Data) segmentHeading(i int32) float64 {
	return geo.Heading(geo.Point{E: d.East[i+1] - d.East[i], N: d.North[i+1] - d.North[i]})
}

// turnAt is a change of the polyline's heading at a distance along a chart,
// which may lie a little beyond its ends.
type turnAt struct{ along, by float64 }

// headingKnots computes the smoothed heading
//
//	H(s) = 1/2w ∫ h(s+u) du over |u| < w = smoothM,
//
// where h is the piecewise constant heading of the polyline, unwrapped along
// the chart. H is continuous and piecewise linear, with a corner w before and
// after each vertex; its slope is the curvature. It is stored as those
// corners (knots). Beyond a chart's end h goes on into the next chart where
// there is exactly one and that one is reached from here alone, so that H is
// continuous (modulo 2π) where a road merely changes its name; at other ends
// the heading of the last segment goes on.
func (d *Data) headingKnots(m *Map) {
	n := d.Charts()
	d.KnotStart = make([]int32, 1, n+1)
	var turns []turnAt
	for c := range int32(n) {
		var first float64
		turns, first = d.turns(m, c, turns[:0])
		d.appendKnots(c, first, turns)
		d.KnotStart = append(d.KnotStart, int32(len(d.KnotAlong)))
	}
}

// turns returns, in order, the turns of the polyline within smoothM of chart
// c, and the heading before the first of them.
func (d *Data) turns(m *Map, c int32, turns []turnAt) ([]turnAt, float64) {
	a, b := d.VertexStart[c], d.VertexStart[c+1]
	length := d.Along[b-1]
	first := d.segmentHeading(a)

	// Backwards over the start, as far as the window reaches.
	at, h := c, first
	for offset := 0.0; ; {
		prev, ok := m.continues(&m.backward, &m.forward, at)
		if !ok {
			break
		}
		va, vb := d.VertexStart[prev], d.VertexStart[prev+1]
		end := d.Along[vb-1]
		for i := vb - 2; i >= va; i-- {
			g := d.segmentHeading(i)
			by := geo.WrapPi(h - g)
			turns = append(turns, turnAt{offset + d.Along[i+1] - end, by})
			h = g
			first -= by
			if offset+d.Along[i]-end < -smoothM {
				break
			}
		}
		offset -= end
		if at = prev; offset < -smoothM || at == c {
			break
		}
	}
	slices.Reverse(turns)

	h = d.segmentHeading(a)
	for i := a + 1; i < b-1; i++ {
		g := d.segmentHeading(i)
		turns = append(turns, turnAt{d.Along[i], geo.WrapPi(g - h)})
		h = g
	}

	at = c
	for offset := length; ; {
		next, ok := m.continues(&m.forward, &m.backward, at)
		if !ok {
			break
		}
		va, vb := d.VertexStart[next], d.VertexStart[next+1]
		for i := va; i < vb-1; i++ {
			g := d.segmentHeading(i)
			turns = append(turns, turnAt{offset + d.Along[i], geo.WrapPi(g - h)})
			h = g
			if offset+d.Along[i+1] > length+smoothM {
				break
			}
		}
		offset += d.Along[vb-1]
		if at = next; offset > length+smoothM || at == c {
			break
		}
	}
	return turns, first
}

// appendKnots integrates the turns: each adds by·clamp((s-along+w)/2w, 0, 1).
func (d *Data) appendKnots(c int32, first float64, turns []turnAt) {
	length := d.Along[d.VertexStart[c+1]-1]
	type corner struct{ at, slope float64 }
	corners := make([]corner, 0, 2*len(turns)+1)
	h, slope := first, 0.0
	for _, t := range turns {
		by := t.by / (2 * smoothM)
		for _, x := range [2]corner{{t.along - smoothM, by}, {t.along + smoothM, -by}} {
			switch {
			case x.at <= 0:
				h -= float64(x.slope * x.at)
				slope += x.slope
			case x.at < length:
				corners = append(corners, x)
			}
		}
	}
	slices.SortStableFunc(corners, func(a, b corner) int {
		switch {
		case a.at < b.at:
			return -1
		case a.at > b.at:
			return 1
		}
		return 0
	})
	knot := func(s, h float64) {
		// Positions are kept as float32: a knot that rounds onto the one
		// before moves it by less than that rounding.
		last := len(d.KnotAlong) - 1
		if last >= int(d.KnotStart[c]) && float32(s) <= d.KnotAlong[last] {
			return
		}
		d.KnotAlong = append(d.KnotAlong, float32(s))
		d.KnotHeading = append(d.KnotHeading, float32(h))
	}
	s := 0.0
	knot(0, h)
	for _, x := range corners {
		h += float64(slope * (x.at - s))
		s = x.at
		knot(s, h)
		slope += x.slope
	}
	h += float64(slope * (length - s))
	if last := len(d.KnotAlong) - 1; last > int(d.KnotStart[c]) && float32(length) <= d.KnotAlong[last] {
		d.KnotHeading[last] = float32(h)
		return
	}
	if float32(length) == 0 { // a length below the smallest float32
		d.KnotAlong, d.KnotHeading = append(d.KnotAlong, 1), append(d.KnotHeading, float32(h))
		return
	}
	knot(length, h)
}

// continues reports the one chart that c leads to by links, if that one is
// reached by no other and is not c's twin.
func (m *Map) continues(links, reverse interface {
	Of(int32) ([]int32, []float64)
}, c int32,
) (int32, bool) {
	to, _ := links.Of(c)
	if len(to) != 1 || to[0] == m.d.Twin[c] {
		return -1, false
	}
	if from, _ := reverse.Of(to[0]); len(from) != 1 {
		return -1, false
	}
	return to[0], true
}
