package sensor

import "math"

// Displacement is the ground-frame displacement since Since in true east and
// north (inertial, Doppler log), with its covariance (EE, EN, NN).
//
// On a plane positions move by the displacement rotated into the frame, d' = R d,
// and spread by the rotated covariance, C' = R C Rᵀ. On roads they move by its
// component along the road, and the component across it is a measurement of
// the road's direction (CrossTrack).
// Source: the linear map of a Gaussian, as in Bar-Shalom, Li & Kirubarajan,
// Estimation with Applications to Tracking and Navigation.
type Displacement struct {
	Since         Time
	EastM, NorthM float64
	CovM2         [3]float64
}

// Kind is "displacement".
func (Displacement) Kind() string { return KindDisplacement }

// Check reports an increment that no filter could use. The covariance must be
// positive definite: its correlation is below 1 by at least 1e-9, so that the
// determinant survives rounding.
func (m Displacement) Check(at Time) error {
	p := problems{what: KindDisplacement}
	p.since(m.Since, at)
	p.length("east_m", m.EastM)
	p.length("north_m", m.NorthM)
	ee, en, nn := m.CovM2[0], m.CovM2[1], m.CovM2[2]
	const lo, hi = minSigmaM * minSigmaM, maxSigmaM * maxSigmaM
	p.within("covariance east_m2", ee, lo, hi)
	p.within("covariance north_m2", nn, lo, hi)
	if len(p.list) == 0 && !(math.Abs(en) <= (1-1e-9)*math.Sqrt(ee)*math.Sqrt(nn)) {
		p.addf("covariance (%v, %v, %v) is not positive definite: the square of east_north_m2 must be below east_m2 times north_m2", ee, en, nn)
	}
	return p.err()
}
