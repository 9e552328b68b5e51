package traffic

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// heardAs is what a scan may be to a density of vehicles: for each cell the
// factor of every way to hear it, and their means over the density.
//
// With pD the probability that a vehicle there is heard, and b that it then
// gives two bearings,
//
//	nothing:      1 - pD
//	bearing j:    pD (1-b) N(z_j; β, σ²)
//	j and k:      pD b (N(z_j; front) N(z_k; rear) + N(z_k; front) N(z_j; rear))
//
// all for the place at which it was when what is heard now was emitted. The two
// orders of a pair add up, since a scan is a set.
type heardAs struct {
	said    []said
	nothing float64
	one     []float64
	two     []float64 // by pair
	factor  [][]float64
}

// pair numbers the pairs j < k of n bearings.
func pair(j, k, n int) int { return j*(2*n-j-1)/2 + k - j - 1 }

// gateSigma: a bearing further off than this is none of a vehicle's, 2e-9 of
// them excepted.
const gateSigma = 6

// listen fills in the factors of a density's cells for a scan.
func (h *heardAs) listen(g *grid, e *ear, m *Model, bearings []Bearing) {
	n := len(bearings)
	h.said = e.say(h.said, bearings)
	pairs := 0
	if m.TwoBearings > 0 {
		pairs = n * (n - 1) / 2
	}
	cells := g.count()
	ways := 1 + n + pairs
	for len(h.factor) < ways {
		h.factor = append(h.factor, nil)
	}
	for w := range ways {
		if cap(h.factor[w]) < cells {
			h.factor[w] = make([]float64, cells+cells/4)
		}
		h.factor[w] = h.factor[w][:cells]
		clear(h.factor[w])
	}
	h.nothing = 0
	h.one, h.two = zeros(h.one, n), zeros(h.two, pairs)
	front, rear := make([]float64, n), make([]float64, n)
	var mass float64
	at := 0
	for k, s := range g.slices {
		v := g.speed(k)
		piece := 0
		if len(s.mass) > 0 {
			piece = e.road.piece(s.fromM)
		}
		for i, p := range s.mass {
			c := at + i
			mass += p
			var where, distance float64
			where, distance, piece = e.emission(s.fromM+float64(float64(i)*g.stepM), v, piece)
			pd := 0.0
			if distance < m.ReachM {
				pd = m.detection(distance)
			}
			h.factor[0][c] = 1 - pd
			h.nothing += float64(p * (1 - pd))
			if pd == 0 || n == 0 {
				continue
			}
			side := 0.0 // what a distance from the centreline adds to the bearing
			if m.LateralM > 0 {
				x := (where - e.footM[piece]) / distance
				side = float64(m.LateralM * x / distance)
			}
			offset := e.offset(where, piece)
			e.densities(front, h.said, offset, distance, side)
			for j, l := range front {
				f := float64(pd*(1-m.TwoBearings)) * l
				h.factor[1+j][c] = f
				h.one[j] += float64(p * f)
			}
			if pairs == 0 {
				continue
			}
			half := 0.5 * m.AxleM
			if v < 0 {
				half = -half
			}
			offset = e.offset(where+half, piece)
			e.densities(front, h.said, offset, offset.Norm(), side)
			offset = e.offset(where-half, piece)
			e.densities(rear, h.said, offset, offset.Norm(), side)
			for j := range n {
				for l := j + 1; l < n; l++ {
					f := float64(pd*m.TwoBearings) * (float64(front[j]*rear[l]) + float64(front[l]*rear[j]))
					q := pair(j, l, n)
					h.factor[1+n+q][c] = f
					h.two[q] += float64(p * f)
				}
			}
		}
		at += len(s.mass)
	}
	if mass > 0 {
		h.nothing /= mass
		for j := range h.one {
			h.one[j] /= mass
		}
		for q := range h.two {
			h.two[q] /= mass
		}
	} else {
		h.nothing = 1
	}
}

