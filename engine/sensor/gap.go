package sensor

import (
	"math"

	"leadline/engine/kernel"
)

// gapPrior is what a vehicle does while nothing measures its motion: its
// velocity is an Ornstein-Uhlenbeck process with mean zero and variance
// speedVar along each axis, that forgets itself within tauS seconds.
//
// speedVar is that of a speed uniform within ±MaxSpeed on roads (max²/3), and
// of a velocity uniform in the disc of radius MaxSpeed on a plane (max²/4 an
// axis); tauS = MaxSpeed / MaxAccel, the time to go from rest to full speed.
// Displacement is its integral (Gillespie, "Exact numerical simulation of the
// Ornstein-Uhlenbeck process and its integral", Phys. Rev. E 54, 1996).
type gapPrior struct{ speedVar, tauS float64 }

func (v Vehicle) gap(dim int) gapPrior {
	share := 3.0
	if dim == 2 {
		share = 4
	}
	return gapPrior{v.MaxSpeedMPS * v.MaxSpeedMPS / share, v.MaxSpeedMPS / v.MaxAccelMPS2}
}

// variance returns the variance along an axis of the displacement in the
// first s seconds of a gap, m²; known says that the velocity was known when
// it began.
func (g gapPrior) variance(s float64, known bool) float64 {
	x := s / g.tauS
	var h float64
	switch {
	case !(x > 0):
		return 0
	case known && x < 0.02: // the closed form cancels; the next term is x⁶/12
		h = float64(x * x * x * (2.0/3 - 0.5*x + 7.0/30*x*x))
	case known:
		e := kernel.Exp(-x)
		h = 2*x - 3 + 4*e - e*e
	case x < 0.001: // next term x⁵/60
		h = float64(x * x * (1 - x/3 + x*x/12))
	default:
		h = 2 * (x - 1 + kernel.Exp(-x))
	}
	return g.speedVar * g.tauS * g.tauS * h
}

// step returns, for the part of a gap from its age ageS on and lasting s
// seconds, the mean displacement for each m/s of velocity known when the gap
// began, and the variance along an axis. Variances of consecutive parts add
// up to that of the whole: a gap does not depend on how it is cut by other
// measurements.
func (g gapPrior) step(ageS, s float64, known bool) (meanS, varM2 float64) {
	varM2 = math.Max(0, g.variance(ageS+s, known)-g.variance(ageS, known))
	if known {
		meanS = g.tauS * (kernel.Exp(-ageS/g.tauS) - kernel.Exp(-(ageS+s)/g.tauS))
	}
	return meanS, varM2
}

// turnVar is the variance of the heading change in s seconds without a
// measured turn: a turn rate uniform within ±MaxTurn that lasts for turnTauS,
// as a random walk, so that it does not depend on how time is cut.
func (v Vehicle) turnVar(s float64) float64 {
	const turnTauS = 2 // a bend or a manoeuvre takes a few seconds (practice)
	r := v.MaxTurnDPS * (math.Pi / 180)
	return r * r / 3 * turnTauS * s
}
