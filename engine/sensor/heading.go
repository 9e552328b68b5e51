package sensor

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// HeadingFix is a true heading.
type HeadingFix struct{ HeadingRad, SigmaRad float64 }

// Kind is "heading".
func (HeadingFix) Kind() string { return KindHeading }

// Check reports a heading that no filter could use.
func (m HeadingFix) Check(Time) error {
	p := problems{what: KindHeading}
	p.angle("deg", geo.Deg(m.HeadingRad))
	p.sigmaDeg("sigma_deg", geo.Deg(m.SigmaRad))
	return p.err()
}

// likelihood: z = heading + convergence at the vehicle + v, wrapped.
// Source: Mardia & Jupp, Directional Statistics, 2000, wrapped normal and von
// Mises distributions (memory).
//
// Where the heading is among the quantities the map does not enter: the
// heading follows the road by RoadAlignment, once for each 5 m travelled
// however often the compass speaks, and the compass' own error, which lasts
// for the sensor's correlation time (1 s unless the suite says otherwise), is
// counted once in that time: Power = spacing / correlation.
//
// On roads without that quantity the compass is compared with the road's
// heading itself, whose error (HeadingVar) it shares with every other reading
// over the same 5 m: then Power is the smaller of that and travelled / 5 m, and
// a compass in a standing vehicle adds nothing.
func (m HeadingFix) likelihood(c *Context, d Sensor) any {
	n := c.directionNoise(d, m.SigmaRad)
	l := &compass{zRad: m.HeadingRad, skew: newSkew(c.Frame, c.Pose.At), heading: filter.Index(c.Quantities, filter.Heading)}
	if l.heading < 0 {
		share := c.TravelledM / alignmentM
		if share < 1 { // not for NaN and +Inf
			n.Power = math.Max(math.Min(n.Power, share), 1e-6)
		}
	}
	l.noise = n
	return l
}

type compass struct {
	zRad    float64
	skew    skew
	heading int // -1: against the road's
	noise   filter.Noise
}

var _ filter.LinearLikelihood = (*compass)(nil)

func (l *compass) Wants() filter.Wants {
	if l.heading < 0 {
		return filter.WantPosition | filter.WantHeading
	}
	return filter.WantPosition
}
func (l *compass) Rows() int           { return 1 }
func (l *compass) Noise() filter.Noise { return l.noise }

// Circular implements filter.Circular.
func (l *compass) Circular() {}

// Linearize implements filter.LinearLikelihood.
func (l *compass) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, mean []float64) {
	k := stride(at, qs)
	for i := range at.East {
		z := l.zRad - l.skew.gamma(at.East[i], at.North[i])
		if l.heading >= 0 {
			t.Residual[i] = geo.WrapPi(z - mean[i*k+l.heading])
			t.Row[i*k+l.heading] = 1
			continue
		}
		t.Residual[i] = geo.WrapPi(z - at.Heading[i])
		t.Row[i*k] = at.Curvature[i]
		t.Extra[i] = at.HeadingVar[i]
	}
}
