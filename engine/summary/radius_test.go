package summary

import (
	"fmt"
	"math"
	"math/rand/v2"
	"sort"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// TestCircular holds the radii of one circular Gaussian to the Rayleigh
// distribution, P(R > r) = exp(-r²/2σ²), and the published factors that follow
// from it.
func TestCircular(t *testing.T) {
	for _, c := range []struct {
		source string
		risk   float64
		k      float64
	}{
		{"closed form sqrt(-2 ln 1e-7)", 1e-7, 5.678},
		{"RTCA DO-229: K for 5e-9, sqrt(-2 ln 5e-9)", 5e-9, 6.183},
	} {
		in := planeInput([]gauss{{1, 12000, -7000, Cov{1, 0, 1}}})
		s, p := summarize(t, Options{IntegrityRisk: c.risk}, in)
		k := scaleAt(p.MeanFrame)
		got := p.Protection.RadiusM * k
		// Above by radiusStep, circleExcess and tailExcess at most: in ln P
		// 2·radiusStep·ln(1/risk)+0.003+0.03, over d ln P/d ln r = 2 ln(1/risk).
		most := c.k * (1 + radiusStep + 0.033/(-2*math.Log(c.risk)))
		if !p.Protection.Bounded || got < c.k-5e-4 || got > most {
			t.Errorf("%s: %.5f, want from %v to %v", c.source, got, c.k, most)
		}
		for _, r := range []struct {
			what      string
			got, want float64
		}{
			{"CE90, sqrt(-2 ln 0.1)", s.radius(0.1, math.Sqrt2), 2.14597},
			{"R50, sqrt(2 ln 2)", p.Radius50M * k, 1.17741},
			{"R95, sqrt(-2 ln 0.05)", p.Radius95M * k, 2.44775},
			{"R99, sqrt(-2 ln 0.01)", p.Radius99M * k, 3.03485},
		} {
			if r.got < r.want*(1-1e-5) || r.got > r.want*(1+radiusStep+0.003) {
				t.Errorf("%s: %.5f, want %v", r.what, r.got, r.want)
			}
		}
	}
}

// TestEllipse holds the error ellipse to a worked case of RTCA DO-229,
// appendix J: d² = (E²+N²)/2 + sqrt(((E²-N²)/2)² + EN²) with variances 4 and 1,
// covariance 1 and K = 6 gives d = 2.0743 and HPL = 12.446.
func TestEllipse(t *testing.T) {
	c := Cov{4, 1, 1}
	major, minor := c.Axes()
	if math.Abs(major-2.0743) > 5e-5 || math.Abs(6*major-12.446) > 5e-4 {
		t.Errorf("major axis %v, HPL %v; want 2.0743, 12.446", major, 6*major)
	}
	// det = 3 = (major·minor)².
	if math.Abs(major*minor-math.Sqrt(3)) > 1e-12 {
		t.Errorf("minor axis %v", minor)
	}
	// The axis is an eigenvector.
	a := c.axis()
	if e := math.Hypot(4*a.E+a.N-major*major*a.E, a.E+a.N-major*major*a.N); e > 1e-12 {
		t.Errorf("axis %v is off by %v", a, e)
	}
}

// outsideCircle is the mass of one Gaussian outside a circle around the origin,
// by Simpson's rule in polar coordinates: over the angle the radial integral
// is a closed form, and periodic, so that the trapezoidal rule in the angle
// converges exponentially: at a step of 0.4 sigma the error is 2·exp(-2π²/0.4²),
// below 1e-50. 3000 angles do for a Gaussian that is 0.005 rad wide.
func outsideCircle(g gauss, r float64) float64 {
	det := g.c.EE*g.c.NN - g.c.EN*g.c.EN
	pee, pen, pnn := g.c.NN/det, -g.c.EN/det, g.c.EE/det
	_, minor := g.c.Axes()
	n := max(3000, int(2*math.Pi*math.Hypot(g.e, g.n)/(0.4*minor)))
	c0 := pee*g.e*g.e + 2*pen*g.e*g.n + pnn*g.n*g.n
	sum := 0.0
	for i := range n {
		s, c := math.Sincos(2 * math.Pi * float64(i) / float64(n))
		a := pee*c*c + 2*pen*c*s + pnn*s*s
		b := (pee*c+pen*s)*g.e + (pen*c+pnn*s)*g.n
		m := b / a
		x := math.Sqrt(a) * (r - m)
		sum += math.Exp(-0.5*(c0-b*m)) * (math.Exp(-0.5*x*x)/a + m*math.Sqrt(2*math.Pi/a)*kernel.NormalUpper(x))
	}
	return g.m * sum / float64(n) / math.Sqrt(det)
}

// TestRadiiExact proves for mixtures of every shape, against an independent
// quadrature, that at most the stated mass lies outside each radius, and that
// 2 % less radius leaves more than that outside.
func TestRadiiExact(t *testing.T) {
	turn := func(s1, s2, angle float64) Cov {
		s, c := math.Sincos(angle)
		a, b := s1*s1, s2*s2
		return Cov{a*c*c + b*s*s, (a - b) * c * s, a*s*s + b*c*c}
	}
	cases := map[string][]gauss{}
	var names []string
	add := func(name string, g ...gauss) { cases[name] = g; names = append(names, name) }
	for _, ratio := range []float64{1, 0.99, 0.98, 0.9, 0.7, 0.51, 0.49, 0.3, 0.24, 0.15, 0.1, 0.01} {
		add(fmt.Sprintf("one, axes %v", ratio), gauss{1, 0, 0, turn(3, 3*ratio, 0.7)})
	}
	add("two apart", gauss{0.6, -40, 3, turn(4, 2, 0.2)}, gauss{0.4, 30, 20, turn(3, 0.5, 1.2)})
	add("a far little one", gauss{1 - 1e-6, 0, 0, turn(4, 3, 0.2)}, gauss{1e-6, 60, 0, turn(5, 1, 2)})
	add("just below the risk", gauss{1 - 5e-8, 0, 0, turn(4, 3, 0.2)}, gauss{5e-8, 100, 0, turn(1, 1, 0)})
	for _, a := range []float64{1, 3, 8} {
		// Needles side by side, as the cells of a road are.
		var g []gauss
		for x := -30.5; x <= 30.5; x++ {
			g = append(g, gauss{math.Exp(-0.5*(x/a)*(x/a)) * kernel.InvSqrt2Pi / a, 0.8 * x, 0.6 * x, turn(2.5, 0.3, math.Atan2(0.8, -0.6))})
		}
		add(fmt.Sprintf("road %v", a), g...)
	}
	// So far apart that a Gaussian counts as a disc; at the radius that holds half
	// the narrow side of some of them decides.
	var town []gauss
	for i := range 40 {
		angle := 2 * math.Pi * float64(i) / 40
		d := 6000.0
		if i%2 == 0 {
			d = 3500
		}
		town = append(town, gauss{[2]float64{0.0255, 0.0245}[i%2], d * math.Sin(angle), d * math.Cos(angle), turn(4.6, 2.5, float64(i))})
	}
	add("a town", town...)
	// All at one distance, where nothing but the widths tells radii apart: hairs
	// that are not much narrower than long, just below hairM2, and longer than dotM2.
	for _, ratio := range []float64{0.51, 0.7, 0.97} {
		var ring []gauss
		for i := range 40 {
			angle := 2 * math.Pi * float64(i) / 40
			ring = append(ring, gauss{1. / 40, 6000 * math.Sin(angle), 6000 * math.Cos(angle), turn(11.5/ratio, 11.5, float64(i))})
		}
		add(fmt.Sprintf("a ring, axes %v", ratio), ring...)
	}
	for _, name := range names {
		in := planeInput(cases[name])
		s, p := summarize(t, Options{}, in)
		k := scaleAt(p.MeanFrame)
		outside := func(r float64) float64 {
			sum := 0.0
			for _, g := range mixture(s) {
				g.e -= p.MeanFrame.E
				g.n -= p.MeanFrame.N
				sum += outsideCircle(g, r)
			}
			return sum
		}
		for _, c := range []struct{ target, r float64 }{
			{0.5, p.Radius50M}, {0.05, p.Radius95M}, {0.01, p.Radius99M}, {1e-7, p.Protection.RadiusM},
		} {
			// The quadratures' 0.1 % on the safe side of which the excesses
			// keep a single Gaussian.
			if out := outside(c.r * k * 1.001); out > c.target {
				t.Errorf("%s: %.4g outside the radius %.4g m for %v", name, out, c.r, c.target)
			}
			if out := outside(c.r * k * 0.98); out < c.target {
				t.Errorf("%s: the radius %.4g m for %v is more than 2 %% too large: %.4g outside 0.98 of it", name, c.r, c.target, out)
			}
		}
	}
}

// TestRadiiSampled compares radii with samples: of n draws the fraction
// outside is within 4.5 standard errors of what it should be, plus what 2 % of
// radius is worth.
func TestRadiiSampled(t *testing.T) {
	const seed, n = 5, 200_000
	rng := rand.New(rand.NewPCG(seed, 0))
	r := roads{
		{geo.Point{E: -2000, N: 500}, geo.Point{E: -1500, N: 900}, "a", -1},
		{geo.Point{E: -1500, N: 900}, geo.Point{E: -1500, N: 300}, "b", -1},
	}
	for name, in := range map[string]*Input{
		"roads": roadInput(r, 1, []part{{0, 0.7, 600, 12}, {1, 0.3, 40, 20}}),
		"plane": latticeInput(60, 2, 9, geo.Point{E: 400, N: 4000}),
	} {
		s, p := summarize(t, Options{}, in)
		k := scaleAt(p.MeanFrame)
		d := make([]float64, n)
		for i, q := range draw(rng, mixture(s), n) {
			d[i] = q.Sub(p.MeanFrame).Norm() / k
		}
		sort.Float64s(d)
		out := func(r float64) float64 { return 1 - float64(sort.SearchFloat64s(d, r))/n }
		for _, c := range []struct{ target, r float64 }{{0.5, p.Radius50M}, {0.05, p.Radius95M}, {0.01, p.Radius99M}} {
			slack := 4.5 * math.Sqrt(c.target*(1-c.target)/n)
			if out(c.r) > c.target+slack || out(c.r*0.98) < c.target-slack {
				t.Errorf("%s, seed %d: %.4f outside %.3f m, want %v", name, seed, out(c.r), c.r, c.target)
			}
		}
	}
}

// TestProtectionUnbounded proves invariant 1: what was lost counts, and a tenth
// of the risk of it is too much.
func TestProtectionUnbounded(t *testing.T) {
	base := func() *Input { return planeInput([]gauss{{1, 0, 0, Cov{1, 0, 1}}}) }
	_, p := summarize(t, Options{}, base())
	none := p.Protection.RadiusM
	for _, c := range []struct {
		name    string
		set     func(*Input)
		bounded bool
	}{
		{"pruned below", func(in *Input) { in.Belief.Pruned = 0.99e-8 }, true},
		{"pruned", func(in *Input) { in.Belief.Pruned = 1.01e-8 }, false},
		{"left", func(in *Input) { in.Belief.LeftMap = 1.01e-8 }, false},
		{"restarted", func(in *Input) { in.RestartMass = 1.01e-8 }, false},
		{"lost below", func(in *Input) { in.Lost = 0.99e-8 }, true},
		{"together", func(in *Input) { in.Belief.Pruned, in.RestartMass = 0.6e-8, 0.6e-8 }, false},
		{"off the map, but in the mixture", func(in *Input) { in.OffMapMass = 0.3; in.Belief.Pruned = 1e-9 }, true},
		{"not a number", func(in *Input) { in.RestartMass = math.NaN() }, false},
	} {
		in := base()
		c.set(in)
		_, p := summarize(t, Options{}, in)
		switch {
		case p.Protection.Bounded != c.bounded:
			t.Errorf("%s: bounded %v, want %v", c.name, p.Protection.Bounded, c.bounded)
		case c.bounded && !(p.Protection.RadiusM > none):
			t.Errorf("%s: lost mass does not widen the radius", c.name)
		case !c.bounded && (!math.IsInf(p.Protection.RadiusM, 1) || p.Protection.Reason != ReasonLostMass):
			t.Errorf("%s: radius %v, reason %q", c.name, p.Protection.RadiusM, p.Protection.Reason)
		}
	}
}
