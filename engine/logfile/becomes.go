package logfile

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
	"leadline/engine/sensor"
)

// record makes what a reading becomes.
func (n *NMEA) record(r *reading) error {
	c := &cells{num: map[string]float64{}}
	kind, since := "", r.at
	switch r.of {
	case depth:
		kind = sensor.KindSounding
		c.num["depth_below_transducer_m"] = r.v
		c.num["transducer_depth_m"] = n.o.Depth.TransducerDepthM
		if r.has {
			c.num["transducer_depth_m"] = r.extra
		}
		c.num["sigma_m"] = n.o.sigma(depth, depthSigmaM(r.v))
	case heading:
		if !n.heading(r, c) {
			return nil
		}
		kind = sensor.KindHeading
	case turnRate:
		last := n.rate
		n.rate = rateState{true, r.at, r.v}
		dt := r.at.Seconds(last.at)
		if !last.begun || r.at-last.at > maxRateGap || dt <= 0 {
			n.tally.pass("ROT: the first of a turn")
			return nil
		}
		kind, since = sensor.KindTurn, last.at
		dpm := 0.5 * (last.dpm + r.v)
		c.num["angle_deg"] = dpm / 60 * dt
		if sigma := n.o.sigma(turnRate, turnRateSigmaDPM(dpm)/60); sigma != 0 {
			// Between the two the rate is anywhere between the two.
			between := (r.v - last.dpm) / 60 * dt / math.Sqrt(12)
			c.num["sigma_deg"] = math.Sqrt(sigma*sigma*dt*math.Max(dt, 1) + between*between)
		}
	case waterSpeed, groundSpeed:
		if n.o.Reckon != nil && r.body {
			return n.reckon(r)
		}
		kind = sensor.KindSpeed
		c.num["mps"] = r.v
		c.num["sigma_mps"] = n.o.sigma(r.of, groundSpeedSigmaMPS)
		if r.of == waterSpeed {
			c.num["sigma_mps"] = n.o.sigma(r.of, waterSpeedSigmaMPS)
		}
		if r.has && !r.body {
			c.num["course_deg"] = r.extra
		}
	case fix:
		c.num["lon"], c.num["lat"], c.num["sigma_m"] = r.lon, r.lat, n.o.sigma(fix, r.sigmaM)
		if n.o.Satellites == SatellitesTruth {
			if r.has {
				c.num["height_m"] = r.extra
			}
			t, err := truth(c, r.at)
			if n.unusable(r, err) {
				return nil
			}
			return n.hand(Record{Truth: t})
		}
		kind = sensor.KindFix
	}
	m, err := measurement(kind, c, since, r.at)
	return n.event(r, n.o.sensor(r.of), m, err)
}

// event hands a measurement on, unless it is unusable.
func (n *NMEA) event(r *reading, name string, m sensor.Measurement, err error) error {
	if n.unusable(r, err) {
		return nil
	}
	return n.hand(Record{Event: &sensor.Event{Time: r.at, Sensor: name, Number: uint64(r.place.line), Measurement: m}})
}

func (n *NMEA) hand(rec Record) error {
	n.tally.took(rec)
	return n.emit(rec)
}

// unusable refuses a reading of which nothing can be made.
func (n *NMEA) unusable(r *reading, err error) bool {
	if err != nil {
		n.refuse(&refusal{1, r.address[2:] + ": unusable", err.Error()})
	}
	return err != nil
}

// heading makes a heading true; false if that cannot be.
func (n *NMEA) heading(r *reading, c *cells) bool {
	deg, sigma := r.v, float64(trueHeadingSigmaDeg)
	if r.magnetic {
		sigma = magneticHeadingSigmaDeg
	}
	if r.reduce {
		if n.o.VariationDeg == nil {
			n.refuse(&refusal{1, r.address[2:] + ": a magnetic heading without the variation", "state the variation"})
			return false
		}
		deg += *n.o.VariationDeg
	}
	c.num["deg"] = math.Mod(deg+720, 360)
	c.num["sigma_deg"] = n.o.sigma(heading, sigma)
	n.head = headState{true, r.at, geo.Rad(c.num["deg"]), geo.Rad(or(n.o.sigma(heading, sigma), sigma))}
	return true
}

// reckon makes a displacement of a speed in the craft's axes.
func (n *NMEA) reckon(r *reading) error {
	ground := r.of == groundSpeed
	if ground {
		n.tracked = r.at
	} else if n.tracked != 0 && r.at-n.tracked <= fallback {
		n.tally.pass(r.address[2:] + ": reckoned over ground")
		return nil
	}
	if !n.head.known || r.at-n.head.at > maxHeadingAge {
		n.tally.pass(r.address[2:] + ": no heading to reckon with")
		return nil
	}
	sin, cos := kernel.Sincos(n.head.rad)
	now := motionState{
		at: r.at, headingRad: n.head.rad, headingSigma: n.head.sigmaRad, ground: ground, across: r.has,
		east: r.v * sin, north: r.v * cos,
	}
	if deg := n.o.Reckon.HeadingSigmaDeg; deg != 0 {
		now.headingSigma = geo.Rad(deg)
	}
	if r.has {
		now.east += r.extra * cos
		now.north -= r.extra * sin
	}
	last := n.motion
	n.motion = now
	m, ok := n.o.Reckon.displacement(last, now)
	if !ok {
		n.tally.pass(r.address[2:] + ": the first of a displacement")
		return nil
	}
	return n.event(r, n.o.Reckon.sensor(), m, m.Check(r.at))
}
