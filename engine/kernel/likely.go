package kernel

import "math"

// Likely is the density of a residual at places of a plane,
//
//	Weight·exp(-(r - Mean)²/2v)/√v + Flat,  v = max(Noise + extra, Least·|row|²),
//
// row being the residual's derivative by the place: no sharper than a standard deviation
// of √Least along each axis would make it.
type Likely struct {
	Noise, Mean, Least float64
	Weight             float64 // over √2π
	Flat               float64
}

// Weigh writes mass times density at each place, and 0 where the mass is less than
// least, and returns the sums of what it wrote and of the masses. row has two numbers a
// place. Where flat is not NaN, at most 700, it is ln of the density instead, and residual
// and extra do not matter. v is a normal number and finite. Element i goes into sum i%4,
// and these are added in pairs. dst may be mass.
//
// With x the exponent's size, a density is off by at most (8 + 6x)·2^-53 of it: six
// roundings make x from residual, row and extra.
func (l *Likely) Weigh(dst, mass, residual, row, extra, flat []float64, least float64) (sum, before float64) {
	n := len(dst)
	var sums [8]float64
	likely(l, &sums, dst, mass[:n], residual[:n], row[:2*n], extra[:n], flat[:n], least)
	return (sums[0] + sums[1]) + (sums[2] + sums[3]), (sums[4] + sums[5]) + (sums[6] + sums[7])
}

// likelyPlain is Likely.Weigh in plain Go, from index i on.
func likelyPlain(l *Likely, sums *[8]float64, dst, mass, residual, row, extra, flat []float64, least float64, i int) {
	for ; i < len(dst); i++ {
		x, factor, add := flat[i], 1.0, 0.0
		if x != x {
			e, n := row[2*i], row[2*i+1]
			v := l.Noise + extra[i]
			if wide := float64(l.Least * (float64(e*e) + float64(n*n))); wide > v {
				v = wide
			}
			is, r := 1/v, residual[i]-l.Mean
			x = -0.5 * float64(float64(r*r)*is)
			factor, add = float64(l.Weight*math.Sqrt(is)), l.Flat
		}
		m := mass[i]
		sums[4+i%4] += m
		if dst[i] = 0; m >= least {
			dst[i] = float64(m * (float64(factor*Exp(x)) + add))
			sums[i%4] += dst[i]
		}
	}
}
