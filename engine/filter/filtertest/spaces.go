// Package filtertest holds small spaces and likelihoods for tests, and the
// conformance tests that every Space and Likelihood passes.
package filtertest

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// Graph is a LineSpace of straight lines that all run north from the frame's
// origin: topology without geography.
type Graph struct {
	LengthM []float64
	CellM   float64 // cells of level 0 are at most this wide
	// Next lists, for each chart, where it leads and with what weight.
	Next [][]Link
	// levels are filled on first use.
	levels []*filter.Lines
}

// Link leads to a chart with a weight.
type Link struct {
	To     int32
	Weight float64
}

var _ filter.LineSpace = (*Graph)(nil)

// NewGraph makes the space.
func NewGraph(cellM float64, lengthM []float64, next [][]Link) *Graph {
	g := &Graph{LengthM: lengthM, CellM: cellM, Next: next}
	for l := range g.Levels() {
		g.levels = append(g.levels, g.build(l))
	}
	return g
}

// Fingerprint implements filter.Space.
func (g *Graph) Fingerprint() string { return "test graph" }

// Frame implements filter.Space.
func (g *Graph) Frame() geo.Frame { return geo.NewFrame(geo.LonLat{}) }

// Levels implements filter.LineSpace.
func (g *Graph) Levels() int { return 4 }

// Lines implements filter.LineSpace.
func (g *Graph) Lines(level int) *filter.Lines { return g.levels[level] }

func (g *Graph) build(level int) *filter.Lines {
	n := len(g.LengthM)
	ln := &filter.Lines{Level: level, LengthM: g.LengthM, Cells: make([]int32, n), WidthM: make([]float64, n)}
	for c, length := range g.LengthM {
		// The slack keeps 10 m in cells of 0.1 m at a hundred.
		ln.Cells[c] = int32(math.Max(1, math.Ceil(length/(g.CellM*math.Ldexp(1, level))-1e-9)))
		ln.WidthM[c] = length / float64(ln.Cells[c])
	}
	back := make([][]Link, n)
	for c, links := range g.Next {
		for _, l := range links {
			back[l.To] = append(back[l.To], Link{int32(c), 1})
		}
	}
	for c := range back {
		for i := range back[c] {
			back[c][i].Weight = 1 / float64(len(back[c]))
		}
	}
	ln.Forward, ln.Backward = flatten(g.Next), flatten(back)
	return ln
}

func flatten(next [][]Link) filter.Links {
	l := filter.Links{Start: []int32{0}}
	for _, links := range next {
		for _, x := range links {
			l.To = append(l.To, x.To)
			l.Weight = append(l.Weight, x.Weight)
		}
		l.Start = append(l.Start, int32(len(l.To)))
	}
	return l
}

// Sample implements filter.LineSpace: East is the chart's number, North the
// distance along it; every heading is 0.
func (g *Graph) Sample(dst *filter.Columns, chart []int32, alongM []float64, _ float64) {
	for i := range alongM {
		dst.East[i] = float64(chart[i])
		dst.North[i] = math.Min(math.Max(alongM[i], 0), g.LengthM[chart[i]])
		dst.TangentE[i], dst.TangentN[i] = 0, 1
		if dst.Wants&filter.WantHeading != 0 {
			dst.Heading[i], dst.Curvature[i], dst.HeadingVar[i] = 0, 0, 0.03
		}
		if dst.Wants&filter.WantHeight != 0 {
			dst.Height[i], dst.SlopeE[i], dst.SlopeN[i], dst.HeightVar[i] = math.NaN(), 0, 0, 0
		}
	}
}

// Along measures the position along a line (or north on a plane): z = north + v.
type Along struct {
	Z, SigmaM float64
	// Noise, if it has parts, replaces the Gaussian of SigmaM.
	Mixture filter.Noise
}

var _ filter.LinearLikelihood = Along{}

// Wants implements filter.LinearLikelihood.
func (Along) Wants() filter.Wants { return filter.WantPosition }

// Rows implements filter.LinearLikelihood.
func (Along) Rows() int { return 1 }

// Noise implements filter.LinearLikelihood.
func (a Along) Noise() filter.Noise {
	if len(a.Mixture.Parts) > 0 {
		return a.Mixture
	}
	return filter.Gaussian(a.SigmaM)
}

// Linearize implements filter.LinearLikelihood.
func (a Along) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, _ []float64) {
	k := max(len(qs), at.Dim)
	for i := range at.North {
		t.Residual[i] = a.Z - at.North[i]
		at.Row(t.Row[i*k:], i, 0, 1)
	}
}
