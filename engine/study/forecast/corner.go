package forecast

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// corners takes in what the turns at junctions tell. There the road's direction
// jumps from one directed edge to the next, and has no slope that the recursion
// could see. A belief that is m metres off makes the comparison with the road's
// direction (sensor.RoadAlignment), once each alignmentM, between a heading and
// one that is off by the jump: the log likelihood falls by
//
//	c·|m|,  c = KL/alignmentM,  KL = ∫ p(v)·ln(p(v)/p(v-Δ)) dv,
//
// p the comparison's noise beside the junction. That is a Laplace distribution
// with a variance of 2/c², and counts as a normal one with that: information
// c²/2. On simulated drives it is what brings the bound to the radii that filters
// state (TestAgainstCars).
func (b *bound) corners(from, to int) {
	for i := from + 1; i <= to && i < len(b.Path.legs); i++ {
		l := b.Path.legs[i]
		end, begin := b.Path.place(l.beforeM-1e-9), b.Path.place(l.beforeM)
		jump := geo.WrapPi(begin.heading - end.heading)
		if math.Abs(jump) < leastJumpRad {
			continue
		}
		align, ok := sensor.RoadAlignment(b.qs, alignmentM)
		if !ok {
			return
		}
		for _, besideM := range []float64{-cornerM, cornerM} {
			at, ok := b.linearize(align, b.Path.place(l.beforeM+besideM), b.x)
			if !ok {
				continue
			}
			c := divergence(&at, jump) / alignmentM
			row := make([]float64, b.k)
			row[0] = 1
			b.add(row, c*c/4) // the mean of the two sides
		}
	}
}

const (
	alignmentM   = 5.0 // as in sensor.RoadAlignment
	cornerM      = 2.5 // half of that: where the comparison looks
	leastJumpRad = 3 * math.Pi / 180
)

// divergence is KL of a circular noise from itself turned by an angle, nats.
func divergence(l *linearized, turn float64) float64 {
	density := func(v float64) float64 {
		v = geo.WrapPi(v)
		p := l.noise.FlatWeight * l.noise.FlatDensity
		for c, part := range l.noise.Parts {
			s := math.Sqrt(part.Cov[0] + l.terms.ExtraOf(0, c))
			for _, w := range [3]float64{-2 * math.Pi, 0, 2 * math.Pi} {
				u := (v - w) / s
				p += part.Weight / (s * math.Sqrt(2*math.Pi)) * math.Exp(-u*u/2)
			}
		}
		return p
	}
	const n = 720 // half a degree: a twentieth of the narrowest part
	sum := 0.0
	for i := range n {
		v := -math.Pi + 2*math.Pi*(float64(i)+0.5)/n
		p := density(v)
		sum += p * math.Log(p/density(v-turn))
	}
	return math.Max(sum*2*math.Pi/n, 0)
}
