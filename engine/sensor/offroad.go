package sensor

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/kernel"
)

// OffRoads returns what a prepared event says of a vehicle that is on no mapped
// road, at a place on the plane: likelihoods as from Likelihoods, for ctx.Dim 2.
// What compares with the map alone has none: its ln density is flat then, that
// of an unknown height, or of a named road on which the vehicle is not.
func OffRoads(ev Event, ctx Context) (ls []any, flat float64) {
	d := ctx.Suite.Sensor(ev.Sensor, ev.Measurement.Kind())
	switch m := ev.Measurement.(type) {
	case Barometer, Clearance, Sounding:
		return nil, ctx.power(d) * kernel.Log(ctx.Suite.heightDensity())
	case Sighting:
		if m.Road != "" {
			return nil, kernel.Log(m.Mistaken)
		}
	}
	ls, err := Likelihoods(ev, ctx)
	if err != nil {
		panic("sensor: " + err.Error()) // roads took it
	}
	return ls, 0
}

// Elsewhere is the ln density of a prepared event for a vehicle that may be
// anywhere on a map of an area and faces any way: a place is uniform over it, a
// range up to the sensor's largest, a direction over the circle, a height over
// the suite's plausible ones, and who says where the vehicle is, is mistaken or
// not. Each is one for motions, which say the same everywhere.
func Elsewhere(ev Event, ctx Context, areaM2 float64) float64 {
	d := ctx.Suite.Sensor(ev.Sensor, ev.Measurement.Kind())
	var log float64
	switch m := ev.Measurement.(type) {
	case HeadingFix, Bearing, AcousticBearing:
		log = kernel.Log(1 / (2 * math.Pi))
	case Barometer, Clearance, Sounding:
		log = kernel.Log(ctx.Suite.heightDensity())
	case Range:
		log = kernel.Log(1 / d.maxRange())
	case Fix:
		log = kernel.Log(1 / areaM2)
	case Sighting:
		return kernel.Log(math.Max(m.Mistaken, leastMistaken))
	default:
		return 0
	}
	return ctx.power(d) * log
}

// leastMistaken is the probability that a vehicle somewhere on the map is where
// somebody who is never mistaken says it is (practice).
const leastMistaken = 1e-3

// OwnWay is the ln density, to the power that RoadAlignment has, that a vehicle
// on a way which nobody knows gives the heading that it has: its way is
// straight or bends as a mapped one does at the same place, so the heading's
// change over alignmentM stands where RoadAlignment has the difference from the
// road, and its wide part is that of a turn, turnSigmaRad.
//
// On a straight way it is worth what a road that fits is, ln 1.4; a right angle
// costs two nats for each 5 m of it, as roads that do not bend there cost, and
// less than roads whose direction differs.
func OwnWay(b Bend, travelledM float64) float64 {
	power := math.Min(1, math.Abs(travelledM)/alignmentM)
	if !(power > 0) {
		return 0
	}
	n := filter.Noise{
		Parts: []filter.NoisePart{
			{Weight: 0.99 * (1 - turningShare), Cov: [3]float64{followVar}},
			{Weight: 0.99 * turningShare, Cov: [3]float64{turnSigmaRad * turnSigmaRad}},
		},
		FlatWeight: 0.01, FlatDensity: 1 / (2 * math.Pi),
	}
	return power * logDensity(&n, math.Min(math.Abs(b.RadPerM)*alignmentM, math.Pi), 0)
}

// turnSigmaRad is the spread of the headings in which ways go on at junctions:
// between straight on and a right angle (practice).
const turnSigmaRad = 1.0

// elsewhere is the ln density of the displacement's part across a way that is
// not known: the widest that a road would give, for a heading that is a radian
// off.
func (l *crossTrack) elsewhere() float64 {
	d2 := float64(l.d.E*l.d.E) + float64(l.d.N*l.d.N)
	v := largerVariance(l.cov) + d2
	return l.noise.Power * (-kernel.LogSqrt2Pi - 0.5*kernel.Log(v))
}

// WayElsewhere is what the comparison of a motion with the road's direction is
// worth where no road is known: OwnWay, or for a displacement over ground the
// density over all directions.
func WayElsewhere(l filter.LinearLikelihood, b Bend, travelledM float64) float64 {
	if c, ok := l.(*crossTrack); ok {
		return c.elsewhere()
	}
	return OwnWay(b, travelledM)
}
