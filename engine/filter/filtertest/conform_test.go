package filtertest_test

import (
	"math"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
)

// loop is a small town: a bent street that forks into two, both of which lead
// back to its start.
func loop(cellM float64) *filtertest.Road {
	r := filtertest.NewRoad(cellM, []filtertest.Course{
		{HeadingRad: 0.3, Arcs: []filtertest.Arc{{LengthM: 60}, {LengthM: 30, Curvature: 0.03}, {LengthM: 7.3}}},
		{Start: geo.Point{E: 40, N: 80}, HeadingRad: 2, Arcs: []filtertest.Arc{{LengthM: 25, Curvature: -0.05}}},
		{Start: geo.Point{E: 40, N: 80}, HeadingRad: -3, Arcs: []filtertest.Arc{{LengthM: 0.4}, {LengthM: 40, Curvature: 0.01}}},
	}, [][]filtertest.Link{
		{{To: 1, Weight: 0.25}, {To: 2, Weight: 0.75}}, {{To: 0, Weight: 1}}, {{To: 0, Weight: 1}},
	})
	r.Height = func(e, n float64) (h, gE, gN float64) {
		return 100 + 0.1*e + 5*math.Sin(n/30), 0.1, 5. / 30 * math.Cos(n/30)
	}
	return r
}

func TestSpacesConform(t *testing.T) {
	t.Run("road", func(t *testing.T) { filtertest.Space(t, loop(1)) })
	t.Run("graph", func(t *testing.T) {
		filtertest.Space(t, filtertest.NewGraph(0.7, []float64{10, 3.3}, [][]filtertest.Link{{{To: 1, Weight: 1}}, nil}))
	})
}

func TestRoadIsSmooth(t *testing.T) {
	r := loop(1)
	// A quarter turn on an arc of radius 100/π·… : closed form.
	q := filtertest.NewRoad(1, []filtertest.Course{{Arcs: []filtertest.Arc{{LengthM: 50 * math.Pi, Curvature: 0.01}}}}, [][]filtertest.Link{nil})
	at, h, _ := q.At(0, 50*math.Pi)
	if math.Abs(at.E-100) > 1e-12 || math.Abs(at.N-100) > 1e-12 || math.Abs(h-math.Pi/2) > 1e-15 {
		t.Errorf("a right quarter turn of radius 100 m from the origin northwards ends at %v with heading %v", at, h)
	}
	for c, l := range r.LengthM {
		for s := 0.5; s < l; s++ {
			a, _, _ := r.At(int32(c), s-0.5)
			b, _, _ := r.At(int32(c), s+0.5)
			if d := b.Sub(a).Norm(); d > 1+1e-12 || d < 0.999 { // chord of 1 m at radius ≥ 20 m
				t.Errorf("chart %d jumps %v m at %v", c, d, s)
			}
		}
	}
}

// sight is a plain likelihood with a constant, for the conformance test.
type sight struct{ z, sigma float64 }

func (sight) Wants() filter.Wants { return filter.WantHeight }
func (s sight) LogLikelihood(dst []float64, at *filter.Columns) {
	for i, h := range at.Height {
		d := (s.z - h) / s.sigma
		dst[i] += -0.5*d*d - math.Log(s.sigma) - 0.5*math.Log(2*math.Pi)
	}
}

func TestLikelihoodsConform(t *testing.T) {
	r := loop(1)
	at := filtertest.At{Chart: []int32{0, 0, 1, 2}, AlongM: []float64{3, 70, 12, 30}}
	at.Value = func(z float64) any { return sight{z, 0.7} }
	at.Low, at.High = 80, 130
	filtertest.Likelihood(t, sight{101, 0.7}, r, at)

	at.Quantities = []filter.Quantity{{Name: filter.Along}, {Name: filter.OdometerScale}}
	mix := filter.Noise{Parts: []filter.NoisePart{{Weight: 0.9, Cov: [3]float64{1}}, {Weight: 0.05, Cov: [3]float64{25}}}, FlatWeight: 0.05, FlatDensity: 1. / 400}
	at.Value = func(z float64) any { return filtertest.Along{Z: z, Mixture: mix} }
	at.Low, at.High = -200, 200
	filtertest.Likelihood(t, filtertest.Along{Z: 40, Mixture: mix}, r, at)
}
