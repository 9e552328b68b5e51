package filter

// Likelihood says how well each position explains one measurement.
type Likelihood interface {
	// Wants names the columns it reads.
	Wants() Wants
	// LogLikelihood adds ln p(measurement | position i) to dst[i], constants
	// included, so that evidence compares across models. -Inf is allowed;
	// NaN and +Inf never.
	LogLikelihood(dst []float64, at *Columns)
}

// LinearLikelihood is a measurement z = g(x) + v whose residual is locally
// linear in the quantities, so that each Gaussian can be updated and not only
// weighed.
type LinearLikelihood interface {
	Wants() Wants
	// Rows is the number of components of the residual, 1 or 2.
	Rows() int
	// Noise is the distribution of v.
	Noise() Noise
	// Linearize fills t at n positions for a belief over the quantities qs;
	// mean holds the Gaussians' means (n×len(qs)). The position entries of
	// the means are already in the columns.
	Linearize(t *Terms, at *Columns, qs []Quantity, mean []float64)
}

// OfVelocity is a likelihood of the velocity on a plane alone. On a grid that has it as
// axes, LogVelocity is ln p(measurement | velocity east, north), no sharper than the
// variances least along each.
type OfVelocity interface {
	LogVelocity(east, north float64, least [2]float64) float64
}

// Terms is what LinearLikelihood.Linearize fills, for n positions, m residual
// components and k quantities (k is at least the space's Dim).
type Terms struct {
	// Residual is z - g(x) at the position, n×m; angles already wrapped.
	Residual []float64
	// Row is ∂g/∂x, n×m×k, zero on entry.
	Row []float64
	// Extra is variance to be added to every component of v at this
	// position (the map's own error), n, zero on entry.
	Extra []float64
	// Wide, where it is not NaN, takes the place of Extra for all parts of
	// the noise but the first: a position with a distribution of its own, n.
	// NaN on entry.
	Wide []float64
	// Flat, where it is not NaN, is the ln density to use instead at this
	// position, which then says nothing about the quantities: an unknown
	// height, say. NaN on entry.
	Flat []float64
}

// Noise is a mixture for the error v of a linear likelihood:
//
//	p(v) = Σ Weight·N(v; Mean, Cov + Extra·I) + FlatWeight·FlatDensity,
//
// (Wide in place of Extra where Terms says so), all raised to Power. Power below 1 tempers a measurement that shares its
// error with its neighbours: a sum of n of them with Power 1/n counts as one.
type Noise struct {
	Parts []NoisePart
	// FlatWeight is the probability of an outlier, whose density is
	// FlatDensity wherever it falls (per unit of the residual). Both may be 0.
	FlatWeight, FlatDensity float64
	// FlatRank is the probability that an outlier is less than this measurement
	// (function FlatRank), of one component, where outliers have a span of their own
	// whatever was predicted: plausible heights, say. 0 where they are flat about the
	// prediction. It weighs nothing: the monitor asks for it (Predictive).
	FlatRank float64
	// Power is in (0, 1]; 0 means 1.
	Power float64
}

// NoisePart is one Gaussian of a Noise: Weight in (0, 1], packed covariance.
// Cov[0] alone is used for one residual component, which Mean, in its units,
// puts off 0: an error that is mostly to one side.
type NoisePart struct {
	Weight float64
	Cov    [3]float64
	Mean   float64
}

// Gaussian is the noise of a plain measurement with standard deviation sigma.
func Gaussian(sigma float64) Noise {
	return Noise{Parts: []NoisePart{{Weight: 1, Cov: [3]float64{sigma * sigma, 0, sigma * sigma}}}}
}

// beyondSpan is the part of outliers that lies beyond the span in which they are flat:
// so much of what is called impossible happens after all (practice).
const beyondSpan = 0.1

// FlatRank is the probability that an outlier is less than x, where outliers are flat
// from low to high, but for a tenth of them, a half of which lies on either side: of
// where beyond the span nothing is known, so that there it is the middle of what that
// half holds. It is never 0 or 1: of a score (Predictive.Score), x being an outlier of
// probability w, as much as w/40 remains on the side that it is on.
func FlatRank(x, low, high float64) float64 {
	switch {
	case x < low:
		return beyondSpan / 4
	case x > high:
		return 1 - beyondSpan/4
	}
	return beyondSpan/2 + float64((1-beyondSpan)*(x-low)/(high-low))
}
