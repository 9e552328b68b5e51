package sensor

import "leadline/engine/filter"

// drive has a quantity, which drifts by a random walk, enter others over t
// seconds: each of the others grows by by[i] times the quantity if that stays as
// it is. Its drift q a second on the way is shared out evenly, so that
//
//	Q[i, j] += q·t·by[i]·by[j]/3,  Q[i, quantity] += q·t·by[i]/2,
//
// the integral of a Wiener process, and what is made of n steps is what one
// makes. Source: Bar-Shalom, Li & Kirubarajan, Estimation with Applications to
// Tracking and Navigation (2001), §6.2.2.
func drive(s *filter.Step, qs []filter.Quantity, quantity int, t float64, others []int, by []float64) {
	q := qs[quantity].DriftVar * t
	for i, o := range others {
		s.SetF(o, quantity, by[i])
		for j := range i + 1 {
			a, b := max(o, others[j]), min(o, others[j])
			s.Q[filter.Packed(a, b)] += q / 3 * by[i] * by[j]
		}
		a, b := max(o, quantity), min(o, quantity)
		s.Q[filter.Packed(a, b)] += q / 2 * by[i]
	}
}
