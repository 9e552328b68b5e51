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

// likelihood: z = β(vehicle → beacon) + convergence at the vehicle + v, by
// wrapped residual up to a sigma of 15° and by the von Mises density above
// (type sight). Within four cells of the beacon the exact density serves: a
// Gaussian half a cell wide then bends the direction by (1/8)² rad, 0.9°.
// Source: Mardia & Jupp, Directional Statistics, 2000, wrapped normal and von
// Mises distributions (memory).
func (m Bearing) likelihood(c *Context, d Sensor) (any, error) {
	at, err := c.point(m.Beacon.Position, "the beacon")
	if err != nil {
		return nil, err
	}
	return sight{
		target: at, zRad: m.BearingRad, skew: newSkew(c.Frame, c.Pose.At),
		arm:        newArm(c, d.Mounting.ForwardM, d.Mounting.RightM),
		lateralVar: square(c.Suite.Vehicle.LateralSigmaM), nearM: 4 * c.CellM,
		noise: c.directionNoise(d, m.SigmaRad),
	}.likelihood(m.SigmaRad), nil
}
