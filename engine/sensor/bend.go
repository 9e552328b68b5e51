package sensor

import (
	"math"

	"leadline/engine/kernel"
)

// bendM is the distance over which turning is averaged: a corner with a radius
// of 6 m is some 9 m long. It is more than the steps for which posteriors do not
// depend on the rate (2 m).
const bendM = 3.0

// Bend is how the way just driven bends, as measured: the heading change a metre,
// averaged over the way with weights that fall by 1/e each bendM. It follows
// from what was driven, not from the steps in which that was told.
type Bend struct {
	RadPerM float64
	Var     float64 // from the noise of the turns, rad²/m²
}

// after returns the bend after a stretch of forward metres that turned by turn,
// evenly. Turning on the spot is turning within no distance:
//
//	dκ = (dθ - κ ds)/ℓ,  ds = |forward|, ℓ = bendM.
func (b Bend) after(forward, turn, turnVar float64) Bend {
	x := math.Abs(forward) / bendM
	keep := kernel.Exp(-x)
	return Bend{
		RadPerM: float64(keep*b.RadPerM) + float64(turn*fading(x)/bendM),
		Var:     float64(keep*keep*b.Var) + float64(turnVar*fading(2*x)/(bendM*bendM)),
	}
}

// fading is (1 - e^-x)/x, 1 at 0.
func fading(x float64) float64 {
	if x < 1e-5 { // the next term is x²/6
		return 1 - 0.5*x
	}
	return (1 - kernel.Exp(-x)) / x
}

// turned is the angle through which the way bends over the stretch that after
// takes, as far as that is more than the gyro's noise (two sigma): by Simpson's
// rule in the way.
func (b Bend) turned(forward, turn, turnVar float64) float64 {
	sure := func(b Bend) float64 { return math.Max(0, math.Abs(b.RadPerM)-2*math.Sqrt(b.Var)) }
	middle := b.after(forward/2, turn/2, turnVar/2)
	end := b.after(forward, turn, turnVar)
	return math.Abs(forward) / 6 * (sure(b) + 4*sure(middle) + sure(end))
}
