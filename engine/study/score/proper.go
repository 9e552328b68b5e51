package score

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
	"leadline/engine/summary"
)

// CRPS is the continuous ranked probability score of a mixture of normals, with
// weights that sum to 1, means and standard deviations ≥ 0, at y:
//
//	∫ (F(x) - [x ≥ y])² dx = Σ wᵢ A(y-μᵢ, σᵢ²) - ½ Σᵢ Σⱼ wᵢ wⱼ A(μᵢ-μⱼ, σᵢ²+σⱼ²)
//	A(m, s²) = 2s φ(m/s) + m (2Φ(m/s) - 1),  |m| for s = 0
//
// in the unit of y. Source: Grimit, Gneiting, Berrocal & Johnson, Q. J. R.
// Meteorol. Soc. 132, 2006; of one normal, Gneiting & Raftery, JASA 102, 2007.
func CRPS(weights, means, sigmas []float64, y float64) float64 {
	sum := 0.0
	for i, w := range weights {
		sum += w * spreadOf(y-means[i], sigmas[i]*sigmas[i])
		for j, v := range weights {
			sum -= 0.5 * w * v * spreadOf(means[i]-means[j], sigmas[i]*sigmas[i]+sigmas[j]*sigmas[j])
		}
	}
	return sum
}

// spreadOf is A, the mean of |X| for X ~ N(m, v).
func spreadOf(m, v float64) float64 {
	if v == 0 {
		return math.Abs(m)
	}
	s := math.Sqrt(v)
	return 2*s*kernel.NormalDensity(m/s) + m*(1-2*kernel.NormalUpper(m/s))
}

// component is a mode of a posterior as seen from the truth: its mean, and its
// covariance with the truth's own added.
type component struct {
	weight float64
	mean   geo.Point // true east and north
	cov    summary.Cov
}

// mixture appends a posterior's modes, or its moments if it has none, as seen
// from a truth. Weights sum to 1.
func mixture(dst []component, p *summary.Posterior, truth Truth) ([]component, error) {
	see := func(at geo.LonLat, c summary.Cov, w float64) error {
		v, err := between(truth.At, at)
		if err != nil {
			return err
		}
		r := truth.SigmaM * truth.SigmaM
		dst = append(dst, component{w, v, summary.Cov{EE: c.EE + r, EN: c.EN, NN: c.NN + r}})
		return nil
	}
	total := 0.0
	for _, m := range p.Modes {
		total += m.Mass
	}
	if total == 0 {
		return dst, see(p.Mean, p.Cov, 1)
	}
	for _, m := range p.Modes {
		if err := see(m.Mean, m.Cov, m.Mass/total); err != nil {
			return dst, err
		}
	}
	return dst, nil
}

// logDensity is the mixture's at the truth; -Inf where it has none.
func logDensity(mix []component) float64 {
	most := math.Inf(-1)
	var logs [16]float64
	of := logs[:0]
	for _, c := range mix {
		det := c.cov.EE*c.cov.NN - c.cov.EN*c.cov.EN
		if !(det > 0) {
			continue
		}
		l := kernel.Log(c.weight) - kernel.Log(2*math.Pi) - 0.5*kernel.Log(det) - 0.5*nees(c.mean.E, c.mean.N, c.cov, 0)
		of, most = append(of, l), math.Max(most, l)
	}
	if math.IsInf(most, -1) {
		return most
	}
	sum := 0.0
	for _, l := range of {
		sum += kernel.Exp(l - most)
	}
	return most + kernel.Log(sum)
}

// line is a mixture along a direction.
type line struct{ weights, means, sigmas []float64 }

func (l *line) of(mix []component, u geo.Point) {
	l.weights, l.means, l.sigmas = l.weights[:0], l.means[:0], l.sigmas[:0]
	for _, c := range mix {
		l.weights = append(l.weights, c.weight)
		l.means = append(l.means, dot(c.mean, u))
		l.sigmas = append(l.sigmas, math.Sqrt(math.Max(0, u.E*u.E*c.cov.EE+2*u.E*u.N*c.cov.EN+u.N*u.N*c.cov.NN)))
	}
}

// below is the probability of less than 0: where the truth falls.
func (l *line) below() float64 {
	sum := 0.0
	for i, w := range l.weights {
		switch {
		case l.sigmas[i] > 0:
			sum += w * kernel.NormalUpper(l.means[i]/l.sigmas[i])
		case l.means[i] < 0:
			sum += w
		case l.means[i] == 0:
			sum += w / 2
		}
	}
	return sum
}

// between is the vector from a place to another, true east and north there.
func between(from, to geo.LonLat) (geo.Point, error) {
	m, azimuth, err := geo.WGS84.Distance(from, to)
	if err != nil {
		return geo.Point{}, err
	}
	sin, cos := kernel.Sincos(azimuth)
	return geo.Point{E: m * sin, N: m * cos}, nil
}

func dot(a, b geo.Point) float64              { return a.E*b.E + a.N*b.N }
func times(a geo.Point, by float64) geo.Point { return geo.Point{E: a.E * by, N: a.N * by} }

// rightOf turns a vector a quarter clockwise.
func rightOf(a geo.Point) geo.Point { return geo.Point{E: a.N, N: -a.E} }
