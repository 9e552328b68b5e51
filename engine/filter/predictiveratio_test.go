package filter

import (
	"math"
	"testing"

	"leadline/engine/geo"
)

// TestWiderIsALikelihoodRatio: Predictive.Wider adds up to the log of the ratio of
// joint densities with four times the covariance and with one, and its first
// component is that of the first alone; with two entries, in one component and in
// two, along axes that are turned.
func TestWiderIsALikelihoodRatio(t *testing.T) {
	const weight, flat, density = 0.98, 0.02, 1e-6
	normal := func(x, v float64) float64 { return math.Exp(-x*x/2/v) / math.Sqrt(2*math.Pi*v) }
	joint := func(x, y float64, s sym2, by float64) float64 {
		det := by * by * (s.a*s.c - s.b*s.b)
		return math.Exp(-by*(s.c*x*x-2*s.b*x*y+s.a*y*y)/2/det) / 2 / math.Pi / math.Sqrt(det)
	}
	for _, r := range [][2]float64{{0, 0}, {12, -3}, {31, 28}, {-90, 200}} {
		q := predictions{
			mass: []float64{0.7, 0.3}, residual: [][2]float64{r, {r[0] - 4, r[1] + 9}}, variance: []sym2{{9, 2, 4}, {1, 0, 30}},
			extra: []float64{0, 0}, wide: []float64{0, 0}, total: 1,
		}
		noise := Noise{Parts: []NoisePart{{Weight: weight, Cov: [3]float64{25, 0, 36}}}, FlatWeight: flat, FlatDensity: density}
		side := math.Sqrt(density)
		var want, first [2]float64 // of both, and of the first: as stated, twice as wide
		for i, m := range q.mass {
			s := sym2{q.variance[i].a + 25, q.variance[i].b, q.variance[i].c + 36}
			x := q.residual[i]
			for k, by := range []float64{1, 4} {
				first[k] += m * (weight*normal(x[0], by*s.a) + flat*side)
				want[k] += m * (weight*joint(x[0], x[1], s, by) + flat*density)
			}
		}
		turned := q
		for _, e := range q.residual { // the same, told along other axes: x = a·r₀ + b·r₁
			turned.axes = append(turned.axes, [2]geo.Point{{E: 0, N: 1}, {E: 1, N: 0}})
			_ = e
		}
		turned.residual = [][2]float64{{q.residual[0][1], q.residual[0][0]}, {q.residual[1][1], q.residual[1][0]}}
		turned.variance = []sym2{{4, 2, 9}, {30, 0, 1}}
		swapped := noise
		swapped.Parts = []NoisePart{{Weight: weight, Cov: [3]float64{36, 0, 25}}}
		for name, c := range map[string]struct {
			q *predictions
			n *Noise
		}{"as they are": {&q, &noise}, "turned": {&turned, &swapped}} {
			var p Predictive
			c.q.into(&p, c.n, 2, false)
			if !p.Weighed || math.Abs(p.Wider[0]-math.Log(first[1]/first[0])) > 1e-9 || math.Abs(p.Wider[0]+p.Wider[1]-math.Log(want[1]/want[0])) > 1e-9 {
				t.Errorf("%v, %s: %+v, want %v and together %v", r, name, p, math.Log(first[1]/first[0]), math.Log(want[1]/want[0]))
			}
		}
		noise.FlatDensity = side // of one component
		var p Predictive
		q.into(&p, &noise, 1, false)
		if !p.Weighed || math.Abs(p.Wider[0]-math.Log(first[1]/first[0])) > 1e-9 {
			t.Errorf("%v, alone: %+v, want %v", r, p, math.Log(first[1]/first[0]))
		}
		noise.FlatWeight = 0
		if q.into(&p, &noise, 2, false); p.Weighed {
			t.Errorf("%v: weighed without outliers", r)
		}
	}
}
