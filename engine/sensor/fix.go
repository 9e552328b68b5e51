package sensor

import (
	"leadline/engine/filter"
	"leadline/engine/geo"
)

// Fix is a satellite fix; SigmaM is the standard deviation along each axis.
type Fix struct {
	Position geo.LonLat
	SigmaM   float64
}

// Kind is "fix".
func (Fix) Kind() string { return KindFix }

// Check reports a fix that no filter could use.
func (m Fix) Check(Time) error {
	p := problems{what: KindFix}
	p.position(m.Position)
	p.sigmaM("sigma_m", m.SigmaM)
	return p.err()
}

func (p *problems) position(at geo.LonLat) {
	if err := at.Check(); err != nil {
		p.addf("%v", err)
	}
}

// likelihood: z = antenna + v, two rows. On a plane they are east and north
// (frame metres; the frame's scale, below 3e-5 within 50 km of its middle, is
// left out of sigma). On roads they are along and across the road, since the
// vehicle's distance from the centreline widens only the second:
// v ~ N(0, diag(σ², σ² + lateral²)). Outliers are flat over a square of 10 km.
// Source: Huber's contaminated distribution, Ann. Math. Statist. 35, 1964
// (memory).
func (m Fix) likelihood(c *Context, d Sensor) (any, error) {
	z, err := c.point(m.Position, "the fix")
	if err != nil {
		return nil, err
	}
	v := m.SigmaM * m.SigmaM
	cov := [3]float64{v, 0, v}
	if c.Dim == 1 {
		cov[2] += square(c.Suite.Vehicle.LateralSigmaM)
	}
	return &fixing{
		z: z, arm: newArm(c, d.Mounting.ForwardM, d.Mounting.RightM),
		noise: c.noise(d, cov, 1.0/(fixSpanM*fixSpanM)),
	}, nil
}

type fixing struct {
	z     geo.Point
	arm   arm
	noise filter.Noise
}

var (
	_ filter.LinearLikelihood = (*fixing)(nil)
	_ filter.Turned           = (*fixing)(nil)
)

func (l *fixing) Wants() filter.Wants { return filter.WantPosition }
func (l *fixing) Rows() int           { return 2 }
func (l *fixing) Noise() filter.Noise { return l.noise }

// Axes implements filter.Turned: on roads the rows are along and across.
func (l *fixing) Axes(at *filter.Columns, i int) (first, second geo.Point) {
	if at.Dim == 2 {
		return geo.Point{E: 1}, geo.Point{N: 1}
	}
	tE, tN := at.TangentE[i], at.TangentN[i]
	return geo.Point{E: tE, N: tN}, geo.Point{E: tN, N: -tE}
}

// Linearize implements filter.LinearLikelihood.
func (l *fixing) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, mean []float64) {
	k := stride(at, qs)
	for i := range at.East {
		oE, oN, dE, dN := l.arm.at(i, at, k, mean)
		rE, rN := l.z.E-at.East[i]-oE, l.z.N-at.North[i]-oN
		t.Extra[i] = l.arm.unknownVar
		row := t.Row[2*i*k : 2*(i+1)*k]
		if at.Dim == 1 {
			tE, tN := at.TangentE[i], at.TangentN[i]
			t.Residual[2*i] = float64(rE*tE) + float64(rN*tN)
			t.Residual[2*i+1] = float64(rE*tN) - float64(rN*tE)
			row[0] = 1 // along the road; across it nothing moves
			continue
		}
		t.Residual[2*i], t.Residual[2*i+1] = rE, rN
		row[0], row[k+1] = 1, 1
		if l.arm.heading >= 0 {
			row[l.arm.heading], row[k+l.arm.heading] = dE, dN
		}
	}
}
