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

// radius is that of the circle around the mean of a normal distribution that
// holds a probability:
//
//	P(|x| ≤ r) = ∫ N(u; 0, a²)·(2Φ(√(r²-u²)/b) - 1) du over |u| ≤ r,
//
// a and b the standard deviations along the axes, by Simpson's rule in the angle
// u = r·sin φ and bisection.
func radius(c summary.Cov, probability float64) float64 {
	a, b := c.Axes()
	if !(a > 0) {
		return 0
	}
	inside := func(r float64) float64 {
		const n = 200 // of (0, π/2); the narrower axis is b, so the peak is as wide as a
		sum := 0.0
		for i := range n + 1 {
			s, cos := math.Sincos(math.Pi / 2 * float64(i) / n)
			u := r * s / a
			f := math.Exp(-u*u/2) * cos
			if b > 0 {
				f *= math.Erf(r * cos / b / math.Sqrt2)
			}
			switch {
			case i == 0 || i == n:
			case i%2 == 1:
				f *= 4
			default:
				f *= 2
			}
			sum += f
		}
		return 2 * r / (a * math.Sqrt(2*math.Pi)) * sum * (math.Pi / 2 / n) / 3
	}
	lo, hi := 0.0, 10*a
	for range 60 {
		if mid := (lo + hi) / 2; inside(mid) < probability {
			lo = mid
		} else {
			hi = mid
		}
	}
	return hi
}
