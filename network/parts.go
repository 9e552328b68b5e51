package network

import (
	"cmp"
	"slices"

	"leadline/engine/geo"
)

// Name returns the name of a chart's road, "" if it has none.
func (m *Map) Name(chart int32) string { return m.d.Name.Of(chart) }

// Ref returns the road number of a chart's road, "" if it has none.
func (m *Map) Ref(chart int32) string { return m.d.Ref.Of(chart) }

// Class returns the value of the source's highway tag, "" if it has none.
func (m *Map) Class(chart int32) string { return m.d.Class.Of(chart) }

// Feature names the feature of the source that a chart came from, the first of
// them where several were joined end to end.
func (m *Map) Feature(chart int32) string { return m.d.Feature.Of(chart) }

// SpeedLimit returns the speed limit in m/s, 0 if unknown.
func (m *Map) SpeedLimit(chart int32) float64 { return float64(m.d.Speed[chart]) }

// Tunnel reports whether a chart is in a tunnel.
func (m *Map) Tunnel(chart int32) bool { return m.d.Flags[chart]&FlagTunnel != 0 }

// Bridge reports whether a chart is on a bridge.
func (m *Map) Bridge(chart int32) bool { return m.d.Flags[chart]&FlagBridge != 0 }

// Roundabout reports whether a chart is part of a roundabout.
func (m *Map) Roundabout(chart int32) bool { return m.d.Flags[chart]&FlagCircle != 0 }

// Layer returns the source's layer of a chart, 0 on the ground.
func (m *Map) Layer(chart int32) int { return int(m.d.Layer[chart]) }

// Twin returns the chart that is the same road the other way, -1 if that may
// not be driven.
func (m *Map) Twin(chart int32) int32 { return m.d.Twin[chart] }

// Junctions returns the junctions where a chart begins and ends.
func (m *Map) Junctions(chart int32) (from, to int32) { return m.d.From[chart], m.d.To[chart] }

// Ends returns the frame points where a chart begins and ends.
func (m *Map) Ends(chart int32) (from, to geo.Point) {
	a, b := m.d.VertexStart[chart], m.d.VertexStart[chart+1]-1
	return geo.Point{E: m.d.East[a], N: m.d.North[a]}, geo.Point{E: m.d.East[b], N: m.d.North[b]}
}

// Polyline returns the vertices of a chart in the frame; the slices must not
// be changed.
func (m *Map) Polyline(chart int32) (eastM, northM []float64) {
	a, b := m.d.VertexStart[chart], m.d.VertexStart[chart+1]
	return m.d.East[a:b:b], m.d.North[a:b:b]
}

// Named returns the charts of the roads with the given name, in ascending
// order. The slice must not be changed.
func (m *Map) Named(name string) []int32 { return m.index().byName[name] }

// Stretch is a part of a chart.
type Stretch struct {
	Chart        int32
	FromM, UpToM float64
}

// Within returns the stretches of all charts inside a polygon in the frame, by
// chart and then along it. The polygon is one or more rings, the last point of
// each joined to its first; a point is inside if it is inside an odd number of
// them, so holes are rings too. A ring of fewer than three points holds
// nothing.
func (m *Map) Within(rings ...[]geo.Point) []Stretch {
	rings = slices.DeleteFunc(slices.Clone(rings), func(r []geo.Point) bool { return len(r) < 3 })
	box := geo.EmptyBox()
	for _, r := range rings {
		for _, p := range r {
			box = box.Extend(p)
		}
	}
	if !(box.Min.E <= box.Max.E && box.Min.N <= box.Max.N) {
		return nil
	}
	var found []Stretch
	var cuts []float64
	m.index().tree.Search([2]float64{box.Min.E, box.Min.N}, [2]float64{box.Max.E, box.Max.N},
		func(_, _ [2]float64, q piece) bool {
			for i := q.first; i < q.last; i++ {
				found, cuts = m.segmentWithin(found, cuts[:0], q.chart, i, rings)
			}
			return true
		})
	slices.SortFunc(found, func(a, b Stretch) int {
		if c := cmp.Compare(a.Chart, b.Chart); c != 0 {
			return c
		}
		return cmp.Compare(a.FromM, b.FromM)
	})
	return joinStretches(found)
}

// segmentWithin appends the parts of segment i inside the rings, on its chart
// and the twin.
func (m *Map) segmentWithin(found []Stretch, cuts []float64, chart, i int32, rings [][]geo.Point) ([]Stretch, []float64) {
	d := m.d
	a := geo.Point{E: d.East[i], N: d.North[i]}
	b := geo.Point{E: d.East[i+1], N: d.North[i+1]}
	cuts = append(cuts, 0)
	for _, r := range rings {
		for k := range r {
			if t, ok := crossing(a, b, r[k], r[(k+1)%len(r)]); ok {
				cuts = append(cuts, t)
			}
		}
	}
	cuts = append(cuts, 1)
	slices.Sort(cuts)
	v := b.Sub(a)
	for k := range len(cuts) - 1 {
		t0, t1 := cuts[k], cuts[k+1]
		mid := (t0 + t1) / 2
		if t1 <= t0 || !inside(geo.Point{E: a.E + float64(mid*v.E), N: a.N + float64(mid*v.N)}, rings) {
			continue
		}
		l := d.Along[i+1] - d.Along[i]
		s := Stretch{chart, d.Along[i] + float64(t0*l), d.Along[i] + float64(t1*l)}
		if t1 == 1 {
			s.UpToM = d.Along[i+1] // so that the next segment joins it
		}
		found = append(found, s)
		if t := d.Twin[chart]; t >= 0 {
			whole := m.LengthM(chart)
			found = append(found, Stretch{t, whole - s.UpToM, whole - s.FromM})
		}
	}
	return found, cuts
}

// joinStretches joins those that touch but for rounding.
func joinStretches(s []Stretch) []Stretch {
	kept := s[:0]
	for _, x := range s {
		if n := len(kept) - 1; n >= 0 && kept[n].Chart == x.Chart && x.FromM-kept[n].UpToM < 1e-6 {
			kept[n].UpToM = max(kept[n].UpToM, x.UpToM)
			continue
		}
		kept = append(kept, x)
	}
	return kept
}

// crossing returns where on a-b, as a fraction, it crosses p-q.
func crossing(a, b, p, q geo.Point) (float64, bool) {
	v, w := b.Sub(a), q.Sub(p)
	det := float64(v.E*w.N) - float64(v.N*w.E)
	if det == 0 {
		return 0, false
	}
	u := p.Sub(a)
	t := (float64(u.E*w.N) - float64(u.N*w.E)) / det
	s := (float64(u.E*v.N) - float64(u.N*v.E)) / det
	return t, t > 0 && t < 1 && s >= 0 && s <= 1
}

// inside counts the crossings of a ray going east from p.
func inside(p geo.Point, rings [][]geo.Point) bool {
	odd := false
	for _, r := range rings {
		for k := range r {
			a, b := r[k], r[(k+1)%len(r)]
			if (a.N > p.N) != (b.N > p.N) && p.E < a.E+(p.N-a.N)/(b.N-a.N)*(b.E-a.E) {
				odd = !odd
			}
		}
	}
	return odd
}
