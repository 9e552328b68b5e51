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
// A way that nobody knows may turn anywhere, and is taken to turn on bendingShare of
// itself. Straight on it is worth ln 2.1 for each 5 m, 0.08 nats less than a road
// that fits; a right angle costs some four nats for each 5 m of it. What is too
// little straight on adds up: with turningShare in its place, which is of ways
// through a junction, a vehicle that was not where it was believed to be was not
// looked for, since a hundred metres of straight road were worth 8 nats against it.
func OwnWay(b Bend, travelledM float64) float64 {
	power := math.Min(1, math.Abs(travelledM)/alignmentM)
	if !(power > 0) {
		return 0
	}
	n := filter.Noise{
		Parts: []filter.NoisePart{
			{Weight: 0.99 * (1 - bendingShare), Cov: [3]float64{followVar}},
			{Weight: 0.99 * bendingShare, Cov: [3]float64{turnSigmaRad * turnSigmaRad}},
		},
		FlatWeight: 0.01, FlatDensity: 1 / (2 * math.Pi),
	}
	return power * logDensity(&n, math.Min(math.Abs(b.RadPerM)*alignmentM, math.Pi), 0)
}

// bendingShare of a way in a town is bends: a corner takes some 15 m, and there is
// one each 150 m (practice; on simulated drives 11 %).
const bendingShare = 0.1

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
