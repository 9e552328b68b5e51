package sensor

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// heights compares a measured height of the ground with the map's:
// z = top - distance = height(x + arm) + v, with top the sensor's own height.
//
// To the variance of v come
//
//   - the map's own, times coth(Δ/2ℓ), Δ the way since the sensor's measurement
//     before and ℓ the length over which the map's error is correlated. That is
//     (1+ρ)/(1-ρ) with ρ = exp(-Δ/ℓ), by which the variance of a mean of
//     correlated values exceeds that of independent ones (Bartlett, J. R. Stat.
//     Soc. 98, 1935): n measurements within ℓ say no more of the map than one,
//     at whatever rate they come, and of the rest as much as n.
//   - that of the ground within the beam's footprint: a disc of radius ρ =
//     distance·tan(width/2) on a slope s has heights of variance (s·ρ)²/4.
//   - that of a beam which pitch and roll, of standard deviation τ an axis, turn
//     off the vertical: (s·distance·τ)² for the place, (distance·τ²)² for the
//     length, which is too large by distance·τ² on average.
//
// A beam that reports the nearest ground within its width, as radar altimeters
// do, sees over a slope of angle α not the vertical distance D but
//
//	D cos α where α is within the beam, D/(cos θ + s sin θ) beyond its edge θ,
//
// and no footprint is averaged; what the attitude turns less than that edge does
// not matter.
//
// Where the map knows no height the measurement has the density of a uniform
// one over the suite's plausible heights, and says nothing about the
// quantities: neither zero nor a made-up height. Outliers are flat over them, too.
//
// What else the measurement depends on enters linearly (type offset).
//
// An arm whose direction is known looks the height up where the sensor is: on
// a plane in the map, on roads along the grade. Otherwise its square enters
// by the slope: s²·|arm|²/2.
type heights struct {
	topM, distanceM float64
	arm             arm
	plane           filter.PlaneSpace
	nearest         bool
	edgeS, edgeC    float64 // sine and cosine of half the beam's width
	slopeVar        float64 // variance for each unit of slope²
	tiltVar         float64
	attitude        float64 // its variance, rad²
	mapFactor       float64 // of the map's variance
	flat            float64 // ln density of an unknown height
	offsets         []offset
	noise           filter.Noise
	beside          filter.Columns
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

func (c *Context) heights(d Sensor, topM, distanceM, sigmaM, forward, right float64) *heights {
	density := c.Suite.heightDensity()
	l := &heights{
		topM: topM, distanceM: distanceM, arm: newArm(c, forward, right), plane: c.Plane,
		nearest: d.BeamReturn == ReturnNearest, mapFactor: c.mapErrorFactor(),
		flat: kernel.Log(density), noise: c.noise(d, variance1(sigmaM), density),
	}
	l.noise.FlatRank = filter.FlatRank(topM-distanceM, c.Suite.Vehicle.LowestM, c.Suite.Vehicle.HighestM)
	half := geo.Rad(d.BeamWidthDeg) / 2
	l.edgeS, l.edgeC = kernel.Sincos(half)
	tau := geo.Rad(d.AttitudeSigmaDeg)
	if l.nearest {
		tau = math.Max(0, tau-half)
	} else {
		rho := math.Abs(distanceM) * l.edgeS / l.edgeC
		l.slopeVar = rho * rho / 4
	}
	l.attitude = tau * tau
	l.slopeVar += distanceM * distanceM * l.attitude
	l.tiltVar = square(distanceM * l.attitude)
	l.distanceM -= distanceM * l.attitude
	return l
}

// slants says that a beam meets the ground so far beside the sensor: then what
// the attitude turns it by changes the depth in the first order. The footprint
// is that of the longer way.
func (l *heights) slants(besideM float64) {
	l.tiltVar += besideM * besideM * l.attitude
	if !l.nearest {
		l.slopeVar += square(besideM*l.edgeS/l.edgeC) / 4
	}
}

// standingFactor is for a vehicle that has hardly moved: what the map says there
// it has said.
const standingFactor = 1e6

// mapErrorFactor is coth(Δ/2ℓ).
func (c *Context) mapErrorFactor() float64 {
	x := c.TravelledM / c.mapErrorLengthM()
	if !(x < 40) {
		return 1
	}
	if x < 2/standingFactor {
		return standingFactor
	}
	e := kernel.Exp(-x)
	return (1 + e) / (1 - e)
}

// roadErrorLengthM is that of heights along a road.
const roadErrorLengthM = 100.0

func (c *Context) mapErrorLengthM() float64 {
	switch {
	case c.Suite.Environment.MapErrorLengthM > 0:
		return c.Suite.Environment.MapErrorLengthM
	case c.Plane != nil:
		return c.Plane.DetailM()
	}
	return roadErrorLengthM
}

// canopied puts the part of measurements that end in a canopy beside the
// others: as much higher as a uniform distribution is, in two halves.
func (d Sensor) canopied(n filter.Noise) filter.Noise {
	p, h := d.CanopyProbability, d.CanopyHeightM
	if p == 0 {
		return n
	}
	own := n.Parts[0]
	n.Parts[0].Weight -= p
	for _, mean := range []float64{0.25, 0.75} {
		n.Parts = append(n.Parts, filter.NoisePart{Weight: p / 2, Mean: mean * h, Cov: [3]float64{own.Cov[0] + h*h/48}})
	}
	return n
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

// share is what part of the vertical distance a sensor reports over a slope.
func (l *heights) share(slope2 float64) float64 {
	if !l.nearest {
		return 1
	}
	if sin2, cos2 := float64(l.edgeS*l.edgeS), float64(l.edgeC*l.edgeC); slope2*cos2 > sin2 {
		return 1 / (l.edgeC + float64(math.Sqrt(slope2)*l.edgeS))
	}
	return 1 / math.Sqrt(1+slope2)
}

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
	if ground == at && l.arm.zero() && len(l.offsets) == 0 && !l.nearest && at.Dim == 2 && k == 2 {
		l.below(t, at)
		return
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
		share := l.share(s2)
		t.Residual[i] = float64((l.topM-h)*share) - l.distanceM
		t.Extra[i] = float64(l.mapFactor*ground.HeightVar[i]) + float64(s2*(l.slopeVar+l.arm.unknownVar)) + l.tiltVar
		row := t.Row[i*k : i*k+k]
		at.Row(row, i, share*sE, share*sN)
		if l.arm.heading >= 0 && at.Dim == 2 {
			row[l.arm.heading] = share * (float64(sE*dE) + float64(sN*dN))
		}
		for _, o := range l.offsets {
			t.Residual[i] -= float64(o.by * mean[i*k+o.quantity])
			row[o.quantity] = o.by
		}
	}
}

// below is Linearize for what is measured straight below on a plane, in which nothing but
// the position enters, as on a lattice: the same to the bit.
func (l *heights) below(t *filter.Terms, at *filter.Columns) {
	g := kernel.Ground{
		TopM: l.topM, DistanceM: l.distanceM,
		MapFactor: l.mapFactor, SlopeVar: l.slopeVar + l.arm.unknownVar, Tilt: l.tiltVar, Flat: l.flat,
	}
	g.Terms(t.Residual, t.Extra, t.Row, t.Flat, at.Height, at.SlopeE, at.SlopeN, at.HeightVar)
}
