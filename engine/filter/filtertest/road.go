package filtertest

import (
	"cmp"
	"math"
	"slices"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// Road is a LineSpace of smooth lines: each chart is a chain of arcs, so that
// position, tangent, heading and curvature have closed forms. Topology and
// cells are those of a Graph.
type Road struct {
	*Graph
	charts [][]arc
	// HeadingVar is what Sample says everywhere, rad².
	HeadingVar float64
	// Height, if set, is the height over the plane and its gradient.
	Height func(e, n float64) (h, gE, gN float64)
}

// Arc is a piece of a line: its length and curvature (rad/m, positive to the
// right).
type Arc struct{ LengthM, Curvature float64 }

// Course is a chart of a Road: where it begins, in which direction, and its
// arcs.
type Course struct {
	Start      geo.Point
	HeadingRad float64
	Arcs       []Arc
}

// arc is an Arc with its beginning.
type arc struct {
	Arc
	fromM      float64
	at         geo.Point
	headingRad float64
}

var _ filter.LineSpace = (*Road)(nil)

// NewRoad makes the space; next is as in Graph.
func NewRoad(cellM float64, courses []Course, next [][]Link) *Road {
	r := &Road{HeadingVar: 0.03}
	var lengths []float64
	for _, c := range courses {
		at, heading, from := c.Start, c.HeadingRad, 0.0
		var arcs []arc
		for _, a := range c.Arcs {
			now := arc{a, from, at, heading}
			arcs = append(arcs, now)
			at, heading = now.position(a.LengthM)
			from += a.LengthM
		}
		r.charts = append(r.charts, arcs)
		lengths = append(lengths, from)
	}
	r.Graph = NewGraph(cellM, lengths, next)
	return r
}

// position returns place and heading s metres along an arc.
func (a arc) position(s float64) (geo.Point, float64) {
	h := a.headingRad + a.Curvature*s
	if math.Abs(a.Curvature) < 1e-12 {
		sin, cos := math.Sincos(a.headingRad)
		return a.at.Add(geo.Point{E: s * sin, N: s * cos}), h
	}
	s0, c0 := math.Sincos(a.headingRad)
	s1, c1 := math.Sincos(h)
	return a.at.Add(geo.Point{E: (c0 - c1) / a.Curvature, N: (s1 - s0) / a.Curvature}), h
}

// At returns place, heading and curvature at a distance along a chart,
// clamped to its ends.
func (r *Road) At(chart int32, alongM float64) (at geo.Point, headingRad, curvature float64) {
	arcs := r.charts[chart]
	s := math.Min(math.Max(alongM, 0), r.LengthM[chart])
	i := len(arcs) - 1
	for i > 0 && s < arcs[i].fromM {
		i--
	}
	at, h := arcs[i].position(s - arcs[i].fromM)
	return at, h, arcs[i].Curvature
}

// Fingerprint implements filter.Space.
func (r *Road) Fingerprint() string { return "test road" }

// Sample implements filter.LineSpace.
func (r *Road) Sample(dst *filter.Columns, chart []int32, alongM []float64, _ float64) {
	for i := range alongM {
		at, h, curvature := r.At(chart[i], alongM[i])
		dst.East[i], dst.North[i] = at.E, at.N
		dst.TangentE[i], dst.TangentN[i] = math.Sincos(h)
		if dst.Wants&filter.WantHeading != 0 {
			dst.Heading[i], dst.Curvature[i], dst.HeadingVar[i] = h, curvature, r.HeadingVar
		}
		if dst.Wants&filter.WantHeight != 0 {
			dst.Height[i], dst.SlopeE[i], dst.SlopeN[i], dst.HeightVar[i] = math.NaN(), 0, 0, 0
			if r.Height != nil {
				z, gE, gN := r.Height(at.E, at.N)
				grade := gE*dst.TangentE[i] + gN*dst.TangentN[i]
				dst.Height[i], dst.SlopeE[i], dst.SlopeN[i] = z, grade*dst.TangentE[i], grade*dst.TangentN[i]
			}
		}
	}
}

var _ filter.Nearby = (*Road)(nil)

// NearLines implements filter.Nearby by trying each decimetre of every chart.
func (r *Road) NearLines(dst []filter.Nearest, p geo.Point, radiusM float64) []filter.Nearest {
	first := len(dst)
	for c := range r.charts {
		best := filter.Nearest{Chart: int32(c), DistM: math.Inf(1)}
		for s := 0.0; s < r.LengthM[c]+0.1; s += 0.1 { // At stays at the end
			at, _, _ := r.At(int32(c), s)
			if d := at.Sub(p).Norm(); d < best.DistM {
				best.AlongM, best.DistM = math.Min(s, r.LengthM[c]), d
			}
		}
		if best.DistM <= radiusM {
			dst = append(dst, best)
		}
	}
	slices.SortStableFunc(dst[first:], func(a, b filter.Nearest) int { return cmp.Compare(a.DistM, b.DistM) })
	return dst
}
