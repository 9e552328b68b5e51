package forecast

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// context is what a likelihood knows of where a world is.
func (w *world) context(sinceS, travelledM float64) sensor.Context {
	c := sensor.Context{
		Suite: w.Suite, Frame: w.Space.Frame(), Dim: w.dim, Quantities: w.qs, CellM: 1,
		Pose:           sensor.Pose{At: w.now.at, HeadingRad: w.now.heading, HeadingVar: 0.01},
		SincePreviousS: sinceS, TravelledM: travelledM,
	}
	if p, ok := w.Space.(filter.PlaneSpace); ok {
		c.Plane = p
	}
	return c
}

// linearized is a likelihood at the world's place.
type linearized struct {
	noise filter.Noise
	rows  int
	terms filter.Terms
}

// linearize takes a likelihood there; ok is false for one that is not linear, or
// tells nothing at the place.
func (p *Plan) linearize(l any, q place, x []float64) (out linearized, ok bool) {
	linear, yes := l.(filter.LinearLikelihood)
	if !yes {
		return out, false
	}
	out.noise, out.rows = linear.Noise(), linear.Rows()
	c := p.columns(q, linear.Wants())
	out.terms.Reset(1, out.rows, max(len(p.qs), p.dim))
	linear.Linearize(&out.terms, c, p.qs, x)
	return out, !(out.terms.Flat[0] == out.terms.Flat[0]) && !math.IsNaN(out.terms.Residual[0])
}

// reading is a measurement that is one number; with sets it.
type reading struct {
	guess, step float64
	with        func(z float64) sensor.Measurement
}

// readings are what a sensor could say now, but for the number.
func (w *world) readings(which int) []reading {
	d := w.sensors[which]
	one := func(guess, step float64, with func(z float64) sensor.Measurement) []reading {
		return []reading{{guess, step, with}}
	}
	height := w.columns(w.now, filter.WantHeight).Height[0]
	switch d.Kind {
	case sensor.KindHeading:
		return one(w.now.heading+w.wander, 1e-3, func(z float64) sensor.Measurement { return sensor.HeadingFix{HeadingRad: z} })
	case sensor.KindClearance:
		return one(w.altitudeM-height, 1, func(z float64) sensor.Measurement {
			return sensor.Clearance{ClearanceM: z, AltitudeM: w.altitudeM}
		})
	case sensor.KindSounding:
		return one(-height, 1, func(z float64) sensor.Measurement { return sensor.Sounding{DepthBelowTransducerM: z} })
	case sensor.KindBarometer:
		return one(height, 1, func(z float64) sensor.Measurement { return sensor.Barometer{AltitudeM: z} })
	case sensor.KindRange, sensor.KindBearing:
		var out []reading
		for _, b := range d.beacons {
			v := w.Space.Frame().Forward(b.Position()).Sub(w.now.at)
			if v.Norm() > reachM(d.Sensor) {
				continue
			}
			beacon := sensor.Beacon{ID: b.ID}
			if d.Kind == sensor.KindRange {
				out = append(out, reading{v.Norm(), 1, func(z float64) sensor.Measurement { return sensor.Range{Beacon: beacon, RangeM: math.Max(z, 0)} }})
				continue
			}
			out = append(out, reading{geo.Heading(v), 1e-3, func(z float64) sensor.Measurement { return sensor.Bearing{Beacon: beacon, BearingRad: z} }})
		}
		return out
	}
	return nil
}

// reachM is how far a beacon is heard: the suite's max_range_m, 10 km unless said.
func reachM(d sensor.Sensor) float64 {
	if d.MaxRangeM > 0 {
		return d.MaxRangeM
	}
	return 10e3
}

// weighing appends what a sensor that weighs says. The number is the one at
// which the likelihood's own residual is the noise that was drawn: what the
// filter believes of the sensor is what the sensor does. Where the map knows
// nothing, nothing is said.
func (w *world) weighing(which int) error {
	d := w.sensors[which]
	for _, r := range w.readings(which) {
		if !geo.Finite(r.guess) {
			continue
		}
		residual := func(z float64) (linearized, float64, bool, error) {
			m, err := w.sigmas(d.Sensor, r.with(z))
			if err != nil {
				return linearized{}, 0, false, err
			}
			ls, err := sensor.Likelihoods(sensor.Event{Time: at(w.t), Sensor: d.Name, Measurement: m}, w.context(math.Inf(1), math.Inf(1)))
			if err != nil || len(ls) == 0 {
				return linearized{}, 0, false, err
			}
			l, ok := w.linearize(ls[0], w.now, w.x)
			if !ok {
				return l, 0, false, nil
			}
			return l, l.terms.Residual[0], true, nil
		}
		z := r.guess
		var l linearized
		perUnit := 1.0
		said := false
		for range 2 { // the second time from where it is nearly right
			at, r0, ok, err := residual(z)
			if err != nil {
				return err
			}
			_, r1, ok1, err := residual(z + r.step)
			if err != nil {
				return err
			}
			if said = ok && ok1 && r1 != r0; !said {
				break
			}
			if l, perUnit = at, (r1-r0)/r.step; d.Kind == sensor.KindHeading || d.Kind == sensor.KindBearing {
				perUnit = math.Copysign(1, perUnit)
			}
			z -= r0 / perUnit
		}
		if !said {
			continue
		}
		z += w.error(which, &l) / perUnit
		m, err := w.sigmas(d.Sensor, r.with(z))
		if err != nil {
			continue // beyond what the instrument can say, as a depth above the water
		}
		w.put(d.Sensor, m)
	}
	return nil
}

// error draws from a noise.
func (w *world) error(which int, l *linearized) float64 {
	if w.rng == nil {
		return 0
	}
	unit, u := w.lasting(which), w.rng.Float64()
	if l.noise.FlatWeight > 0 {
		if u < l.noise.FlatWeight {
			return (w.rng.Float64() - 0.5) / l.noise.FlatDensity
		}
		u -= l.noise.FlatWeight
	}
	for c, part := range l.noise.Parts {
		if u < part.Weight || c == len(l.noise.Parts)-1 {
			return part.Mean + unit*math.Sqrt(part.Cov[0]+l.terms.ExtraOf(0, c))
		}
		u -= part.Weight
	}
	return 0
}
