package sensor

import "leadline/engine/geo"

// Bearing is the true direction from the vehicle to a beacon, at the vehicle.
type Bearing struct {
	Beacon               Beacon
	BearingRad, SigmaRad float64
}

// Kind is "bearing".
func (Bearing) Kind() string { return KindBearing }

// Check reports a bearing that no filter could use.
func (m Bearing) Check(Time) error {
	p := problems{what: KindBearing}
	p.beacon(m.Beacon)
	p.angle("bearing_deg", geo.Deg(m.BearingRad))
	p.sigmaDeg("sigma_deg", geo.Deg(m.SigmaRad))
	return p.err()
}
