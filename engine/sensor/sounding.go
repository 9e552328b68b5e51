package sensor

import "strings"

// Sounding is a depth: the sea floor's height is minus the sum of depth below
// transducer and transducer depth (plus tide).
type Sounding struct {
	DepthBelowTransducerM, TransducerDepthM, SigmaM float64
	Beams                                           []Beam
}

// Beam is one beam of a sounding: depth at an offset from the transducer in
// the vehicle's frame.
type Beam struct{ ForwardM, RightM, DepthBelowTransducerM, SigmaM float64 }

// Kind is "sounding".
func (Sounding) Kind() string { return KindSounding }

// Check reports a sounding that no filter could use.
func (m Sounding) Check(Time) error {
	p := problems{what: KindSounding}
	p.within("depth_below_transducer_m", m.DepthBelowTransducerM, 0, 12000) // the deepest sea floor is 11 km down
	p.length("transducer_depth_m", m.TransducerDepthM)
	p.sigmaM("sigma_m", m.SigmaM)
	if len(m.Beams) > maxBeams {
		p.addf("it has %d beams: at most %d are allowed", len(m.Beams), maxBeams)
		return p.err()
	}
	for i, b := range m.Beams {
		var q problems
		q.length("forward_m", b.ForwardM)
		q.length("right_m", b.RightM)
		q.within("depth_below_transducer_m", b.DepthBelowTransducerM, 0, 12000)
		q.sigmaM("sigma_m", b.SigmaM)
		if len(q.list) > 0 {
			p.addf("beam %d: %s", i+1, strings.Join(q.list, "; "))
			break
		}
	}
	return p.err()
}
