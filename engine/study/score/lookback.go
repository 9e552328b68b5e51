package score

import (
	"math"

	"leadline/engine/summary"
)

// LookedBack is what looking back over a drive gives.
type LookedBack struct {
	// Smoothed is what is known of each time given the whole drive, Path the most
	// probable path: nil if it was not asked for.
	Smoothed *Hindsight `json:"smoothed,omitempty"`
	Path     *Hindsight `json:"path,omitempty"`
	// Agreement needs no truth.
	Agreement *Agreement `json:"agreement"`
}

// Hindsight are figures of what is known later: those without a suffix of the
// same times as the drive's own, from its first located posterior on.
type Hindsight struct {
	Figures
	FiguresAll
}

// Lagged are figures of what is known of times a lag ago, given all that was measured
// until then: those without a suffix from its first located posterior on.
type Lagged struct {
	LagS       float64 `json:"lag_s"`
	Posteriors int     `json:"posteriors"`
	Hindsight
}

// Agreement compares what was known at each time with what is known of it later. If
// the model is right and linear, the difference d of the means has the covariance
// P - P', that of the filter less that of the smoother, so that d'(P - P')⁻¹d is 2 in
// the mean: more says that errors are larger than stated, or that motion or
// measurements are not what the suite says.
//
// Source: the filter-smoother consistency test (McReynolds, Editing data using
// sequential smoothing techniques for discrete systems, AIAA 1984; from memory).
type Agreement struct {
	// Compared are the posteriors in which the later covariance is smaller in every
	// direction, of All: elsewhere there is no such difference to expect.
	Compared int `json:"compared"`
	All      int `json:"of"`
	// RMSM is the root mean square of the distance between the means, m, over all.
	RMSM float64 `json:"moved_rms_m"`
	// MeanSquare is the mean of d'(P - P')⁻¹d; Within99 the share below 9.21, which
	// is 99 % of a chi-squared distribution with two degrees of freedom.
	MeanSquare *float64 `json:"moved_mean_square"`
	Within99   *float64 `json:"moved_within99"`

	square, within, distance float64
}

// Add takes a time's posteriors.
func (a *Agreement) Add(filtered, smoothed *summary.Posterior) {
	d := smoothed.MeanFrame.Sub(filtered.MeanFrame)
	p, q := filtered.CovFrame, smoothed.CovFrame
	a.All++
	a.distance += d.E*d.E + d.N*d.N
	ee, en, nn := p.EE-q.EE, p.EN-q.EN, p.NN-q.NN
	// At least a hundredth of what was: less is rounding, and what moments leave
	// of shapes that are no Gaussian. Along a road the covariance is flat across
	// it: what is added to both is the lateral part, which stays.
	least := 0.01 * (p.EE + p.NN)
	root := math.Hypot((ee-nn)/2, en)
	major, minor := (ee+nn)/2+root, (ee+nn)/2-root
	if !(major > least) {
		return
	}
	// The direction of the major axis; where the minor one has nothing to expect,
	// half of the statistic is known.
	angle := 0.5 * math.Atan2(2*en, ee-nn)
	sin, cos := math.Sincos(angle)
	u, v := d.E*cos+d.N*sin, -d.E*sin+d.N*cos
	square, limit := u*u/major+v*v/minor, 9.21
	if !(minor > least) {
		square, limit = 2*u*u/major, 2*6.635 // 99 % with one degree of freedom, twice
	}
	a.Compared++
	a.square += square
	if square < limit {
		a.within++
	}
}

// End sums up.
func (a *Agreement) End() *Agreement {
	if a.All > 0 {
		a.RMSM = math.Sqrt(a.distance / float64(a.All))
	}
	if a.Compared > 0 {
		a.MeanSquare, a.Within99 = finite(a.square/float64(a.Compared)), finite(a.within/float64(a.Compared))
	}
	return a
}
