package sensor

import "math"

// Since returns the time at which an increment began, and whether m is one
// that says so (travel, turn, displacement, body_displacement).
func Since(m Measurement) (Time, bool) {
	switch m := m.(type) {
	case Travel:
		return m.Since, true
	case Turn:
		return m.Since, true
	case Displacement:
		return m.Since, true
	case BodyDisplacement:
		return m.Since, true
	}
	return 0, false
}

// Split returns the part of the increment (since, at] that falls into
// (from, to]: its share of the whole by time, and the same share of its
// variance. The parts of an increment therefore add up to it in value and in
// variance, and in bits if it is not cut. ok is false if nothing overlaps or
// m is no increment with a beginning of its own.
func Split(m Measurement, at, from, to Time) (part Measurement, since, until Time, ok bool) {
	begin, ok := Since(m)
	since, until = max(begin, from), min(at, to)
	if !ok || since >= until {
		return nil, 0, 0, false
	}
	if since == begin && until == at {
		return m, since, until, true
	}
	p := until.Seconds(since) / at.Seconds(begin)
	root := math.Sqrt(p)
	switch m := m.(type) {
	case Travel:
		return Travel{since, m.DistanceM * p, m.SigmaM * root}, since, until, true
	case Turn:
		return Turn{since, m.AngleRad * p, m.SigmaRad * root}, since, until, true
	case Displacement:
		c := m.CovM2
		return Displacement{since, m.EastM * p, m.NorthM * p, [3]float64{c[0] * p, c[1] * p, c[2] * p}}, since, until, true
	case BodyDisplacement:
		// An arc cut in time turns by the same share; the direction of each
		// part follows from the headings at its own middle.
		return BodyDisplacement{
			since, m.ForwardM * p, m.RightM * p, m.TurnRad * p,
			m.SigmaForwardM * root, m.SigmaRightM * root, m.SigmaTurnRad * root,
		}, since, until, true
	}
	panic("sensor: an increment of unknown kind")
}
