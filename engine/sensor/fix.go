package sensor

import "leadline/engine/geo"

// Fix is a satellite fix; SigmaM is the standard deviation along each axis.
type Fix struct {
	Position geo.LonLat
	SigmaM   float64
}

// Kind is "fix".
func (Fix) Kind() string { return KindFix }

// Check reports a fix that no filter could use.
func (m Fix) Check(Time) error {
	p := problems{what: KindFix}
	p.position(m.Position)
	p.sigmaM("sigma_m", m.SigmaM)
	return p.err()
}

func (p *problems) position(at geo.LonLat) {
	if err := at.Check(); err != nil {
		p.addf("%v", err)
	}
}
