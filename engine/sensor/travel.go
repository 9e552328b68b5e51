package sensor

// Travel is the distance along the track from Since to the event's time
// (wheel odometer), negative in reverse.
//
//	moved = DistanceM·(1 + s) + v,  v ~ N(0, SigmaM²)
//
// with s the odometer_scale nuisance where a belief has one: d moved / d s =
// DistanceM, so that whatever tells the distance observes the scale.
// Source: Borenstein & Feng, IEEE Trans. Robotics and Automation 12(6), 1996
// (memory): a wheel of another size is a factor of the distance.
type Travel struct {
	Since     Time
	DistanceM float64
	SigmaM    float64
}

// Kind is "travel".
func (Travel) Kind() string { return KindTravel }

// Check reports an increment that no filter could use.
func (m Travel) Check(at Time) error {
	p := problems{what: KindTravel}
	p.since(m.Since, at)
	p.length("distance_m", m.DistanceM)
	p.sigmaM("sigma_m", m.SigmaM)
	return p.err()
}
