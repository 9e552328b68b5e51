package sensor

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// heights compares a measured height of the ground with the map's:
// z = height(x + arm) + v, with the map's own variance added, and that of the
// ground within the beam's footprint: a disc of radius ρ = distance·tan(width/2)
// on a slope s has heights of variance (s·ρ)²/4.
//
// Where the map knows no height the measurement has the density of a uniform
// one over the suite's plausible heights, and says nothing about the
// quantities: neither zero nor a made-up height.
//
// What else the measurement depends on enters linearly (type offset).
//
// An arm whose direction is known looks the height up where the sensor is: on
// a plane in the map, on roads along the grade. Otherwise its square enters
// by the slope: s²·|arm|²/2. Roll and pitch are not modelled.
type heights struct {
	zM         float64
	arm        arm
	plane      filter.PlaneSpace
	footprint4 float64 // ρ²/4
	flat       float64 // ln density of an unknown height
	offsets    []offset
	noise      filter.Noise
	beside     filter.Columns
}

// offset is a quantity that is in a measured height: z = height + by·x + v.
type offset struct {
	quantity int
	by       float64
}

// with adds a quantity to what the height depends on, if the belief has it.
func (l *heights) with(c *Context, quantity string, by float64) *heights {
	if i := filter.Index(c.Quantities, quantity); i >= 0 {
		l.offsets = append(l.offsets, offset{i, by})
	}
	return l
}

func (c *Context) heights(d Sensor, zM, sigmaM, distanceM, forward, right float64) *heights {
	density := c.Suite.heightDensity()
	half := geo.Rad(d.BeamWidthDeg) / 2
	s, co := kernel.Sincos(half)
	rho := math.Abs(distanceM) * s / co
	return &heights{
		zM: zM, arm: newArm(c, forward, right), plane: c.Plane,
		footprint4: rho * rho / 4, flat: kernel.Log(density),
		noise: c.noise(d, variance1(sigmaM), density),
	}
}

var _ filter.LinearLikelihood = (*heights)(nil)

// Wants implements filter.LinearLikelihood.
func (l *heights) Wants() filter.Wants {
	return filter.WantPosition | filter.WantHeight
}

// Rows implements filter.LinearLikelihood.
func (l *heights) Rows() int { return 1 }

// Noise implements filter.LinearLikelihood.
func (l *heights) Noise() filter.Noise { return l.noise }

// Linearize implements filter.LinearLikelihood.
func (l *heights) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, mean []float64) {
	k := stride(at, qs)
	ground := at
	if !l.arm.zero() && l.plane != nil && at.Dim == 2 {
		n := at.Len()
		l.beside.Resize(filter.WantHeight, 2, n)
		for i := range n {
			oE, oN, _, _ := l.arm.at(i, at, k, mean)
			l.beside.East[i], l.beside.North[i] = at.East[i]+oE, at.North[i]+oN
		}
		l.plane.Sample(&l.beside)
		ground = &l.beside
	}
	for i, h := range ground.Height {
		if h != h {
			t.Flat[i] = l.flat
			continue
		}
		sE, sN := ground.SlopeE[i], ground.SlopeN[i]
		oE, oN, dE, dN := l.arm.at(i, at, k, mean)
		if ground == at {
			h += float64(sE*oE) + float64(sN*oN)
		}
		s2 := float64(sE*sE) + float64(sN*sN)
		t.Residual[i] = l.zM - h
		t.Extra[i] = ground.HeightVar[i] + s2*(l.footprint4+l.arm.unknownVar)
		row := t.Row[i*k : i*k+k]
		at.Row(row, i, sE, sN)
		if l.arm.heading >= 0 && at.Dim == 2 {
			row[l.arm.heading] = float64(sE*dE) + float64(sN*dN)
		}
		for _, o := range l.offsets {
			t.Residual[i] -= float64(o.by * mean[i*k+o.quantity])
			row[o.quantity] = o.by
		}
	}
}
