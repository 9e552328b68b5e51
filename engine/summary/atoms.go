package summary

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// To find how much of a Gaussian lies outside a circle, it is taken apart once
// into pieces for which that is a closed form of the normal tail:
//
//   - a disc, a circular Gaussian: circleTail;
//   - a needle, a Gaussian along a line without any width: the line leaves the
//     circle in two points, beyond which lie two normal tails.
//
// A nearly circular Gaussian (axes within 1.5 %) counts as a disc of its larger
// sigma. A long one is a row of needles across its minor axis, by Gauss and
// Hermite's rule: the narrower it is, the fewer (rules, below). The others are
// rows of discs of the minor sigma along the major axis, at 1.6 sigma of the
// integrand: the trapezoidal rule for a product of Gaussians, whose relative
// error is 2·exp(-2π²/1.6²) = 9e-4 in the density everywhere.
type disc struct {
	mass, d float64 // d is the distance from the centre
	is      float64 // 1/sigma, 0 for a point
	reach   float64 // beyond d ± reach the tail is 0 or 1 to 1e-18
}

type needle struct {
	mass  float64
	w2, v float64 // squared distance of its line from the centre; |place along it|
	is    float64
	reach float64
}

// distance is that of its middle.
func (a *needle) distance() float64 { return math.Sqrt(a.w2 + float64(a.v*a.v)) }

// columns are needles as kernel.Beyond takes them.
type columns struct{ mass, w2, v, is []float64 }

func (c *columns) resize(n int) {
	c.mass, c.w2, c.v, c.is = resize(c.mass, n), resize(c.w2, n), resize(c.v, n), resize(c.is, n)
}

// gaussHermite are nodes and weights for the standard normal distribution
// (probabilists' form), the positive half; Abramowitz & Stegun table 25.10 with
// nodes times sqrt 2 and weights over sqrt π.
type nodeWeight struct{ z, w float64 }

var (
	hermite1 = []nodeWeight{{0, 1}}
	hermite2 = []nodeWeight{{1, 0.5}}
	hermite5 = []nodeWeight{
		{0, 0.5333333333333333},
		{1.355626179974266, 0.22207592200561263},
		{2.8569700138728056, 0.011257411327720691},
	}
	hermite9 = []nodeWeight{
		{0, 0.40634920634920635},
		{1.0232556637891326, 0.24409750289493946},
		{2.0768479786778302, 0.04991640676521787},
		{3.2054290028564703, 0.0027891413212317675},
		{4.512745863399783, 2.2345844007746563e-05},
	}
)

// The ratios of minor to major sigma that part the cases. The needles' tails
// grow across the row like exp(κz), κ = w·minor/major² at a distance w of the
// row's middle, besides the row's own tail at six sigma. At κ = 0.5 two nodes
// are off by 0.5 % of the tail, at 1.5 five by 0.2 %, at 3 nine by 2 %.
// needleExcess covers that, and cuspWidening, on the radius, what the cusp of a
// tail adds where its line touches the circle.
const (
	asDisc    = 0.985
	asNeedles = 0.5

	needleExcess = 1.01
	cuspWidening = 1.002
)

// hairM2 over the mean square distance from the centre is the minor variance
// below which one needle does, or two where it is not much narrower than long:
// five of its sigmas then change a radius, which is about that distance, by 1 %.
const hairM2 = 0.002 * 0.002

// dotM2 over the mean square distance is the major variance below which one disc
// of that does, as for most of a belief over a whole town: two of its sigmas then
// change a radius by 0.2 %, which cuspWidening covers.
const dotM2 = 0.001 * 0.001

// take adds one Gaussian with a mean at p from the circle's centre.
func (s *Summarizer) take(mass float64, p geo.Point, c Cov, meanSquare float64) {
	l1, l2 := c.eigen()
	switch {
	case l1 == 0:
		s.discs = append(s.discs, disc{mass: mass, d: p.Norm()})
		return
	case l2 >= asDisc*asDisc*l1, l1 < dotM2*meanSquare:
		s.dots = s.dots || l2 < asDisc*asDisc*l1
		sigma := math.Sqrt(l1)
		s.discs = append(s.discs, disc{mass, p.Norm(), 1 / sigma, tailEnd * sigma})
		return
	}
	axis := c.axis()
	// Along and across the major axis.
	v := float64(p.E*axis.E) + float64(p.N*axis.N)
	w := float64(p.N*axis.E) - float64(p.E*axis.N)
	s1, s2 := math.Sqrt(l1), math.Sqrt(l2)
	if s2 < asNeedles*s1 || l2 < hairM2*meanSquare {
		rule := hermite9
		kappa := math.Abs(w) * s2 / l1
		switch {
		case l2 < hairM2*meanSquare:
			if rule = hermite1; s2 >= asNeedles*s1 {
				rule = hermite2
			}
		case s2 < 0.125*s1 && kappa < 0.5:
			rule = hermite2
		case s2 < 0.25*s1 && kappa < 1.5:
			rule = hermite5
		}
		is := 1 / s1
		for _, n := range rule {
			s.needle(mass*n.w, w+float64(n.z*s2), v, is, s1)
			if n.z != 0 {
				s.needle(mass*n.w, w-float64(n.z*s2), v, is, s1)
			}
		}
		return
	}
	tau := math.Sqrt(l1 - l2)
	h := 1.6 * s2 / s1 // in units of tau
	k := int(math.Ceil(s.tailSigmas / h))
	sum := 0.0
	first := len(s.discs)
	for i := -k; i <= k; i++ {
		_, f := kernel.QuickTail(float64(i) * h)
		at := v + float64(float64(i)*h*tau)
		d := math.Sqrt(float64(at*at) + float64(w*w))
		s.discs = append(s.discs, disc{f, d, 1 / s2, tailEnd * s2})
		sum += f
	}
	for i := first; i < len(s.discs); i++ {
		s.discs[i].mass *= mass / sum
	}
}

func (s *Summarizer) needle(mass, w, v, is, sigma float64) {
	w2 := w * w
	s.needles = append(s.needles, needle{
		mass, w2, math.Abs(v), is, tailEnd * sigma,
	})
}

// outside returns the mass outside the circle of radius r around the centre,
// of the near pieces.
func (s *Summarizer) outside(r float64) float64 {
	sum := s.beyond
	t := s.tables
	for i := range s.nearDiscs {
		a := &s.nearDiscs[i]
		switch {
		case r >= a.d+a.reach:
		case r <= a.d-a.reach || a.is == 0:
			sum += a.mass
		default:
			sum += float64(a.mass * t.circleTail(a.d*a.is, r*a.is))
		}
	}
	n := &s.near
	return sum + kernel.Beyond(n.mass, n.w2, n.v, n.is, r*r, needleExcess)
}