func zeros(dst []float64, n int) []float64 {
	if cap(dst) < n {
		return make([]float64, n)
	}
	dst = dst[:n]
	clear(dst)
	return dst
}

// said is a bearing of a scan as a density wants it: unit vectors of the
// direction and of what sounds like it.
type said struct {
	Bearing
	toward, mirror geo.Point
	mirrored       bool
	kappa, peak    float64 // of the bearing's own sigma
}

func (e *ear) say(dst []said, bearings []Bearing) []said {
	dst = dst[:0]
	for _, b := range bearings {
		s := said{Bearing: b, toward: geo.Direction(b.Rad)}
		if axis := e.post.AxisRad; axis != nil {
			s.mirrored, s.mirror = true, geo.Direction(2*(*axis)-b.Rad)
		}
		s.kappa, s.peak = concentration(float64(b.SigmaRad * b.SigmaRad))
		dst = append(dst, s)
	}
	return dst
}

// concentration is a von Mises distribution's κ = 1/σ², and its density at its
// mean,
//
//	e^κ / (2π I₀(κ)) = sqrt(κ/2π) / (1 + 1/(8κ) + 9/(128κ²) + …),
//
// right to 2e-4 for σ up to 20° (Abramowitz & Stegun 9.7.1).
func concentration(variance float64) (kappa, peak float64) {
	kappa = 1 / variance
	return kappa, kernel.InvSqrt2Pi * math.Sqrt(kappa) / (1 + variance*(1.0/8+float64(9.0/128*variance)))
}

// densities writes each bearing's density per radian, if the sound came from a
// place at an offset and distance from the post: exp(κ(cos δ - 1)) of the peak,
// δ the angle between, which for a small σ is the normal density. A distance
// from the centreline adds sideRad to its sigma. Of a line of microphones half
// the density is that of the mirror image.
func (e *ear) densities(dst []float64, bearings []said, offset geo.Point, distanceM, sideRad float64) {
	for j := range bearings {
		b := &bearings[j]
		kappa, peak := b.kappa, b.peak
		if sideRad != 0 {
			kappa, peak = concentration(min(float64(b.SigmaRad*b.SigmaRad)+float64(sideRad*sideRad), mostSigmaRad*mostSigmaRad))
		}
		dst[j] = vonMises(b.toward, offset, distanceM, kappa, peak)
		if b.mirrored {
			dst[j] = 0.5 * (dst[j] + vonMises(b.mirror, offset, distanceM, kappa, peak))
		}
	}
}

// vonMises is 0 beyond gateSigma.
func vonMises(toward, offset geo.Point, distanceM, kappa, peak float64) float64 {
	cosine := (float64(toward.E*offset.E) + float64(toward.N*offset.N)) / distanceM
	x := float64(kappa * (cosine - 1))
	if !(x > -0.5*gateSigma*gateSigma) {
		return 0
	}
	return float64(peak * kernel.Exp(x))
}

// reweigh makes of a density the mix of what it is in each way, given their
// weights, those of bearings times a factor; its mass is then their sum.
func (h *heardAs) reweigh(g *grid, nothing float64, one, two []float64, times float64) {
	mass := g.total()
	coefficients := make([]float64, 0, 1+len(one)+len(two))
	add := func(weight, mean float64) {
		c := 0.0
		if weight > 0 && mean > 0 {
			c = weight / (mean * mass)
		}
		coefficients = append(coefficients, c)
	}
	add(nothing, h.nothing)
	for j := range one {
		add(times*one[j], h.one[j])
	}
	for q := range two {
		add(times*two[q], h.two[q])
	}
	at := 0
	for _, s := range g.slices {
		for i := range s.mass {
			f := 0.0
			for w, c := range coefficients {
				if c != 0 {
					f += float64(c * h.factor[w][at+i])
				}
			}
			s.mass[i] *= f
		}
		at += len(s.mass)
	}
}
