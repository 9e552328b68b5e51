package diagnose

import (
	"fmt"
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
	"leadline/engine/sensor"
)

// Mistake is a usual mistake in a log, and how to undo it. The zero value is
// none: the log as it stands.
type Mistake struct {
	Name   string // what is wrong, such as "turn sign reversed"
	Sensor string // whose measurements, empty for several
	// Value is what was tried or estimated, in Unit; none if Unit is empty.
	Value float64
	Unit  string
	// Remedy says what to do about it.
	Remedy string

	of    func(sensor, kind string) bool // whose measurements
	shift sensor.Time                    // taken off the times
	// mend returns the measurement as it should be; nil leaves it alone. It
	// changes no slice of m.
	mend func(m sensor.Measurement) sensor.Measurement
	// lnScale is ln |∂mended/∂recorded| of a measurement that is weighed.
	lnScale func(mended sensor.Measurement) float64

	// lnFactor is the logarithm of what numbers are multiplied by; 0 where that is
	// not what it is.
	lnFactor float64

	// family is what differs in Value alone; search how that was found, nil if
	// it was not searched for.
	family string
	search *scan
}

// String names the mistake with its sensor and value.
func (m *Mistake) String() string {
	s := m.Name
	if m.Sensor != "" {
		s = m.Sensor + ": " + s
	}
	switch m.Unit {
	case "":
	case "times":
		s += fmt.Sprintf(" (×%.3g)", m.shown())
	default:
		s += fmt.Sprintf(" (%+.3g %s)", m.Value, m.Unit)
	}
	return s
}

// shown is the value for people.
func (m *Mistake) shown() float64 {
	if m.search != nil && m.search.shown != nil {
		return m.search.shown(m.Value)
	}
	return m.Value
}

// undo returns an event as it should have been recorded.
func (m *Mistake) undo(ev sensor.Event) sensor.Event {
	if m.of == nil || !m.of(ev.Sensor, ev.Measurement.Kind()) {
		return ev
	}
	if m.shift != 0 {
		ev.Time -= m.shift
		ev.Measurement = earlier(ev.Measurement, m.shift)
	}
	if m.mend != nil {
		ev.Measurement = m.mend(ev.Measurement)
	}
	return ev
}

// scale is ln |∂mended/∂recorded| of a mended event.
func (m *Mistake) scale(ev sensor.Event) float64 {
	if m.lnScale == nil || !m.of(ev.Sensor, ev.Measurement.Kind()) {
		return 0
	}
	return m.lnScale(ev.Measurement)
}

// earlier takes a time off the beginning of an increment.
func earlier(m sensor.Measurement, by sensor.Time) sensor.Measurement {
	switch m := m.(type) {
	case sensor.Travel:
		m.Since -= by
		return m
	case sensor.Turn:
		m.Since -= by
		return m
	case sensor.Displacement:
		m.Since -= by
		return m
	case sensor.BodyDisplacement:
		m.Since -= by
		return m
	}
	return m
}

// part says which numbers of a measurement a mistake is about.
type part uint

const (
	distance part = 1 << iota // travel, forward and right, displacement, speed
	turn
	right
	east
	north
	altitude  // of clearance and barometer
	clearance // of clearance
	depth     // all depths of a sounding
)

// times multiplies parts of a measurement; stated sigmas stay as they are.
func times(m sensor.Measurement, p part, f float64) sensor.Measurement {
	by := func(v *float64, of part) {
		if p&of != 0 {
			*v *= f
		}
	}
	switch m := m.(type) {
	case sensor.Travel:
		by(&m.DistanceM, distance)
		return m
	case sensor.Turn:
		by(&m.AngleRad, turn)
		return m
	case sensor.Displacement:
		by(&m.EastM, distance|east)
		by(&m.NorthM, distance|north)
		return m
	case sensor.BodyDisplacement:
		by(&m.ForwardM, distance)
		by(&m.RightM, distance|right)
		by(&m.TurnRad, turn)
		return m
	case sensor.Speed:
		by(&m.MPS, distance)
		return m
	case sensor.Clearance:
		by(&m.ClearanceM, clearance)
		by(&m.AltitudeM, altitude)
		return m
	case sensor.Barometer:
		by(&m.AltitudeM, altitude)
		return m
	case sensor.Sounding:
		by(&m.DepthBelowTransducerM, depth)
		by(&m.TransducerDepthM, depth)
		m.Beams = append([]sensor.Beam(nil), m.Beams...)
		for i := range m.Beams {
			by(&m.Beams[i].DepthBelowTransducerM, depth)
		}
		return m
	}
	return m
}

// raise adds to the height that a measurement gives the ground.
func raise(m sensor.Measurement, byM float64) sensor.Measurement {
	switch m := m.(type) {
	case sensor.Clearance:
		m.AltitudeM += byM
		return m
	case sensor.Barometer:
		if m.HasPressure { // by the standard atmosphere, as the suite's default does
			h := sensor.StandardHeightM(m.PressureHPa, standardHPa)
			m.PressureHPa = sensor.StandardPressureHPa(h+byM, standardHPa)
			return m
		}
		m.AltitudeM += byM
		return m
	case sensor.Sounding:
		m.TransducerDepthM -= byM
		return m
	}
	return m
}

const standardHPa = 1013.25

// broaden widens the sigma of heights, by the root of the sum of squares;
// sigmaM is that of a measurement that states none.
func broaden(m sensor.Measurement, byM, sigmaM float64) sensor.Measurement {
	if byM == 0 {
		return m
	}
	w := func(s *float64) {
		if *s == 0 {
			*s = sigmaM
		}
		*s = math.Sqrt(*s**s + byM*byM)
	}
	switch m := m.(type) {
	case sensor.Clearance:
		w(&m.SigmaM)
		return m
	case sensor.Barometer:
		w(&m.SigmaM)
		return m
	case sensor.Sounding:
		w(&m.SigmaM)
		return m
	}
	return m
}

// turned rotates directions clockwise.
func turned(m sensor.Measurement, byRad float64) sensor.Measurement {
	switch m := m.(type) {
	case sensor.HeadingFix:
		m.HeadingRad = geo.WrapPi(m.HeadingRad + byRad)
		return m
	case sensor.Bearing:
		m.BearingRad = geo.WrapPi(m.BearingRad + byRad)
		return m
	case sensor.AcousticBearing:
		m.BearingRad = geo.WrapPi(m.BearingRad + byRad)
		return m
	case sensor.Speed:
		if m.HasCourse {
			m.CourseRad = geo.WrapPi(m.CourseRad + byRad)
		}
		return m
	case sensor.Displacement:
		s, c := kernel.Sincos(byRad)
		e, n := m.EastM, m.NorthM
		m.EastM, m.NorthM = c*e+s*n, c*n-s*e
		ee, en, nn := m.CovM2[0], m.CovM2[1], m.CovM2[2]
		m.CovM2 = [3]float64{
			c*c*ee + 2*c*s*en + s*s*nn,
			c*s*(nn-ee) + (c*c-s*s)*en,
			s*s*ee - 2*c*s*en + c*c*nn,
		}
		return m
	}
	return m
}

// swapped exchanges longitude and latitude of a fix.
func swapped(m sensor.Measurement) sensor.Measurement {
	if f, ok := m.(sensor.Fix); ok {
		f.Position = geo.LonLat{Lon: f.Position.Lat, Lat: f.Position.Lon}
		return f
	}
	return m
}
