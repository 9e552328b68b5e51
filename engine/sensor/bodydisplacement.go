package sensor

import "leadline/engine/geo"

// BodyDisplacement is displacement and turn in the vehicle's frame (visual or
// wheel odometry). Forward and right are in the axes at the middle of the
// increment:
//
//	moved = R(heading + TurnRad/2)·(ForwardM·(1 + s), RightM),
//
// which for a circular arc is exact in direction and short in length by
// TurnRad²/24 of it (the chord), as the instrument gives it.
// Source: derived from the arc; the form is that of Thrun, Burgard & Fox,
// Probabilistic Robotics, 2005, chapter 5 (memory).
type BodyDisplacement struct {
	Since                     Time
	ForwardM, RightM          float64
	TurnRad                   float64
	SigmaForwardM             float64
	SigmaRightM, SigmaTurnRad float64
}

// Kind is "body_displacement".
func (BodyDisplacement) Kind() string { return KindBodyDisplacement }

// Check reports an increment that no filter could use.
func (m BodyDisplacement) Check(at Time) error {
	p := problems{what: KindBodyDisplacement}
	p.since(m.Since, at)
	p.length("forward_m", m.ForwardM)
	p.length("right_m", m.RightM)
	p.angle("turn_deg", geo.Deg(m.TurnRad))
	p.sigmaM("sigma_forward_m", m.SigmaForwardM)
	p.sigmaM("sigma_right_m", m.SigmaRightM)
	p.sigmaDeg("sigma_turn_deg", geo.Deg(m.SigmaTurnRad))
	return p.err()
}
