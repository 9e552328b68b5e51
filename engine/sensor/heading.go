package sensor

import "leadline/engine/geo"

// HeadingFix is a true heading.
type HeadingFix struct{ HeadingRad, SigmaRad float64 }

// Kind is "heading".
func (HeadingFix) Kind() string { return KindHeading }

// Check reports a heading that no filter could use.
func (m HeadingFix) Check(Time) error {
	p := problems{what: KindHeading}
	p.angle("deg", geo.Deg(m.HeadingRad))
	p.sigmaDeg("sigma_deg", geo.Deg(m.SigmaRad))
	return p.err()
}
