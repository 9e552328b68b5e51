package sensor

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// poorSigmaRad is the standard deviation from which a direction is taken by
// its exact von Mises density instead of a wrapped residual: 15°, where the
// wrapped tail beyond ±180° is still 12 sigma away, and where the bend of a
// bearing's surface over one sigma begins to show (tan 15° is 2 % more than
// 15° in radians).
const poorSigmaRad = 15 * math.Pi / 180

// VonMises is the distribution of a direction around a mean, with
// concentration κ = 1/σ²: ln p(δ) = κ cos δ - ln(2π I₀(κ)). For small σ it is
// the normal distribution of σ; for large σ it goes to the uniform one.
type VonMises struct{ kappa, logNorm float64 }

// NewVonMises makes the distribution for σ > 0 in radians.
func NewVonMises(sigmaRad float64) VonMises {
	k := 1 / (sigmaRad * sigmaRad)
	if k > 1e4 { // ln I₀(κ) - κ = -½ ln 2πκ + 1/8κ + O(κ⁻²), without cancelling
		return VonMises{k, 0.5*kernel.Log(k/(2*math.Pi)) - 1/(8*k)}
	}
	return VonMises{k, k - kernel.LogI0(k) - kernel.Log(2*math.Pi)}
}

// LogDensity returns ln p(δ) per radian; it never underflows to -Inf for
// finite δ.
func (v VonMises) LogDensity(deltaRad float64) float64 {
	s := kernel.Sin(0.5 * deltaRad) // κ(cos δ - 1) = -2κ sin²(δ/2)
	return v.logNorm - float64(2*v.kappa*s*s)
}

// directionNoise is the noise of a direction: normal parts and a flat one of
// density 1/2π.
func (c *Context) directionNoise(d Sensor, sigmaRad float64) filter.Noise {
	return c.noise(d, variance1(sigmaRad), 1/(2*math.Pi))
}

// logDirection is the exact counterpart: ln of the mixture with von Mises
// parts, each widened by extra (rad²), at a residual; without its power.
func logDirection(n *filter.Noise, residual, extra float64) float64 {
	return logMixture(n, func(variance float64) float64 {
		return NewVonMises(math.Sqrt(variance)).LogDensity(residual)
	}, extra)
}

// sight is a line of sight between the vehicle and a known point: a bearing
// from one to the other.
//
// At distance r along δ = (δE, δN) to the point, the direction is β =
// atan2(δE, δN) with gradient (δN, -δE)/r² in the point's place, the opposite
// in the vehicle's. A vehicle beside the centreline of its road, or a sensor
// at an arm of unknown direction, adds variance / r².
type sight struct {
	target     geo.Point
	fromTarget bool // the direction was measured at the target
	zRad       float64
	mirrorRad  float64 // the other direction an array cannot tell from z
	mirrored   bool
	skew       skew
	arm        arm
	lateralVar float64
	nearM      float64
	noise      filter.Noise
}

// look returns residual, extra variance and what the gradient needs.
func (l *sight) look(i int, at *filter.Columns, k int, mean []float64) (beta, gE, gN, dE, dN, extra, r float64) {
	oE, oN, dE, dN := l.arm.at(i, at, k, mean)
	vE, vN := at.East[i]+oE, at.North[i]+oN
	eE, eN := l.target.E-vE, l.target.N-vN
	sign := -1.0 // the vehicle moves the far end or the near one
	if l.fromTarget {
		eE, eN, sign = -eE, -eN, 1
	}
	r2 := float64(eE*eE) + float64(eN*eN)
	r = math.Sqrt(r2)
	if r < 1e-6 {
		return 0, 0, 0, dE, dN, 0, 0
	}
	beta = kernel.Atan2(eE, eN)
	gE, gN = sign*eN/r2, -sign*eE/r2
	extra = lateral(at, i, l.lateralVar, eN/r, -eE/r)/r2 + l.arm.unknownVar/r2
	return beta, gE, gN, dE, dN, extra, r
}

// frameZ returns a measured true direction in the frame, at the place where
// it was measured.
func (l *sight) frameZ(i int, at *filter.Columns, z float64) float64 {
	if l.fromTarget {
		return z - l.skew.gamma(l.target.E, l.target.N)
	}
	return z - l.skew.gamma(at.East[i], at.North[i])
}

// exact is the ln density at position i, without the noise's power.
func (l *sight) exact(i int, at *filter.Columns, beta, extra, r float64) float64 {
	if r == 0 {
		return -kernel.Log(2 * math.Pi)
	}
	log := logDirection(&l.noise, l.frameZ(i, at, l.zRad)-beta, extra)
	if !l.mirrored {
		return log
	}
	other := logDirection(&l.noise, l.frameZ(i, at, l.mirrorRad)-beta, extra)
	most := math.Max(log, other)
	return most + kernel.Log(0.5*(kernel.Exp(log-most)+kernel.Exp(other-most)))
}

// linearSight takes a sharp direction by its wrapped residual; within nearM of
// the point, where the direction bends within one Gaussian, by its exact
// density at the Gaussian's mean.
type linearSight struct{ sight }

// exactSight takes a poor or ambiguous direction by its exact density.
type exactSight struct{ sight }

var (
	_ filter.LinearLikelihood = (*linearSight)(nil)
	_ filter.Likelihood       = (*exactSight)(nil)
)

func (l *sight) Wants() filter.Wants       { return filter.WantPosition }
func (l *linearSight) Rows() int           { return 1 }
func (l *linearSight) Noise() filter.Noise { return l.noise }

// Circular implements filter.Circular.
func (l *linearSight) Circular() {}

// Linearize implements filter.LinearLikelihood.
func (l *linearSight) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, mean []float64) {
	k := stride(at, qs)
	for i := range at.East {
		beta, gE, gN, dE, dN, extra, r := l.look(i, at, k, mean)
		t.Extra[i] = extra
		if r < l.nearM || r == 0 {
			t.Flat[i] = l.exact(i, at, beta, extra, r)
			continue
		}
		t.Residual[i] = geo.WrapPi(l.frameZ(i, at, l.zRad) - beta)
		row := t.Row[i*k : i*k+k]
		at.Row(row, i, gE, gN)
		if l.arm.heading >= 0 {
			row[l.arm.heading] = float64(gE*dE) + float64(gN*dN)
		}
	}
}

// LogLikelihood implements filter.Likelihood.
func (l *exactSight) LogLikelihood(dst []float64, at *filter.Columns) {
	power := l.noise.Power
	for i := range dst {
		beta, _, _, _, _, extra, r := l.look(i, at, 0, nil)
		dst[i] += float64(power * l.exact(i, at, beta, extra, r))
	}
}

// likelihood chooses the form.
func (l sight) likelihood(sigmaRad float64) any {
	if l.mirrored || sigmaRad > poorSigmaRad {
		return &exactSight{l}
	}
	return &linearSight{l}
}
