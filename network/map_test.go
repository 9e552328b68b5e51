package network_test

import (
	"math"
	"sync"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/fixtures/outside"
	"leadline/network"
	"leadline/network/roadfile"
)

// town reads the invented town that all tests share.
func town(tb testing.TB, opt roadfile.Options) (*network.Map, roadfile.Notes) {
	tb.Helper()
	m, notes, err := roadfile.Read("../fixtures/roads/quillmere.geojson", opt)
	if err != nil {
		tb.Fatal(err)
	}
	return m, notes
}

// city reads the outside city network once for all tests.
var city = sync.OnceValues(func() (*network.Map, error) {
	path, err := outside.Locate("large-network.json")
	if err != nil {
		return nil, err
	}
	m, _, err := roadfile.Read(path, roadfile.Options{})
	return m, err
})

// each runs a test on the town and on the outside maps that are here.
func each(t *testing.T, test func(t *testing.T, m *network.Map)) {
	t.Run("town", func(t *testing.T) {
		m, _ := town(t, roadfile.Options{})
		test(t, m)
	})
	t.Run("fine cells", func(t *testing.T) {
		m, _ := town(t, roadfile.Options{Map: network.Options{CellM: 0.3, UTurnWeight: 0.05}})
		test(t, m)
	})
	t.Run("city", func(t *testing.T) {
		outside.Path(t, "large-network.json")
		m, err := city()
		if err != nil {
			t.Fatal(err)
		}
		test(t, m)
	})
}

// TestConformance runs the tests that every space passes.
func TestConformance(t *testing.T) {
	each(t, func(t *testing.T, m *network.Map) { filtertest.Space(t, m) })
}

// TestLines proves what filter.LineSpace promises of the topology: every level
// covers the same lengths, no cell is wider than asked, and the links' weights
// sum to 1 and mirror one another.
func TestLines(t *testing.T) {
	each(t, func(t *testing.T, m *network.Map) {
		base := m.Lines(0)
		for l := range m.Levels() {
			x := m.Lines(l)
			if x != m.Lines(l) || x.Level != l {
				t.Fatalf("level %d: not the same value each time, or says it is level %d", l, x.Level)
			}
			limit := m.Data().CellM * math.Pow(2, float64(l))
			for c := range x.Cells {
				if x.LengthM[c] != base.LengthM[c] || x.Cells[c] < 1 || x.WidthM[c] != x.LengthM[c]/float64(x.Cells[c]) {
					t.Fatalf("level %d, chart %d: %d cells of %v m on %v m", l, c, x.Cells[c], x.WidthM[c], x.LengthM[c])
				}
				// The width may exceed the limit by the rounding that cutCells
				// forgives, 1e-12 of it, and not be half of it or less where
				// there are several cells.
				if w := x.WidthM[c]; w > limit*(1+1e-11) || x.Cells[c] > 1 && w <= limit/2 {
					t.Fatalf("level %d, chart %d: cells of %v m for a limit of %v m", l, c, w, limit)
				}
			}
			for c := range int32(len(x.Cells)) {
				for name, links := range map[string]*filter.Links{"forward": &x.Forward, "backward": &x.Backward} {
					to, w := links.Of(c)
					sum := 0.0
					for i := range to {
						sum += w[i]
						if !(w[i] > 0) {
							t.Fatalf("chart %d: %s weight %v", c, name, w[i])
						}
					}
					// A sum of n weights near 1/n is off by n roundings at most.
					if len(to) > 0 && math.Abs(sum-1) > float64(len(to))*2.3e-16 {
						t.Fatalf("chart %d: %s weights sum to %v", c, name, sum)
					}
				}
				to, _ := x.Forward.Of(c)
				for _, next := range to {
					if _, end := m.Junctions(c); end != first(m.Junctions(next)) {
						t.Fatalf("chart %d leads to %d, which begins elsewhere", c, next)
					}
					from, _ := x.Backward.Of(next)
					if !contains(from, c) {
						t.Fatalf("chart %d leads to %d, which does not know", c, next)
					}
				}
			}
		}
	})
}

func first(a, _ int32) int32 { return a }

func contains(s []int32, x int32) bool {
	for _, y := range s {
		if x == y {
			return true
		}
	}
	return false
}

// probe samples one chart at the given positions.
func probe(m *network.Map, chart int32, alongM []float64, widthM float64) *filter.Columns {
	var at filter.Columns
	at.Resize(filter.WantPosition|filter.WantHeading|filter.WantHeight, 1, len(alongM))
	charts := make([]int32, len(alongM))
	for i := range charts {
		charts[i] = chart
	}
	m.Sample(&at, charts, alongM, widthM)
	return &at
}

