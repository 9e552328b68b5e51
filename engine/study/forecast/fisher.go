package forecast

import (
	"math"

	"leadline/engine/summary"
)

// fisher is the information that one residual component r of a noise has of its
// mean: ∫ p′²/p over the mixture, outliers and all, times the power by which it
// counts. Of two components each is taken by itself, which leaves out what an
// outlier in one says of the other. A single Gaussian gives 1/σ².
func fisher(l *linearized, r int) float64 {
	power := l.noise.Power
	if power == 0 {
		power = 1
	}
	parts := l.noise.Parts
	sigma := make([]float64, len(parts))
	least, most, farthest := math.Inf(1), 0.0, 0.0
	for c, p := range parts {
		v := p.Cov[0]
		if r == 1 {
			v = p.Cov[2]
		}
		sigma[c] = math.Sqrt(v + l.terms.ExtraOf(0, c))
		least, most = math.Min(least, sigma[c]), math.Max(most, sigma[c])
		farthest = math.Max(farthest, math.Abs(p.Mean))
	}
	if !(least > 0) || math.IsInf(most, 1) {
		return 0
	}
	flat := l.noise.FlatWeight * l.noise.FlatDensity
	if l.rows == 2 {
		flat = l.noise.FlatWeight * math.Sqrt(l.noise.FlatDensity)
	}
	if len(parts) == 1 && flat == 0 {
		return power * parts[0].Weight / (sigma[0] * sigma[0])
	}
	// The trapezoid rule is exact to 1e-12 for Gaussians sampled at their sigma;
	// three times as fine for the quotient.
	h := least / 3
	n := int(math.Min(math.Ceil((farthest+7*most)/h), 20_000))
	h = (farthest + 7*most) / float64(n)
	sum := 0.0
	for i := -n; i <= n; i++ {
		v := float64(i) * h
		p, d := flat, 0.0
		for c, part := range parts {
			u := (v - part.Mean) / sigma[c]
			g := part.Weight / (sigma[c] * math.Sqrt(2*math.Pi)) * math.Exp(-u*u/2)
			p += g
			d -= g * u / sigma[c]
		}
		if p > 0 {
			sum += d * d / p
		}
	}
	return power * sum * h
}

// arcs are the angles of radius's rule with its weights: of (0, π/2); the narrower
// axis is b, so that the peak is as wide as a.
var arcs = func() (out [201]struct{ sin, cos, weight float64 }) {
	n := len(out) - 1
	for i := range out {
		s, c := math.Sincos(math.Pi / 2 * float64(i) / float64(n))
		w := 2.0
		switch {
		case i == 0 || i == n:
			w = 1
		case i%2 == 1:
			w = 4
		}
		out[i].sin, out[i].cos, out[i].weight = s, c, w*c*math.Pi/2/float64(n)/3
	}
	return out
}()

// radius is that of the circle around the mean of a normal distribution that
// holds a probability:
//
//	P(|x| ≤ r) = ∫ N(u; 0, a²)·(2Φ(√(r²-u²)/b) - 1) du over |u| ≤ r,
//
// a and b the standard deviations along the axes, by Simpson's rule in the angle
// u = r·sin φ, and the Illinois rule (Dowell & Jarratt, BIT 11, 1971) on -ln(1 - P)
// over r², which is a straight line for b = a. That circle is the largest: r lies
// below a√(-2 ln(1 - P)).
func radius(c summary.Cov, probability float64) float64 {
	a, b := c.Axes()
	if !(a > 0) {
		return 0
	}
	wanted := -math.Log1p(-probability)
	over := func(squared float64) float64 {
		r, sum := math.Sqrt(squared), 0.0
		for _, arc := range arcs {
			u := r * arc.sin / a
			f := math.Exp(-u*u/2) * arc.weight
			if b > 0 {
				f *= math.Erf(r * arc.cos / b / math.Sqrt2)
			}
			sum += f
		}
		p := 2 * r / (a * math.Sqrt(2*math.Pi)) * sum
		return -math.Log1p(-math.Min(p, 1-1e-15)) - wanted // the rule errs, and p is below 1
	}
	lo, hi := 0.0, 2*a*a*wanted
	below, above := -wanted, over(hi)
	if !(above > 0) {
		return math.Sqrt(hi)
	}
	for last, side := hi, 0.0; ; {
		at := (lo*above - hi*below) / (above - below)
		if math.Abs(at-last) <= 1e-13*hi || !(at > lo && at < hi) {
			return math.Sqrt(at)
		}
		last = at
		y := over(at)
		again := y*side > 0 // the same end moves as before: the other one weighs half
		if side = y; y < 0 {
			lo, below = at, y
			if again {
				above /= 2
			}
		} else {
			hi, above = at, y
			if again {
				below /= 2
			}
		}
	}
}
