package sensor

import (
	"fmt"
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// Prepare returns the event as a filter uses it, by a suite whose defaults are
// filled in (For): the sensor's time offset
// taken off its times, its sign applied, sigmas that are 0 filled in from the
// suite, beacons and posts looked up; and checked (Measurement.Check). The
// error says what cannot be used and what to do.
//
// The suite's noise fills in: sigma_m_per_sqrt_m·√|distance| for travel and
// the parts of a body displacement, sigma_deg_per_sqrt_s·√seconds for turns,
// otherwise the sigma of the kind's own unit.
func (s *Suite) Prepare(ev Event) (Event, error) {
	if ev.Measurement == nil {
		return ev, fmt.Errorf("sensor %q sent no measurement", ev.Sensor)
	}
	kind := ev.Measurement.Kind()
	if ev.Sensor == "" {
		ev.Sensor = kind
	}
	if len(ev.Sensor) > maxName {
		return ev, fmt.Errorf("a sensor's name has %d bytes: at most %d are allowed", len(ev.Sensor), maxName)
	}
	const lastTime = Time(9.2e18) // in 2261; leaves room for offsets
	if ev.Time < 0 || ev.Time > lastTime {
		return ev, fmt.Errorf("sensor %q: the time is not between 1970 and 2261", ev.Sensor)
	}
	d := s.Sensor(ev.Sensor, kind)
	if d.Kind != kind {
		return ev, fmt.Errorf("sensor %q sent a %s, but the suite says it is a %s: rename it or change the suite", ev.Sensor, kind, d.Kind)
	}
	offset := Time(math.Round(d.TimeOffsetS * 1e9))
	ev.Time -= offset
	ev.Measurement = s.fill(d, ev.Measurement, ev.Time, offset)
	if err := ev.Measurement.Check(ev.Time); err != nil {
		return ev, fmt.Errorf("sensor %q: %w", ev.Sensor, err)
	}
	switch m := ev.Measurement.(type) {
	case AcousticBearing:
		if _, ok := s.Post(m.Post); !ok {
			return ev, fmt.Errorf("sensor %q: post %q is not in the suite: add it under posts", ev.Sensor, m.Post)
		}
	case Range:
		if m.Beacon.ID != "" {
			return ev, fmt.Errorf("sensor %q: beacon %q is not in the suite: add it under beacons", ev.Sensor, m.Beacon.ID)
		}
	case Bearing:
		if m.Beacon.ID != "" {
			return ev, fmt.Errorf("sensor %q: beacon %q is not in the suite: add it under beacons", ev.Sensor, m.Beacon.ID)
		}
	}
	return ev, nil
}

// fill applies offset, sign, noise and places. A beacon that is found loses
// its id and gains its position.
func (s *Suite) fill(d Sensor, m Measurement, at, offset Time) Measurement {
	n, sign := d.Noise, d.sign()
	or := func(sigma *float64, v float64) {
		if *sigma == 0 {
			*sigma = v
		}
	}
	perM := func(distance float64) float64 {
		if n.SigmaMPerSqrtM > 0 {
			return math.Max(n.SigmaMPerSqrtM*math.Sqrt(math.Abs(distance)), minSigmaM)
		}
		return n.SigmaM
	}
	perS := func(since Time) float64 {
		if n.DegPerSqrtS > 0 {
			return math.Max(geo.Rad(n.DegPerSqrtS)*math.Sqrt(math.Max(at.Seconds(since), 0)), geo.Rad(minSigmaDeg))
		}
		return geo.Rad(n.SigmaDeg)
	}
	switch m := m.(type) {
	case Travel:
		m.Since -= offset
		m.DistanceM *= sign
		or(&m.SigmaM, perM(m.DistanceM))
		return m
	case Turn:
		m.Since -= offset
		m.AngleRad *= sign
		or(&m.SigmaRad, perS(m.Since))
		return m
	case Displacement:
		m.Since -= offset
		if m.CovM2 == [3]float64{} {
			v := square(perM(hypot(m.EastM, m.NorthM)))
			m.CovM2 = [3]float64{v, 0, v}
		}
		return m
	case BodyDisplacement:
		m.Since -= offset
		m.ForwardM, m.RightM, m.TurnRad = m.ForwardM*sign, m.RightM*sign, m.TurnRad*sign
		or(&m.SigmaForwardM, perM(m.ForwardM))
		or(&m.SigmaRightM, perM(m.ForwardM))
		or(&m.SigmaTurnRad, perS(m.Since))
		return m
	case Speed:
		m.MPS *= sign
		or(&m.SigmaMPS, n.SigmaMPS)
		return m
	case HeadingFix:
		or(&m.SigmaRad, geo.Rad(n.SigmaDeg))
		return m
	case Clearance:
		or(&m.SigmaM, n.SigmaM)
		return m
	case Sounding:
		or(&m.SigmaM, n.SigmaM)
		if len(m.Beams) <= maxBeams {
			beams := make([]Beam, len(m.Beams))
			for i, b := range m.Beams {
				or(&b.SigmaM, m.SigmaM)
				beams[i] = b
			}
			m.Beams = beams
		}
		return m
	case Barometer:
		or(&m.SigmaM, n.SigmaM)
		return m
	case Range:
		or(&m.SigmaM, n.SigmaM)
		m.Beacon = s.place(m.Beacon)
		return m
	case Bearing:
		or(&m.SigmaRad, geo.Rad(n.SigmaDeg))
		m.Beacon = s.place(m.Beacon)
		return m
	case AcousticBearing:
		or(&m.SigmaRad, geo.Rad(n.SigmaDeg))
		if p, ok := s.Post(m.Post); ok {
			or(&m.SigmaRad, s.postSigma(p, m.BearingRad))
		}
		return m
	case Fix:
		or(&m.SigmaM, n.SigmaM)
		return m
	}
	return m
}

func (s *Suite) place(b Beacon) Beacon {
	if b.ID == "" {
		return b
	}
	if p, ok := s.Beacon(b.ID); ok {
		return Beacon{Position: p.Position()}
	}
	return b
}

// postSigma is the standard deviation of a post's bearings, 0 if the post
// does not say.
func (s *Suite) postSigma(p Post, bearingRad float64) float64 {
	if p.SpacingM == 0 || p.DelaySigmaS == 0 {
		return geo.Rad(p.SigmaDeg)
	}
	c := SoundSpeedAirMPS(*s.Environment.AirTemperatureC + 273.15)
	broadside := 0.0
	if p.AxisDeg != nil {
		// |cos| of the angle from broadside is |sin| of the angle from the axis.
		broadside = math.Pi/2 - (bearingRad - geo.Rad(*p.AxisDeg))
	}
	if math.Abs(kernel.Cos(broadside)) < 1e-9 {
		broadside = math.Pi/2 - 1e-9
	}
	return ArrivalSigmaRad(c, p.DelaySigmaS, p.SpacingM, broadside)
}
