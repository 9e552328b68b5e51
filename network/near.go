package network

import (
	"cmp"
	"math"
	"slices"

	"github.com/tidwall/rtree"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// Place is a position on a chart.
type Place struct {
	Chart  int32
	AlongM float64 // from the chart's start
	DistM  float64 // from the point that was asked about, true metres
}

// pieceSegments is how many segments of a chart share an entry of the index:
// enough to keep it small, few enough to keep its boxes tight.
const pieceSegments = 8

// piece is a run of segments, named by its first and last vertex.
type piece struct{ chart, first, last int32 }

type index struct {
	tree   rtree.RTreeG[piece]
	byName map[string][]int32
}

// buildIndex indexes one chart of each pair of twins.
func (m *Map) buildIndex() *index {
	x := &index{byName: map[string][]int32{}}
	d := m.d
	for c := range int32(m.Charts()) {
		if name := d.Name.Of(c); name != "" {
			x.byName[name] = append(x.byName[name], c)
		}
		if t := d.Twin[c]; t >= 0 && t < c {
			continue
		}
		a, b := d.VertexStart[c], d.VertexStart[c+1]-1
		for i := a; i < b; i += pieceSegments {
			p := piece{c, i, min(i+pieceSegments, b)}
			box := geo.EmptyBox()
			for k := p.first; k <= p.last; k++ {
				box = box.Extend(geo.Point{E: d.East[k], N: d.North[k]})
			}
			x.tree.Insert([2]float64{box.Min.E, box.Min.N}, [2]float64{box.Max.E, box.Max.N}, p)
		}
	}
	return x
}

// Near returns the nearest position on each chart that comes within radiusM
// true metres of a frame point, nearest first, then by chart; both directions
// of a road are there. A radius that is negative or NaN finds nothing. The
// first call builds an index, which later ones share.
func (m *Map) Near(p geo.Point, radiusM float64) []Place {
	if !(radiusM >= 0) || !geo.Finite(p.E, p.N) {
		return nil
	}
	_, scale := m.frame.Convergence(p)
	r := radiusM * scale
	best := map[int32]Place{}
	m.index().tree.Search([2]float64{p.E - r, p.N - r}, [2]float64{p.E + r, p.N + r},
		func(_, _ [2]float64, q piece) bool {
			for i := q.first; i < q.last; i++ {
				t, dist := m.d.project(p, i)
				if dist > r {
					continue
				}
				if old, ok := best[q.chart]; ok && old.DistM <= dist/scale {
					continue
				}
				along := m.d.Along[i] + float64(t*(m.d.Along[i+1]-m.d.Along[i]))
				best[q.chart] = Place{q.chart, along, dist / scale}
			}
			return true
		})
	places := make([]Place, 0, 2*len(best))
	for c, at := range best {
		places = append(places, at)
		if t := m.d.Twin[c]; t >= 0 {
			places = append(places, Place{t, m.LengthM(c) - at.AlongM, at.DistM})
		}
	}
	slices.SortFunc(places, func(a, b Place) int {
		if c := cmp.Compare(a.DistM, b.DistM); c != 0 {
			return c
		}
		return cmp.Compare(a.Chart, b.Chart)
	})
	return places
}

// project returns where on segment i, as a fraction of it, the nearest point
// to p is, and the distance in frame metres.
func (d *Data) project(p geo.Point, i int32) (t, distM float64) {
	a := geo.Point{E: d.East[i], N: d.North[i]}
	v := geo.Point{E: d.East[i+1], N: d.North[i+1]}.Sub(a)
	w := p.Sub(a)
	t = (float64(w.E*v.E) + float64(w.N*v.N)) / (float64(v.E*v.E) + float64(v.N*v.N))
	t = math.Min(math.Max(t, 0), 1)
	return t, geo.Point{E: w.E - float64(t*v.E), N: w.N - float64(t*v.N)}.Norm()
}

var _ filter.Nearby = (*Map)(nil)

// NearLines implements filter.Nearby by Near.
func (m *Map) NearLines(dst []filter.Nearest, p geo.Point, radiusM float64) []filter.Nearest {
	for _, at := range m.Near(p, radiusM) {
		dst = append(dst, filter.Nearest(at))
	}
	return dst
}
