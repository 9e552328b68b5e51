package traffic

import "math"

// moments of a density of any total mass.
type moments struct {
	mass                 float64
	positionM, speedMPS  float64
	varM2, cov, varSpeed float64 // m², m²/s, m²/s²
}

func (g *grid) moments() (m moments) {
	var s0, s1, s2, v1, v2, sv float64
	ref := 0.0 // sums are taken around a place near by
	for _, s := range g.slices {
		if len(s.mass) > 0 {
			ref = s.fromM
			break
		}
	}
	for k, s := range g.slices {
		var m0, m1, m2 float64
		for i, p := range s.mass {
			x := float64(i)
			m0 += p
			m1 += float64(p * x)
			m2 += float64(p * x * x)
		}
		v, o := g.speed(k), s.fromM-ref
		a1 := float64(o*m0) + float64(g.stepM*m1)
		a2 := float64(o*o*m0) + float64(2*o*g.stepM*m1) + float64(g.stepM*g.stepM*m2)
		s0 += m0
		s1, s2 = s1+a1, s2+a2
		v1, v2, sv = v1+float64(v*m0), v2+float64(v*v*m0), sv+float64(v*a1)
	}
	if s0 <= 0 {
		return moments{}
	}
	mean, speed := s1/s0, v1/s0
	return moments{
		mass: s0, positionM: ref + mean, speedMPS: speed,
		varM2: math.Max(0, s2/s0-float64(mean*mean)), varSpeed: math.Max(0, v2/s0-float64(speed*speed)),
		cov: sv/s0 - float64(mean*speed),
	}
}

// widths are the sigmas that a normal density of the same concentration would
// have: of the speed, and of the position where the speed is known. From
//
//	∫p² / (∫p)² = 1/(2√π σ),  and over two axes 1/(4π σ_v σ_s|v).
//
// Of several separate places they give the sum of the widths and not the
// distance between, so that a grid is as fine as each of them needs.
func (g *grid) widths() (givenSpeedM, speedMPS float64) {
	var sum, square, marginal float64
	for _, s := range g.slices {
		m := 0.0
		for _, p := range s.mass {
			m += p
			square += float64(p * p)
		}
		sum += m
		marginal += float64(m * m)
	}
	if sum <= 0 {
		return 0, 0
	}
	// Marginal over slices, and area over both.
	const twoRootPi = 3.5449077018110318
	speedMPS = g.stepMPS * sum / marginal * sum / twoRootPi
	givenSpeedM = g.stepM * g.stepMPS * sum / square * sum / (4 * math.Pi) / speedMPS
	return givenSpeedM, speedMPS
}

// beyond is the part of the mass beyond a position, a cell's mass being spread
// evenly over its width.
func (g *grid) beyond(positionM float64) float64 {
	var sum, out float64
	for _, s := range g.slices {
		for i, p := range s.mass {
			sum += p
			x := (s.fromM+float64(float64(i)*g.stepM)-positionM)/g.stepM + 0.5
			out += float64(p * min(max(x, 0), 1))
		}
	}
	if sum <= 0 {
		return 0
	}
	return out / sum
}

// forward is the part of the mass with a speed above 0; a slice at 0 counts half.
func (g *grid) forward() float64 {
	var sum, out float64
	for k, s := range g.slices {
		m := 0.0
		for _, p := range s.mass {
			m += p
		}
		sum += m
		out += float64(m * min(max(g.speed(k)/g.stepMPS+0.5, 0), 1))
	}
	if sum <= 0 {
		return 0
	}
	return out / sum
}
