package forecast_test

import (
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/study/forecast"
)

// TestMatch: a walk over the town's roads, drawn with 2 m of noise, is found
// again, chart for chart.
func TestMatch(t *testing.T) {
	m := quillmere(t)
	links := &m.Lines(0).Forward
	for seed := range uint64(20) {
		rng := rand.New(rand.NewPCG(seed, 0))
		charts := []int32{int32(rng.IntN(m.Charts()))}
		for len(charts) < 12 {
			next, _ := links.Of(charts[len(charts)-1])
			next = slices.DeleteFunc(slices.Clone(next), func(c int32) bool { return c == m.Twin(charts[len(charts)-1]) })
			if len(next) == 0 {
				break
			}
			charts = append(charts, next[rng.IntN(len(next))])
		}
		if len(charts) < 3 {
			continue
		}
		r := &forecast.Route{Name: "walk"}
		lengthM := 0.0
		for _, c := range charts {
			lengthM += m.LengthM(c)
			e, n := m.Polyline(c)
			for i := range e {
				r.Points = append(r.Points, m.Frame().Inverse(geo.Point{E: e[i] + 2*rng.NormFloat64(), N: n[i] + 2*rng.NormFloat64()}))
			}
		}
		p, err := forecast.NewPath(m, r, 10)
		if err != nil {
			t.Errorf("seed %d: %v", seed, err)
			continue
		}
		// The ends may fall onto a neighbour by a metre.
		got := p.Charts()
		if !contains(got, charts[1:len(charts)-1]) || p.LengthM() < lengthM-20 || p.LengthM() > lengthM+20 {
			t.Errorf("seed %d: %v of %.0f m, want %v of %.0f m", seed, got, p.LengthM(), charts, lengthM)
		}
	}
}

// contains reports whether a list is a part of another one.
func contains(all, part []int32) bool {
	for i := 0; i+len(part) <= len(all); i++ {
		if slices.Equal(all[i:i+len(part)], part) {
			return true
		}
	}
	return false
}

func TestMatchWrong(t *testing.T) {
	m := quillmere(t)
	c := int32(0)
	a, b := m.Ends(c)
	beside := func(p geo.Point, d float64) geo.LonLat { return m.Frame().Inverse(p.Add(geo.Point{E: d, N: d})) }
	for _, r := range []struct {
		points []geo.LonLat
		want   string
	}{
		{[]geo.LonLat{beside(a, 5000), beside(b, 5000)}, "no road lies within 30 m"},
		{[]geo.LonLat{beside(a, 0), beside(b, 0), beside(b, 9000)}, "no road"},
	} {
		_, err := forecast.NewPath(m, &forecast.Route{Name: "off", Points: r.points}, 10)
		if err == nil || !strings.Contains(err.Error(), r.want) || !strings.HasPrefix(err.Error(), "off: ") {
			t.Errorf("got %v, want %q", err, r.want)
		}
	}
}
