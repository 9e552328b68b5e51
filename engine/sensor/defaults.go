package sensor

// outlierDefault is the probability of an outlier where a suite says nothing
// (practice): one in a hundred for instruments, more for satellite fixes in
// streets and for posts, which now and then hear something else.
func outlierDefault(kind string) float64 {
	switch kind {
	case KindFix:
		return 0.02
	case KindAcousticBearing:
		return 0.05
	case KindHeading, KindClearance, KindSounding, KindBarometer, KindRange, KindBearing:
		return 0.01
	}
	return 0
}

// correlationDefault is how long an error lasts, in seconds, where a suite
// says nothing (practice): a compass and a speed log carry their error
// through a second, and so do satellite fixes at least, barometers and the
// bearings of one post. Ranges, heights under the vehicle and bearings to
// beacons are taken as independent.
func correlationDefault(kind string) float64 {
	switch kind {
	case KindHeading, KindSpeed, KindFix, KindBarometer, KindAcousticBearing:
		return 1
	}
	return 0
}

// fixSpanM is the side of the square over which outlying fixes are flat.
const fixSpanM = 10000

func (d Sensor) outlier() float64 {
	if d.OutlierProbability != nil {
		return *d.OutlierProbability
	}
	return outlierDefault(d.Kind)
}

func (d Sensor) correlation() float64 {
	if d.CorrelationS != nil {
		return *d.CorrelationS
	}
	return correlationDefault(d.Kind)
}

// CorrelationS is how long an error of the sensor lasts, s.
func (s *Suite) CorrelationS(name, kind string) float64 { return s.Sensor(name, kind).correlation() }

func (d Sensor) maxRange() float64 {
	if d.MaxRangeM != 0 {
		return d.MaxRangeM
	}
	return 10000
}

func (d Sensor) sign() float64 {
	if d.Sign < 0 {
		return -1
	}
	return 1
}

// heightDensity is the density of an unknown height, 1/m.
func (s *Suite) heightDensity() float64 { return 1 / (s.Vehicle.HighestM - s.Vehicle.LowestM) }
