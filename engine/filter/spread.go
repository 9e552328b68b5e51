package filter

import (
	"math"

	"leadline/engine/kernel"
)

// taps is a symmetric kernel: weight[0] at the middle, weight[n] at ±n steps
// of (col, row).
type taps struct {
	col, row int32
	weight   []float64
}

// tapFloor is where a kernel ends: what lies beyond is below it, relative to
// the middle.
const tapFloor = 1e-18

// discreteNormal returns the discrete normal distribution of a given variance
// (in steps², > 0): weight q^(n²) at ±n, with q chosen so that the variance
// is exactly what was asked for, however small. Of all distributions on the
// integers with that variance it has the most entropy; from a variance of 1
// on it is a sampled Gaussian to 1e-8.
//
// Source: Kemp, "Characterizations of a discrete normal distribution", J.
// Statist. Plann. Inference 63 (1997).
func discreteNormal(dst []float64, variance float64) []float64 {
	if variance < 1e-9 {
		// q^(n²) with n ≥ 2 is below 1e-36 here.
		return append(dst[:0], 1-variance, 0.5*variance)
	}
	// Newton in t = -ln q. Start from the Gaussian's 1/2v, or from the two
	// outer taps alone, 2q = v/(1-v).
	t := 0.5 / variance
	if variance < 0.25 {
		t = -kernel.Log(0.5 * variance / (1 - variance))
	}
	for range 40 {
		s0, s2, s4 := 1.0, 0.0, 0.0
		for n := 1.0; ; n++ {
			n2 := n * n
			w := 2 * kernel.Exp(-t*n2)
			s0 += w
			s2 += float64(w * n2)
			s4 += float64(w * float64(n2*n2))
			if w < 1e-20 {
				break
			}
		}
		m2 := s2 / s0
		// d(variance)/dt = m2² - m4; ln variance in t is nearly straight.
		step := kernel.Log(m2/variance) * m2 / (s4/s0 - float64(m2*m2))
		t += step
		if math.Abs(step) < 1e-15*t {
			break
		}
	}
	dst = append(dst[:0], 1)
	sum := 1.0
	for n := 1.0; ; n++ {
		w := kernel.Exp(-t * n * n)
		if w < tapFloor {
			break
		}
		dst = append(dst, w)
		sum += 2 * w
	}
	for i := range dst {
		dst[i] /= sum
	}
	return dst
}

// directions splits a covariance (in cells²) into at most three spreads along
// integer directions: Q = Σ λ u uᵀ with λ ≥ 0, exactly. It returns how many.
// The directions are no longer than sqrt(2·κ) with κ the ratio of Q's
// eigenvalues: an obtuse superbase holds the two shortest vectors of the
// lattice in the norm of Q, neither longer than the axes' sqrt(λmax), and
// their sum is at most sqrt 2 longer. κ must therefore be bounded, see
// spreadable.
//
// Source: Selling's reduction to an obtuse superbase, as used for anisotropic
// diffusion by Fehrenbach & Mirebeau, J. Math. Imaging Vision 49 (2014).
func directions(ee, en, nn float64) (u [3][2]int32, lambda [3]float64, n int) {
	if en == 0 {
		u[0], u[1] = [2]int32{1, 0}, [2]int32{0, 1}
		lambda[0], lambda[1] = ee, nn
		return pack(u, lambda)
	}
	v := [3][2]float64{{1, 0}, {0, 1}, {-1, -1}}
	dot := func(a, b [2]float64) float64 {
		return a[0]*(ee*b[0]+en*b[1]) + a[1]*(en*b[0]+nn*b[1])
	}
	// A round lengthens one vector by another, like Euclid's algorithm by
	// subtraction: there are fewer rounds than the longest component.
	for range 2 * maxReach {
		done := true
		for k := range 3 {
			i, j := (k+1)%3, (k+2)%3
			if dot(v[i], v[j]) > 1e-15*(ee+nn) {
				a, b := v[i], v[j]
				v = [3][2]float64{{-a[0], -a[1]}, b, {a[0] - b[0], a[1] - b[1]}}
				done = false
				break
			}
		}
		if done {
			break
		}
	}
	for k := range 3 {
		i, j := (k+1)%3, (k+2)%3
		u[k] = [2]int32{int32(-v[k][1]), int32(v[k][0])}
		lambda[k] = max(0, -dot(v[i], v[j]))
	}
	return pack(u, lambda)
}

// maxAnisotropy bounds the ratio of the eigenvalues of what is spread at once,
// and maxReach the length of the directions that this takes.
const (
	maxAnisotropy = 1e4
	maxReach      = 142 // sqrt(2·maxAnisotropy)
)

// spreadable returns the smallest covariance p ≥ q that directions can spread
// on a lattice: negative eigenvalues become 0, and off the axes the smaller
// one is raised to 1/maxAnisotropy of the larger, since nothing shorter than
// the whole lattice spreads along an irrational direction alone. p - q is
// positive semi-definite.
func spreadable(q [3]float64) (p [3]float64) {
	if q[1] == 0 {
		return [3]float64{max(q[0], 0), 0, max(q[2], 0)}
	}
	mid, half := 0.5*(q[0]+q[2]), 0.5*(q[0]-q[2])
	r := math.Sqrt(float64(half*half) + float64(q[1]*q[1]))
	large, small := mid+r, mid-r
	if !(large > 0) {
		return p
	}
	raise := large/maxAnisotropy - small
	if !(raise > 0) {
		return q
	}
	// (large·1 - q)/2r projects on the smaller eigenvalue's direction.
	raise /= 2 * r
	return [3]float64{
		q[0] + float64(raise*(large-q[0])),
		q[1] - float64(raise*q[1]),
		q[2] + float64(raise*(large-q[2])),
	}
}

// pack moves the positive spreads to the front.
func pack(u [3][2]int32, lambda [3]float64) ([3][2]int32, [3]float64, int) {
	n := 0
	for i := range 3 {
		if lambda[i] > 0 {
			u[n], lambda[n] = u[i], lambda[i]
			n++
		}
	}
	return u, lambda, n
}
