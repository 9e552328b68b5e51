package summary

import (
	"testing"

	"leadline/engine/geo"
)

// wholeMap is a belief spread evenly over parallel roads 400 m apart, with
// about n cells of 1 m.
func wholeMap(n int) *Input {
	const lengthM = 1000
	var r roads
	var parts []part
	for i := range n / lengthM {
		y := 400 * float64(i)
		r = append(r, road{geo.Point{N: y}, geo.Point{E: lengthM, N: y + 300}, "", -1})
		parts = append(parts, part{int32(i), lengthM / float64(n), lengthM / 2, 3 * lengthM})
	}
	return roadInput(r, 1, parts)
}

func BenchmarkSummarize(b *testing.B) {
	single := roads{{geo.Point{E: 100}, geo.Point{E: 1100, N: 400}, "a", 1}, {geo.Point{E: 1100, N: 400}, geo.Point{E: 100}, "a", 0}}
	for _, c := range []struct {
		name string
		in   *Input
	}{
		{"roads/cells=100", roadInput(single, 1, []part{{0, 0.6, 500, 4}, {1, 0.4, 577, 4}})},
		{"roads/cells=300k", wholeMap(300_000)},
		{"plane/cells=100", latticeInput(10, 1, 2.5, geo.Point{E: 5000, N: 3000})},
		{"plane/cells=10k", latticeInput(100, 1, 8, geo.Point{E: 5000, N: 3000})},
		{"plane/cells=300k", latticeInput(548, 20, 1500, geo.Point{E: 5000, N: 3000})},
	} {
		b.Run(c.name, func(b *testing.B) {
			s, err := New(Options{})
			if err != nil {
				b.Fatal(err)
			}
			p := new(Posterior)
			b.ReportAllocs()
			for b.Loop() {
				if err := s.Summarize(p, c.in); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(len(c.in.Cloud.Mass)), "cells")
		})
	}
}
