package network

import (
	"math"

	"leadline/engine/filter"
)

// Sample fills the wanted columns of dst (dst.Wants) at positions alongM[i]
// metres from the start of chart[i]. A position beyond an end, or NaN, is read
// at the nearer end, NaN at the start.
//
// The tangent is that of the polyline, the derivative of East and North along
// the line up to the frame's scale (within 3.1e-5 of 1 in a map of 100 km);
// at a vertex it is that of the segment before. Heading is smoothed over 3 m
// each way and has no such jump (see headingKnots), is unwrapped along each
// chart, and Curvature is its derivative. HeadingVar is described in
// spread.go; its window is ±max(NarrowM, widthM/2), between the two windows
// that are stored by linear interpolation of the variance. Height is linear
// between stations at most 2 m apart, its slope the grade times the tangent.
//
// It allocates nothing if dst has room. Neighbouring positions cost least in
// ascending order, chart by chart.
func (m *Map) Sample(dst *filter.Columns, chart []int32, alongM []float64, widthM float64) {
	dst.Resize(dst.Wants, 1, len(chart))
	m.samplePosition(dst, chart, alongM)
	if dst.Wants&filter.WantHeading != 0 {
		m.sampleHeading(dst, chart, alongM, widthM)
	}
	if dst.Wants&filter.WantHeight != 0 {
		m.sampleHeight(dst, chart, alongM)
	}
}

// clampAlong returns s within [0, length], 0 for NaN.
func clampAlong(s, length float64) float64 {
	if !(s > 0) {
		return 0
	}
	return min(s, length)
}

// findSegment returns the i in [lo, hi-2] with at[i] < s ≤ at[i+1], or lo for
// s ≤ at[lo]. hint is a guess in that range, right for most neighbours.
func findSegment[T float32 | float64](at []T, lo, hi, hint int32, s T) int32 {
	if s > at[hint] || hint == lo {
		for range 4 {
			if hint+2 >= hi || s <= at[hint+1] {
				return hint
			}
			hint++
		}
		lo = hint
	} else {
		hi = hint + 1
	}
	hi -= 2
	for lo < hi {
		mid := int32(uint32(lo+hi) >> 1)
		if s <= at[mid+1] {
			hi = mid
		} else {
			lo = mid + 1
		}
	}
	return lo
}

func (m *Map) samplePosition(dst *filter.Columns, chart []int32, alongM []float64) {
	d := m.d
	alongM = alongM[:len(chart)]
	last, seg := int32(-1), int32(0)
	var from, to int32
	var a, e0, n0, perE, perN, tanE, tanN float64
	for i, c := range chart {
		if c != last {
			from, to = d.VertexStart[c], d.VertexStart[c+1]
			last, seg = c, from
			a = math.NaN()
		}
		s := clampAlong(alongM[i], d.Along[to-1])
		if k := findSegment(d.Along, from, to, seg, s); k != seg || a != a {
			seg = k
			a, e0, n0 = d.Along[k], d.East[k], d.North[k]
			dE, dN := d.East[k+1]-e0, d.North[k+1]-n0
			per := 1 / (d.Along[k+1] - a)
			perE, perN = float64(dE*per), float64(dN*per)
			norm := 1 / math.Sqrt(float64(dE*dE)+float64(dN*dN))
			tanE, tanN = float64(dE*norm), float64(dN*norm)
		}
		s -= a
		dst.East[i] = e0 + float64(s*perE)
		dst.North[i] = n0 + float64(s*perN)
		dst.TangentE[i] = tanE
		dst.TangentN[i] = tanN
	}
}

func (m *Map) sampleHeading(dst *filter.Columns, chart []int32, alongM []float64, widthM float64) {
	d := m.d
	alongM = alongM[:len(chart)]
	blend := (widthM/2 - NarrowM) / (m.wide - NarrowM)
	blend = min(max(blend, 0), 1)
	last, knot := int32(-1), int32(0)
	var from, to, station, stationLast int32
	var s0, h0, slope, perM, length float64
	for i, c := range chart {
		if c != last {
			from, to = d.KnotStart[c], d.KnotStart[c+1]
			station, stationLast = d.StationStart[c], d.StationStart[c+1]-2
			length, perM = m.lines[0].LengthM[c], m.stationsPerM[c]
			last, knot = c, from
			slope = math.NaN()
		}
		s := clampAlong(alongM[i], length)
		if k := findSegment(d.KnotAlong, from, to, knot, float32(s)); k != knot || slope != slope {
			knot = k
			s0, h0, slope = float64(d.KnotAlong[k]), float64(d.KnotHeading[k]), d.knotSlope(k)
		}
		dst.Heading[i] = h0 + float64((s-s0)*slope)
		dst.Curvature[i] = slope

		x := float64(s * perM)
		k := min(station+int32(x), stationLast)
		x -= float64(k - station)
		v0, v1 := float64(d.SpreadN[k]), float64(d.SpreadN[k+1])
		v := v0 + float64(x*(v1-v0))
		if blend > 0 {
			w0, w1 := float64(d.SpreadW[k]), float64(d.SpreadW[k+1])
			v += float64(blend * (w0 + float64(x*(w1-w0)) - v))
		}
		dst.HeadingVar[i] = float64(v * VarStep)
	}
}

func (m *Map) sampleHeight(dst *filter.Columns, chart []int32, alongM []float64) {
	d := m.d
	alongM = alongM[:len(chart)]
	if !m.HasHeights() {
		for i := range chart {
			dst.Height[i], dst.SlopeE[i], dst.SlopeN[i], dst.HeightVar[i] = math.NaN(), 0, 0, 0
		}
		return
	}
	last := int32(-1)
	var first, end int32
	var perM, length float64
	for i, c := range chart {
		if c != last {
			last = c
			first, end = d.StationStart[c], d.StationStart[c+1]-2
			perM, length = m.stationsPerM[c], m.lines[0].LengthM[c]
		}
		x := float64(clampAlong(alongM[i], length) * perM)
		k := min(first+int32(x), end)
		x -= float64(k - first)
		h0, h1 := float64(d.Height[k]), float64(d.Height[k+1])
		h := h0 + float64(x*(h1-h0))
		if h != h {
			dst.Height[i], dst.SlopeE[i], dst.SlopeN[i], dst.HeightVar[i] = h, 0, 0, 0
			continue
		}
		grade := float64((h1 - h0) * perM)
		dst.Height[i] = h
		dst.SlopeE[i] = float64(grade * dst.TangentE[i])
		dst.SlopeN[i] = float64(grade * dst.TangentN[i])
		v0, v1 := float64(d.HeightVar[k]), float64(d.HeightVar[k+1])
		dst.HeightVar[i] = v0 + float64(x*(v1-v0))
	}
}
