package sensor

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// Speed is speed over ground or through water, with the course if it is known
// (HasCourse). It covers the time since the same sensor's previous speed; the
// first one covers nothing. Speed through water says nothing of the current:
// its sigma has to cover that.
type Speed struct {
	MPS, SigmaMPS float64
	HasCourse     bool
	CourseRad     float64
}

// Kind is "speed".
func (Speed) Kind() string { return KindSpeed }

// Check reports a speed that no filter could use.
func (m Speed) Check(Time) error {
	p := problems{what: KindSpeed}
	p.within("mps", m.MPS, -maxSpeedMPS, maxSpeedMPS)
	p.sigma("sigma_mps", m.SigmaMPS, minSigmaMPS, maxSpeedMPS)
	if m.HasCourse {
		p.angle("course_deg", geo.Deg(m.CourseRad))
	}
	return p.err()
}

// SigmaM is the standard deviation of the distance made in dt seconds if the
// error of a speed lasts for correlationS seconds:
//
//	σ_d² = σ² · dt · max(dt, correlationS).
//
// Readings closer together than that share their error, so the variance grows
// by the same amount a second whatever the rate. dt ≤ 0 gives 0.
// Source: derived, as the variance of a sum of errors that are each constant for
// correlationS and independent of one another.
func (m Speed) SigmaM(dt, correlationS float64) float64 {
	if !(dt > 0) {
		return 0
	}
	return m.SigmaMPS * math.Sqrt(dt*math.Max(dt, correlationS))
}

// Increment turns the speed over (since, at] into a Displacement if the
// course is known and ground is true, and into a Travel otherwise. The error
// across the course is taken as large as the one along it.
func (m Speed) Increment(since, at Time, correlationS float64, ground bool) Measurement {
	dt := at.Seconds(since)
	d, sigma := m.MPS*dt, math.Max(m.SigmaM(dt, correlationS), minSigmaM)
	if !m.HasCourse || !ground {
		return Travel{Since: since, DistanceM: d, SigmaM: sigma}
	}
	s, c := kernel.Sincos(m.CourseRad)
	v := sigma * sigma
	return Displacement{Since: since, EastM: d * s, NorthM: d * c, CovM2: [3]float64{v, 0, v}}
}
