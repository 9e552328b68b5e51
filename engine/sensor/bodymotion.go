package sensor

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/kernel"
)

// bodyMotion moves each Gaussian by the vehicle's own motion along its own
// heading.
type bodyMotion struct {
	k, heading, scale int
	bias              int // of the gyro; -1 if it is not in the turn
	b                 body
	frameScale        float64
	plus              [2]float64
}

var _ filter.Local = (*bodyMotion)(nil)

// Wants asks for nothing: the motion depends on the heading alone.
func (l *bodyMotion) Wants() filter.Wants { return 0 }

// Local implements filter.Local: with ψ = heading + (turn - bias·t)/2, forward
// axis (sin ψ, cos ψ), right axis (cos ψ, -sin ψ),
//
//	Δ = k·[(f + s·f_scaled)·forward + r·right],
//	∂Δ/∂heading = k·[(f + s·f_scaled)·right - r·forward],  ∂Δ/∂s = k·f_scaled·forward,
//	∂Δ/∂bias = -(t/2)·∂Δ/∂heading.
//
// Over a heading of variance v both are shorter by e^{-v/2} on average: the arc
// that the headings make is taken as the straight line through its middle.
// Source: characteristic function of the normal distribution.
func (l *bodyMotion) Local(add, f []float64, at *filter.Columns, mean, cov []float64) {
	packed := l.k * (l.k + 1) / 2
	for i := 0; i*l.k < len(mean); i++ {
		x := mean[i*l.k : i*l.k+l.k]
		row := f[i*2*l.k : (i+1)*2*l.k]
		clear(row)
		row[0], row[l.k+1] = 1, 1
		psi := x[l.heading] + 0.5*l.b.turn
		if l.bias >= 0 {
			psi -= float64(0.5 * l.b.biasS * x[l.bias])
		}
		s, c := kernel.Sincos(psi)
		short := kernel.Exp(-0.5 * cov[i*packed+filter.Packed(l.heading, l.heading)])
		s, c = float64(short*s), float64(short*c)
		fwd, right := l.b.forward, l.b.right
		if l.scale >= 0 {
			fwd += float64(x[l.scale] * l.b.scaled)
			row[l.scale] = l.frameScale * float64(l.b.scaled*s)
			row[l.k+l.scale] = l.frameScale * float64(l.b.scaled*c)
		}
		add[2*i] = l.frameScale * (float64(fwd*s) + float64(right*c))
		add[2*i+1] = l.frameScale * (float64(fwd*c) - float64(right*s))
		row[l.heading] = add[2*i+1]
		row[l.k+l.heading] = -add[2*i]
		if l.bias >= 0 {
			row[l.bias] = -0.5 * l.b.biasS * add[2*i+1]
			row[l.k+l.bias] = 0.5 * l.b.biasS * add[2*i]
		}
		add[2*i] += l.plus[0]
		add[2*i+1] += l.plus[1]
		affine(add[2*i:2*i+2], row, x)
	}
}

// spread adds the noise of the body motion. A step has one Q for all
// Gaussians, so the noise, which turns with the heading, is averaged over the
// pose's heading N(ψ, v):
//
//	E[R D Rᵀ] = mean(D)·I + e^{-2v}·(R D Rᵀ - mean(D)·I),
//
// and the effect of the turn's noise on the position (through turn/2) is
// likewise averaged, its cross term with the heading by e^{-v/2}.
func (l *bodyMotion) spread(q []float64, pose Pose) {
	v := pose.HeadingVar
	known := v >= 0 && !math.IsInf(v, 0)
	e2, e1, psi := 0.0, 0.0, 0.0
	if known {
		e2, e1, psi = kernel.Exp(-2*v), kernel.Exp(-0.5*v), pose.HeadingRad+0.5*l.b.turn
	}
	s, c := kernel.Sincos(psi)
	k2 := l.frameScale * l.frameScale
	// In body axes: noise of forward and right, and the half turn's effect
	// (-right, forward)·σ_turn/2, which is an outer product.
	half := 0.25 * l.b.turnVar
	ff := l.b.forwardVar + half*square(l.b.right)
	rr := l.b.rightVar + half*square(l.b.forward)
	fr := -half * l.b.forward * l.b.right
	mean, diff := 0.5*(ff+rr), 0.5*(ff-rr)
	// Frame: forward = (s, c), right = (c, -s).
	ee := float64((s*s-c*c)*diff) + float64(2*s*c*fr)
	en := float64(2*s*c*diff) + float64((c*c-s*s)*fr)
	q[filter.Packed(0, 0)] += k2 * (mean + e2*ee)
	q[filter.Packed(1, 0)] += k2 * e2 * en
	q[filter.Packed(1, 1)] += k2 * (mean - e2*ee)
	cross := 0.5 * l.b.turnVar * l.frameScale * e1
	q[filter.Packed(l.heading, 0)] += cross * (float64(l.b.forward*c) - float64(l.b.right*s))
	q[filter.Packed(l.heading, 1)] += cross * (-float64(l.b.forward*s) - float64(l.b.right*c))
}
