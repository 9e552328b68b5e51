package network_test

import (
	"fmt"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/network/roadfile"
)

// BenchmarkSample samples all columns at every cell centre of the town, in the
// order of a belief, and reports the time for one position.
func BenchmarkSample(b *testing.B) {
	for name, wants := range map[string]filter.Wants{
		"position": filter.WantPosition, "heading": filter.WantPosition | filter.WantHeading,
		"all": filter.WantPosition | filter.WantHeading | filter.WantHeight,
	} {
		for _, n := range []int{1000, 100_000} {
			b.Run(fmt.Sprintf("%s/cells=%dk", name, n/1000), func(b *testing.B) {
				m, _ := town(b, roadfile.Options{})
				lines := m.Lines(0)
				chart, along := make([]int32, 0, n), make([]float64, 0, n)
				for len(chart) < n {
					for c := int32(0); c < int32(m.Charts()) && len(chart) < n; c++ {
						for k := int32(0); k < lines.Cells[c] && len(chart) < n; k++ {
							chart, along = append(chart, c), append(along, (float64(k)+0.5)*lines.WidthM[c])
						}
					}
				}
				var at filter.Columns
				at.Resize(wants, 1, n)
				b.ReportAllocs()
				for b.Loop() {
					m.Sample(&at, chart, along, 1)
				}
				b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(n), "ns/position")
			})
		}
	}
}

// BenchmarkNear looks up the roads within 30 m.
func BenchmarkNear(b *testing.B) {
	m, _ := town(b, roadfile.Options{})
	p, _ := m.Ends(0)
	m.Near(p, 1)
	i := 0.0
	for b.Loop() {
		m.Near(geo.Point{E: p.E + i, N: p.N + i/2}, 30)
		if i++; i > 400 {
			i = 0
		}
	}
}
