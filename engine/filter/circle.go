package filter

import (
	"math"

	"leadline/engine/kernel"
)

// circle is the probability that entry i has for the arc from opposite the
// heaviest entry's prediction up to the measurement, and for the rest: as much
// of the wrapped normal as lies within one turn to either side.
func (q *predictions) circle(i int, n *Noise, heaviest float64) (t tails) {
	arc := heaviest + math.Pi // from the cut to the measurement
	r := q.residual[i][0]
	t.add(n.FlatWeight, tails{arc / (2 * math.Pi), 1 - arc/(2*math.Pi)})
	for c, part := range n.Parts {
		s := math.Sqrt(q.spread(i, c, 1, n).a)
		sum := turns(r, arc, s)
		if whole := sum.below + sum.above; whole > 0 {
			t.add(part.Weight/whole, sum)
		}
	}
	return t
}

// turns are the probabilities of a normal distribution around 0 from the cut, arc
// before r, up to r, and from there to the next cut, summed over the turn between
// the cuts and one to either side. Turns, and tails beyond cuts, that are too little
// to change a bit of the sum are not looked at.
func turns(r, arc, s float64) (sum tails) {
	first, last := (r-arc)/s, (r-arc+2*math.Pi)/s
	z := normalTails(r / s)
	if first < -kernel.QuickEnd && last > kernel.QuickEnd && min(z.below, z.above) > leastBeside {
		return z
	}
	a, b := normalTails(first), normalTails(last)
	sum = tails{a.between(z), z.between(b)}
	// The other turns lie beyond the cuts.
	if first < 0 && last > 0 && max(a.below, b.above) < tooLittle*min(sum.below, sum.above) {
		return sum
	}
	sum = tails{}
	for turn := -1.0; turn <= 1; turn++ {
		to := r + turn*2*math.Pi
		a, z, b := normalTails((to-arc)/s), normalTails(to/s), normalTails((to-arc+2*math.Pi)/s)
		sum.below += a.between(z)
		sum.above += z.between(b)
	}
	return sum
}

const (
	// tooLittle of a sum does not change it by rounding, which takes 2^-54.
	tooLittle = 0x1p-56
	// leastBeside is above Q(QuickEnd)/tooLittle = 1.13e-19·2^56.
	leastBeside = 0.01
)

// tails are the probabilities on the two sides of a place.
type tails struct{ below, above float64 }

func (t *tails) add(weight float64, u tails) {
	t.below += float64(weight * u.below)
	t.above += float64(weight * u.above)
}

// between is the probability from t up to u.
func (t tails) between(u tails) float64 {
	if t.below > t.above {
		return t.above - u.above
	}
	return u.below - t.below
}

// normalTails is to 1.1e-6 of the smaller one, which changes a score by less.
func normalTails(z float64) tails {
	var tail float64
	if a := math.Abs(z); a < kernel.QuickEnd {
		tail = kernel.QuickUpper(a)
	} else {
		tail = kernel.NormalUpper(a)
	}
	if z < 0 {
		return tails{tail, 1 - tail}
	}
	return tails{1 - tail, tail}
}
