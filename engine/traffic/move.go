package traffic

import (
	"math"
)

// longestStepS is the longest step in which a grid is moved at once: what noise
// spreads then stays within a few cells.
const longestStepS = 0.5

// move carries a density on: a vehicle keeps its speed but for a random walk of
// q m²/s³ (white acceleration). Over dt, speed and position gain
//
//	var Δv = q dt,  cov(Δv, Δs) = q dt²/2,  var Δs = q dt³/3.
//
// A mass that goes from one slice to another, by Δv, moves by its mean speed
// times dt, and is spread by q dt³/12: that is the same three figures, since Δs
// given Δv has mean Δv dt/2 and that variance. The weights between slices have
// exactly the variance q dt, also below a slice's width.
func (g *grid) move(w *work, dtS, q float64) (clipped, pruned float64) {
	steps := math.Ceil(dtS / longestStepS)
	for range int(steps) {
		c, p := g.step(w, dtS/steps, q)
		clipped, pruned = clipped+c, pruned+p
	}
	return clipped, pruned
}

func (g *grid) step(w *work, dtS, q float64) (clipped, pruned float64) {
	if len(g.slices) == 0 || dtS <= 0 {
		return 0, 0
	}
	if q == 0 {
		for k := range g.slices {
			g.slices[k].fromM += float64(g.speed(k) * dtS)
		}
		return 0, 0
	}
	w.kernel = binomial(w.kernel[:0], float64(q*dtS)/float64(g.stepMPS*g.stepMPS))
	half := len(w.kernel) - 1
	n := len(g.slices) + 2*half
	old, first := g.slices, g.firstMPS-float64(float64(half)*g.stepMPS)
	speed := func(k int) float64 { return first + float64(float64(k)*g.stepMPS) }
	origin := func(k int) float64 { // where the slice's own masses go
		i := min(max(k-half, 0), len(old)-1)
		o := old[i].fromM
		if len(old[i].mass) == 0 {
			o = 0
		}
		return o + float64(speed(k)*dtS)
	}
	moves := func(k int) []transfer {
		ts := w.transfers[:0]
		for d := -half; d <= half; d++ {
			to := k + half + d
			mean := g.speed(k) + float64(0.5*float64(float64(d)*g.stepMPS))
			ts = append(ts, transfer{to, float64(mean * dtS), w.kernel[max(d, -d)]})
		}
		w.transfers = ts
		return ts
	}
	clipped = g.rebuild(w, n, q*dtS*dtS*dtS/12, origin, moves)
	g.firstMPS = first
	return clipped, g.trim()
}

// binomial appends the middle and one side of a symmetric kernel of a given
// variance, in cells²: that of a sum of steps of -1, 0, 1, as few as keep each
// step's variance at ½ or below.
func binomial(dst []float64, variance float64) []float64 {
	n := max(1, int(math.Ceil(2*variance)))
	p := variance / float64(2*n) // of a step to either side
	dst = append(dst, 1)
	for range n {
		dst = append(dst, 0)
		last := len(dst) - 1
		before := 0.0 // what dst[i-1] was
		for i := 0; i <= last; i++ {
			left, right := before, 0.0
			if i == 0 {
				left = dst[min(1, last)]
			}
			if i < last {
				right = dst[i+1]
			}
			before = dst[i]
			dst[i] = float64((1-float64(2*p))*dst[i]) + float64(p*(left+right))
		}
	}
	for len(dst) > 1 && dst[len(dst)-1] < 1e-17 {
		dst = dst[:len(dst)-1]
	}
	return dst
}

// leave takes off what is beyond the road's ends, and says how much.
func (g *grid) leave(lengthM float64) (before, beyond float64) {
	for k := range g.slices {
		s := &g.slices[k]
		lo, hi := 0, len(s.mass)
		for lo < hi && s.fromM+float64(float64(lo)*g.stepM) < 0 {
			before += s.mass[lo]
			lo++
		}
		for lo < hi && s.fromM+float64(float64(hi-1)*g.stepM) > lengthM {
			hi--
			beyond += s.mass[hi]
		}
		s.fromM += float64(float64(lo) * g.stepM)
		s.mass = s.mass[lo:hi]
	}
	return before, beyond
}
