package sensor

import "leadline/engine/geo"

// Turn is the heading change since Since (gyro), clockwise positive:
//
//	heading' = heading + AngleRad + v,  v ~ N(0, SigmaRad²).
//
// The slow change of the meridian convergence under a moving vehicle (at 60°
// latitude 0.016° a kilometre east) is far below any gyro that needs a map
// and is left out.
// Source: IEEE Std 952, gyros' angular random walk and bias (memory).
type Turn struct {
	Since    Time
	AngleRad float64
	SigmaRad float64
}

// Kind is "turn".
func (Turn) Kind() string { return KindTurn }

// Check reports an increment that no filter could use.
func (m Turn) Check(at Time) error {
	p := problems{what: KindTurn}
	p.since(m.Since, at)
	p.angle("angle_deg", geo.Deg(m.AngleRad))
	p.sigmaDeg("sigma_deg", geo.Deg(m.SigmaRad))
	return p.err()
}
