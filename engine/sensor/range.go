package sensor

import (
	"leadline/engine/filter"
	"leadline/engine/geo"
)

// Range is a horizontal distance to a beacon.
type Range struct {
	Beacon         Beacon
	RangeM, SigmaM float64
}

// Kind is "range".
func (Range) Kind() string { return KindRange }

// Check reports a range that no filter could use.
func (m Range) Check(Time) error {
	p := problems{what: KindRange}
	p.beacon(m.Beacon)
	p.within("range_m", m.RangeM, 0, maxFarM)
	p.sigmaM("sigma_m", m.SigmaM)
	return p.err()
}

func (p *problems) beacon(b Beacon) {
	p.name("beacon id", b.ID)
	if b.ID == "" {
		p.position(b.Position)
	}
}

// likelihood: z = |beacon - antenna| / k + v, a horizontal distance over the
// ground, k the frame's scale over the line. Its gradient in the vehicle's
// place is -u/k with u the unit vector to the beacon. The distance's surface
// bends by w²/2r over a Gaussian of width w, so that within three sigma of
// the beacon, or four cells, the exact density at the Gaussian's mean serves:
// outside them w ≤ cell/2 bends by less than a thirty-second of a cell.
// Outliers are flat up to the sensor's largest range.
// Source: the gradient of a distance; for the scale see lengths.
func (m Range) likelihood(c *Context, d Sensor) (any, error) {
	at, err := c.point(m.Beacon.Position, "the beacon")
	if err != nil {
		return nil, err
	}
	noise := c.noise(d, variance1(m.SigmaM), 1/d.maxRange())
	noise.FlatRank = filter.FlatRank(m.RangeM, 0, d.maxRange())
	return &ranging{
		target: at, zM: m.RangeM, lengths: newLengths(c.Frame, c.Pose.At),
		arm:        newArm(c, d.Mounting.ForwardM, d.Mounting.RightM),
		lateralVar: square(c.Suite.Vehicle.LateralSigmaM),
		nearM:      max(3*m.SigmaM, 4*c.CellM),
		noise:      noise,
	}, nil
}

type ranging struct {
	target     geo.Point
	zM         float64
	lengths    lengths
	arm        arm
	lateralVar float64
	nearM      float64
	noise      filter.Noise
}

var _ filter.LinearLikelihood = (*ranging)(nil)

func (l *ranging) Wants() filter.Wants { return filter.WantPosition }
func (l *ranging) Rows() int           { return 1 }
func (l *ranging) Noise() filter.Noise { return l.noise }

// Linearize implements filter.LinearLikelihood.
func (l *ranging) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, mean []float64) {
	k := stride(at, qs)
	for i := range at.East {
		oE, oN, dE, dN := l.arm.at(i, at, k, mean)
		eE, eN := l.target.E-at.East[i]-oE, l.target.N-at.North[i]-oN
		r := hypot(eE, eN)
		scale := l.lengths.scale(at.East[i], l.target.E)
		residual := l.zM - r/scale
		t.Residual[i] = residual
		uE, uN := 0.0, 0.0
		if r > 0 {
			uE, uN = eE/r, eN/r
		}
		t.Extra[i] = lateral(at, i, l.lateralVar, uE, uN) + l.arm.unknownVar
		if r < l.nearM {
			t.Flat[i] = logDensity(&l.noise, residual, t.Extra[i])
			continue
		}
		row := t.Row[i*k : i*k+k]
		at.Row(row, i, -uE/scale, -uN/scale)
		if l.arm.heading >= 0 {
			row[l.arm.heading] = -(float64(uE*dE) + float64(uN*dN)) / scale
		}
	}
}
