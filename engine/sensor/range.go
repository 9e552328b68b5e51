package sensor

// Range is a horizontal distance to a beacon.
type Range struct {
	Beacon         Beacon
	RangeM, SigmaM float64
}

// Kind is "range".
func (Range) Kind() string { return KindRange }

// Check reports a range that no filter could use.
func (m Range) Check(Time) error {
	p := problems{what: KindRange}
	p.beacon(m.Beacon)
	p.within("range_m", m.RangeM, 0, maxFarM)
	p.sigmaM("sigma_m", m.SigmaM)
	return p.err()
}

func (p *problems) beacon(b Beacon) {
	p.name("beacon id", b.ID)
	if b.ID == "" {
		p.position(b.Position)
	}
}
