package filter

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// ratio is what the future says of a place within an entry, up to a constant:
//
//	R(y) = N(y; later)/N(y; predicted) ∝ exp(η·u - uᵀΛu/2),  u = y - predicted mean,
//
// with Λ = P'⁻¹ - P⁻¹ and η = P'⁻¹ (m' - m). Λ need not be positive: merging may
// leave more variance later than was predicted.
type ratio struct {
	mean   [MaxK]float64
	lambda [maxPacked]float64
	eta    [MaxK]float64
}

// set makes it the ratio of two Gaussians; 1 where either has no inverse.
func (r *ratio) set(later, predicted *gaussian, k int, angular uint) {
	*r = ratio{mean: predicted.mean}
	var fl, fp factor
	if !fl.set(&later.cov, k) || !fp.set(&predicted.cov, k) {
		return
	}
	var d [MaxK]float64
	for x := range k {
		d[x] = difference(later.mean[x], predicted.mean[x], angular, x)
	}
	r.eta = d
	fl.solve(&r.eta)
	for x := range k {
		var a, b [MaxK]float64
		a[x], b[x] = 1, 1
		fl.solve(&a)
		fp.solve(&b)
		for y := 0; y <= x; y++ {
			r.lambda[Packed(x, y)] = a[y] - b[y]
		}
	}
}

func difference(a, b float64, angular uint, x int) float64 {
	if angular>>uint(x)&1 != 0 {
		return geo.WrapPi(a - b)
	}
	return a - b
}

// weigh multiplies g by R and returns ln ∫ g R. With L Lᵀ its covariance, S = I +
// LᵀΛL, e its mean and v = Lᵀ(η - Λe), the mean becomes e + L S⁻¹ v, the
// covariance L S⁻¹ Lᵀ, and the log is η·e - eᵀΛe/2 + vᵀS⁻¹v/2 - ln|S|/2. Where S
// is not positive g is left alone, and only its place is looked at: the log is that
// of η·e.
func (r *ratio) weigh(g *gaussian, k int, angular uint) float64 {
	var l [MaxK][MaxK]float64
	root(&l, &g.cov, k)
	var e, v, le [MaxK]float64
	log := 0.0
	for x := range k {
		e[x] = difference(g.mean[x], r.mean[x], angular, x)
		log += float64(r.eta[x] * e[x])
	}
	for x := range k {
		for y := range k {
			le[x] += float64(r.at(x, y) * e[y])
		}
	}
	var ll [MaxK][MaxK]float64 // Λ L
	for x := range k {
		for y := range k {
			for z := y; z < k; z++ {
				ll[x][y] += float64(r.at(x, z) * l[z][y])
			}
		}
	}
	var s [maxPacked]float64
	for x := range k {
		for z := x; z < k; z++ {
			v[x] += float64(l[z][x] * (r.eta[z] - le[z]))
		}
		for y := 0; y <= x; y++ {
			c := 0.0
			for z := x; z < k; z++ {
				c += float64(l[z][x] * ll[z][y])
			}
			if x == y {
				c++
			}
			s[Packed(x, y)] = c
		}
	}
	var f factor
	if !f.exact(&s, k) {
		return log
	}
	sv := v
	f.solve(&sv)
	for x := range k {
		log += float64(0.5 * float64(v[x]*sv[x]))
		log -= float64(0.5 * float64(e[x]*le[x]))
		log -= kernel.Log(f.l[x][x])
		for z := 0; z <= x; z++ {
			g.mean[x] += float64(l[x][z] * sv[z])
		}
	}
	// L S⁻¹ Lᵀ by columns of Lᵀ.
	for x := range k {
		var c [MaxK]float64
		for z := 0; z <= x; z++ {
			c[z] = l[x][z]
		}
		f.solve(&c)
		for y := 0; y <= x; y++ {
			sum := 0.0
			for z := 0; z <= y; z++ {
				sum += float64(l[y][z] * c[z])
			}
			g.cov[Packed(x, y)] = sum
		}
	}
	return log
}

func (r *ratio) at(x, y int) float64 {
	if x < y {
		x, y = y, x
	}
	return r.lambda[Packed(x, y)]
}

// factor is L of a symmetric positive matrix L Lᵀ (Cholesky), scaled by its
// diagonal.
type factor struct {
	k     int
	scale [MaxK]float64
	l     [MaxK][MaxK]float64
}

// tiny is added to the scaled diagonal of a covariance, of which a quantity may
// be known exactly, or be the sum of others.
const tiny = 1e-13

// set factors a covariance; false if it is none.
func (f *factor) set(a *[maxPacked]float64, k int) bool {
	for x := range k {
		f.scale[x] = 1
		if v := a[Packed(x, x)]; v > 0 {
			f.scale[x] = 1 / math.Sqrt(v)
		}
	}
	var s [maxPacked]float64
	for x := range k {
		for y := 0; y <= x; y++ {
			s[Packed(x, y)] = float64(float64(a[Packed(x, y)]*f.scale[x]) * f.scale[y])
		}
		s[Packed(x, x)] += tiny
	}
	return f.cholesky(&s, k)
}

// exact factors a matrix as it is.
func (f *factor) exact(a *[maxPacked]float64, k int) bool {
	for x := range k {
		f.scale[x] = 1
	}
	return f.cholesky(a, k)
}

func (f *factor) cholesky(a *[maxPacked]float64, k int) bool {
	f.k = k
	for x := range k {
		for y := 0; y <= x; y++ {
			s := a[Packed(x, y)]
			for z := range y {
				s -= float64(f.l[x][z] * f.l[y][z])
			}
			switch {
			case x != y:
				f.l[x][y] = s / f.l[y][y]
			case s > 0:
				f.l[x][x] = math.Sqrt(s)
			default:
				return false
			}
		}
	}
	return true
}

// solve replaces b by the solution x of A x = b.
func (f *factor) solve(b *[MaxK]float64) {
	for x := range f.k {
		s := float64(b[x] * f.scale[x])
		for y := range x {
			s -= float64(f.l[x][y] * b[y])
		}
		b[x] = s / f.l[x][x]
	}
	for x := f.k - 1; x >= 0; x-- {
		s := b[x]
		for y := x + 1; y < f.k; y++ {
			s -= float64(f.l[y][x] * b[y])
		}
		b[x] = s / f.l[x][x]
	}
	for x := range f.k {
		b[x] *= f.scale[x]
	}
}

// root writes L of a covariance L Lᵀ, with 0 for what is known exactly.
func root(l *[MaxK][MaxK]float64, a *[maxPacked]float64, k int) {
	for x := range k {
		for y := 0; y <= x; y++ {
			s := a[Packed(x, y)]
			for z := range y {
				s -= float64(l[x][z] * l[y][z])
			}
			switch {
			case x == y:
				l[x][x] = math.Sqrt(math.Max(s, 0))
			case l[y][y] > 0:
				l[x][y] = s / l[y][y]
			}
		}
	}
}
