package sensor

import "math"

// Pace is how a vehicle moved in a stretch of time, as measured.
type Pace struct {
	Seconds float64
	// Over says that East and North, m in the frame's true directions, tell the
	// motion, otherwise ForwardM, negative in reverse. ScaledM is the part of
	// ForwardM that the odometer's scale stretches.
	Over              bool
	ForwardM, ScaledM float64
	EastM, NorthM     float64
	// VarM2 is the variance of the measured distance along the motion, without
	// what the map adds to it.
	VarM2 float64
}

// Pace is how the vehicle moved in the segment; ok is false if part of it is
// not covered.
func (m *Motion) Pace() (p Pace, ok bool) {
	b := m.body()
	g := m.ground(b.turn)
	if max(b.covered, g.covered) < m.To-m.From {
		return Pace{}, false
	}
	p.Seconds = m.Seconds()
	if g.covered > b.covered {
		p.Over, p.EastM, p.NorthM, p.VarM2 = true, g.east, g.north, largerVariance(g.cov)
		return p, true
	}
	p.ForwardM, p.ScaledM = math.Copysign(hypot(b.forward, b.right), b.forward), b.scaled
	// Sideways, what slips is not measured: it is left out.
	p.VarM2 = b.forwardVar
	return p, true
}

// Share is the part of a stretch that lasts share of its time.
func (p Pace) Share(share float64) Pace {
	p.Seconds *= share
	p.ForwardM *= share
	p.ScaledM *= share
	p.EastM *= share
	p.NorthM *= share
	p.VarM2 *= share
	return p
}
