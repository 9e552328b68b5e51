package score

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
	"leadline/engine/summary"
)

// one is the error of one posterior.
type one struct {
	errM             float64
	off              geo.Point // from the truth to the scored position
	fromMeanM        float64
	nees             float64
	in50, in95, in99 bool
	right            bool
	onMap            bool // a road within rightMostM of the truth
	beyond           bool
}

func errorOf(p *summary.Posterior, truth Truth, roads func(geo.LonLat, float64) []Road) (one, error) {
	fromMeanM, azimuth, err := geo.WGS84.Distance(p.Mean, truth.At)
	if err != nil {
		return one{}, err
	}
	sin, cos := kernel.Sincos(azimuth)
	e := one{
		errM: fromMeanM, off: geo.Point{E: -fromMeanM * sin, N: -fromMeanM * cos}, fromMeanM: fromMeanM,
		in50: fromMeanM <= p.Radius50M, in95: fromMeanM <= p.Radius95M, in99: fromMeanM <= p.Radius99M,
		beyond: p.Protection.Bounded && fromMeanM > p.Protection.RadiusM,
	}
	if p.Status != summary.Located {
		if e.errM, azimuth, err = geo.WGS84.Distance(p.MostProbable.Position, truth.At); err != nil {
			return one{}, err
		}
		s, c := kernel.Sincos(azimuth)
		e.off = geo.Point{E: -e.errM * s, N: -e.errM * c}
	}
	e.nees = nees(fromMeanM*sin, fromMeanM*cos, p.Cov, truth.SigmaM*truth.SigmaM)
	if roads != nil {
		near := roads(truth.At, rightMostM)
		e.right, e.onMap = right(p, near), len(near) > 0
	}
	return e, nil
}

// nees is e' (P + r·I)⁻¹ e. It is infinite for a covariance without an
// inverse, which no posterior has.
func nees(e, n float64, c summary.Cov, r float64) float64 {
	ee, nn := c.EE+r, c.NN+r
	det := ee*nn - c.EN*c.EN
	if !(det > 0) {
		return math.Inf(1)
	}
	return (nn*e*e - 2*c.EN*e*n + ee*n*n) / det
}

// right reports whether the most probable edge is a road of the truth's.
func right(p *summary.Posterior, near []Road) bool {
	if len(p.Edges) == 0 || len(near) == 0 {
		return false
	}
	nearest := math.Inf(1)
	for _, r := range near {
		nearest = math.Min(nearest, r.DistM)
	}
	within := math.Min(nearest+rightMarginM, rightMostM)
	best := p.Edges[0]
	for _, r := range near {
		if r.DistM <= within && (r.Chart == best.Chart || best.Twin >= 0 && r.Chart == best.Twin) {
			return true
		}
	}
	return false
}