// TestSamplePositions proves that positions run along the polyline at true
// distance, through its vertices, from end to end, and join where links do.
func TestSamplePositions(t *testing.T) {
	each(t, func(t *testing.T, m *network.Map) {
		step := max(1, int32(m.Charts()/2000))
		for c := int32(0); c < int32(m.Charts()); c += step {
			d := m.Data()
			a, b := d.VertexStart[c], d.VertexStart[c+1]
			along := d.Along[a:b]
			at := probe(m, c, along, 1)
			for i := range along {
				// One centimetre is asked for; interpolation at a vertex is
				// exact but for rounding of coordinates below 1e6 m.
				if dist := (geo.Point{E: at.East[i] - d.East[a+int32(i)], N: at.North[i] - d.North[a+int32(i)]}).Norm(); dist > 1e-9 {
					t.Fatalf("chart %d vertex %d: %v m off", c, i, dist)
				}
				if norm := math.Hypot(at.TangentE[i], at.TangentN[i]); math.Abs(norm-1) > 1e-15*4 {
					t.Fatalf("chart %d vertex %d: tangent of length %v", c, i, norm)
				}
			}
			length := m.LengthM(c)
			ends := probe(m, c, []float64{-5, 0, length, length + 5, math.NaN()}, 1)
			p, q := m.Ends(c)
			for i, want := range []geo.Point{p, p, q, q, p} {
				if (geo.Point{E: ends.East[i] - want.E, N: ends.North[i] - want.N}).Norm() > 1e-9 {
					t.Fatalf("chart %d: end %d is elsewhere", c, i)
				}
			}
			to, _ := m.Lines(0).Forward.Of(c)
			for _, next := range to {
				if start, _ := m.Ends(next); start != q {
					t.Fatalf("chart %d ends at %v, chart %d begins at %v", c, q, next, start)
				}
			}
		}
	})
}

// TestSampleDerivatives proves that tangent, heading, curvature and slope are
// the derivatives they are said to be.
func TestSampleDerivatives(t *testing.T) {
	each(t, func(t *testing.T, m *network.Map) {
		step := max(1, int32(m.Charts()/1000))
		for c := int32(0); c < int32(m.Charts()); c += step {
			length := m.LengthM(c)
			const h = 0.01
			var along []float64
			for s := 0.0; s+2*h <= length; s += 0.37 {
				along = append(along, s, s+h, s+2*h)
			}
			at := probe(m, c, along, 1)
			for i := 0; i+2 < len(along); i += 3 {
				// Heading never jumps: between neighbours 1 cm apart it
				// changes by at most the sharpest curvature, one reversal
				// (π) a vertex over 2·3 m; several vertices may fall into one
				// window, so allow ten.
				if dh := math.Abs(at.Heading[i+1] - at.Heading[i]); dh > 10*math.Pi/6*h {
					t.Fatalf("chart %d at %v m: heading jumps by %v", c, along[i], dh)
				}
				// Where curvature is the same at three points they lie
				// between two knots, where heading is linear; knots are
				// kept as float32, whose rounding (1e-7 of up to 10 rad)
				// plays no role as all three are on one line.
				if at.Curvature[i] == at.Curvature[i+2] {
					fd := (at.Heading[i+2] - at.Heading[i]) / (2 * h)
					if math.Abs(fd-at.Curvature[i+1]) > 1e-9 {
						t.Fatalf("chart %d at %v m: curvature %v, heading's slope %v", c, along[i], at.Curvature[i+1], fd)
					}
				}
				if at.TangentE[i] == at.TangentE[i+2] && at.TangentN[i] == at.TangentN[i+2] {
					fd := geo.Point{E: (at.East[i+2] - at.East[i]) / (2 * h), N: (at.North[i+2] - at.North[i]) / (2 * h)}
					// The frame's scale, plus rounding of 1e-10 m over 2 cm.
					if math.Hypot(fd.E-at.TangentE[i], fd.N-at.TangentN[i]) > 3.2e-5+1e-7 {
						t.Fatalf("chart %d at %v m: tangent %v %v, differences %v", c, along[i], at.TangentE[i], at.TangentN[i], fd)
					}
				}
				// Away from vertices heading is the tangent's direction, to
				// the rounding of float32 at up to 100 rad.
				if clear := at.Curvature[i] == 0 && at.Curvature[i+2] == 0 && straight(m, c, along[i], 3.1); clear {
					off := geo.WrapPi(at.Heading[i] - geo.Heading(geo.Point{E: at.TangentE[i], N: at.TangentN[i]}))
					if math.Abs(off) > 1e-5 {
						t.Fatalf("chart %d at %v m: heading %v off the tangent", c, along[i], off)
					}
				}
				grade := at.SlopeE[i+1]*at.TangentE[i+1] + at.SlopeN[i+1]*at.TangentN[i+1]
				left, right := (at.Height[i+1]-at.Height[i])/h, (at.Height[i+2]-at.Height[i+1])/h
				if math.Abs(left-right) < 1e-9 && math.Abs(grade-left) > 1e-7 {
					t.Fatalf("chart %d at %v m: grade %v, height's slope %v", c, along[i], grade, left)
				}
			}
		}
	})
}

// straight reports whether no vertex of a chart, its ends included, lies
// within r of a position.
func straight(m *network.Map, c int32, s, r float64) bool {
	d := m.Data()
	for _, x := range d.Along[d.VertexStart[c]:d.VertexStart[c+1]] {
		if math.Abs(x-s) <= r {
			return false
		}
	}
	return true
}
