package sensor

import "leadline/engine/filter"

// Clearance is height above ground together with the vehicle's own altitude:
// the ground's height is their difference, and SigmaM the standard deviation
// of that difference.
type Clearance struct{ ClearanceM, AltitudeM, SigmaM float64 }

// Kind is "clearance".
func (Clearance) Kind() string { return KindClearance }

// Check reports a clearance that no filter could use.
func (m Clearance) Check(Time) error {
	p := problems{what: KindClearance}
	p.length("clearance_m", m.ClearanceM)
	p.length("altitude_m", m.AltitudeM)
	p.sigmaM("sigma_m", m.SigmaM)
	return p.err()
}

// likelihood: altitude - clearance - down = height of the ground + offset + v,
// with down the sensor's mounting below the reference point that the altitude
// is of, and the altimeter_offset_m of a sensor that describes one (type
// heights). Where a canopy is in the way, the ground seems higher by anything
// up to its height.
// Source: the definition of the two heights; outliers and canopy are Huber's
// contaminated distribution, Ann. Math. Statist. 35, 1964 (memory).
func (m Clearance) likelihood(c *Context, d Sensor) any {
	l := c.heights(d, m.AltitudeM-d.Mounting.DownM, m.ClearanceM, m.SigmaM, d.Mounting.ForwardM, d.Mounting.RightM)
	l.noise = d.canopied(l.noise)
	if d.has(NuisanceAltimeterOffset) {
		l.with(c, filter.AltimeterOffset, 1)
	}
	return l
}
