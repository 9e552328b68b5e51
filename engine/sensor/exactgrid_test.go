package sensor_test

import (
	"math"

	"leadline/engine/filter"
)

// The exact filter: the nuisance is one more axis of a grid. It is over (place,
// nuisance), knows no Gaussians and nothing of engine/filter: motion shifts by
// whole cells, spreads are exact in mean and variance, and measurements multiply.
type exactGrid struct {
	x0, dx float64 // places
	n      int
	y0, dy float64 // nuisances
	m      int
	p      []float64 // m rows of n
}

func newExact(x0, x1, dx, y0, y1, dy float64) *exactGrid {
	g := &exactGrid{x0: x0, dx: dx, n: int((x1-x0)/dx) + 1, y0: y0, dy: dy, m: int((y1-y0)/dy) + 1}
	g.p = make([]float64, g.n*g.m)
	return g
}

func (g *exactGrid) each(f func(x, y float64) float64) {
	sum := 0.0
	for j := range g.m {
		for i := range g.n {
			v := &g.p[j*g.n+i]
			*v *= f(g.x0+g.dx*float64(i), g.y0+g.dy*float64(j))
			sum += *v
		}
	}
	for i := range g.p {
		g.p[i] /= sum
	}
}

// move shifts all places by whole cells.
func (g *exactGrid) move(cells int) {
	for j := range g.m {
		row := g.p[j*g.n : (j+1)*g.n]
		copy(row[cells:], row[:g.n-cells])
		clear(row[:cells])
	}
}

// spread gives the axis of entries stride apart a variance, by passes of
// weights v/2, 1-v, v/2 of neighbouring cells, v ≤ 1/3: mean and variance are
// exact, and at v = 1/3 the fourth moment is a normal distribution's.
func (g *exactGrid) spread(stride int, step, variance float64) {
	v := variance / step / step
	passes := int(math.Ceil(3 * v))
	v /= float64(passes)
	out := make([]float64, len(g.p))
	for range passes {
		for i, p := range g.p {
			out[i] = (1 - v) * p
			if i >= stride {
				out[i] += v / 2 * g.p[i-stride]
			}
			if i+stride < len(g.p) {
				out[i] += v / 2 * g.p[i+stride]
			}
		}
		g.p, out = out, g.p
	}
}

type moments5 struct{ x, y, xx, xy, yy float64 }

func (g *exactGrid) moments() (m moments5) {
	for j := range g.m {
		for i, v := range g.p[j*g.n : (j+1)*g.n] {
			m.x += v * (g.x0 + g.dx*float64(i))
			m.y += v * (g.y0 + g.dy*float64(j))
		}
	}
	for j := range g.m {
		for i, v := range g.p[j*g.n : (j+1)*g.n] {
			a, b := g.x0+g.dx*float64(i)-m.x, g.y0+g.dy*float64(j)-m.y
			m.xx += v * a * a
			m.xy += v * a * b
			m.yy += v * b * b
		}
	}
	return m
}

// divergence is Σ p ln(p/q) over (cell of the belief, nuisance), in nats: what
// merging by moments has lost of the shape. Within a cell it does not look,
// where the pieces that a wide Gaussian is cut into are Gaussians again. The
// grid's places are half a cell apart; one on an edge counts to both cells.
func (g *exactGrid) divergence(b *filter.Belief, nuisance int, widthM float64) float64 {
	cells := int(math.Round(g.dx * float64(g.n-1) / widthM))
	p, q := make([]float64, cells*g.m), make([]float64, cells*g.m)
	for j := range g.m {
		row := g.p[j*g.n:]
		for c := range cells {
			p[j*cells+c] = 0.5*row[2*c] + row[2*c+1] + 0.5*row[2*c+2]
		}
	}
	k := b.K()
	for i, key := range b.Key {
		_, cell := filter.LineCell(key)
		my, v := b.Mean[i*k+nuisance], b.Cov[i*k*(k+1)/2+filter.Packed(nuisance, nuisance)]
		norm := b.Mass[i] * g.dy / math.Sqrt(2*math.Pi*v)
		for j := range g.m {
			d := g.y0 + g.dy*float64(j) - my
			if d*d < 64*v {
				q[j*cells+int(cell)] += norm * math.Exp(-0.5*d*d/v)
			}
		}
	}
	kl := 0.0
	for i, v := range p {
		if v > 1e-12 {
			kl += v * math.Log(v/math.Max(q[i], 1e-30))
		}
	}
	return kl
}

// lineMoments is the same of a belief on one line.
func lineMoments(b *filter.Belief, place, nuisance int, widthM float64) (m moments5) {
	k := b.K()
	p := k * (k + 1) / 2
	at := func(i int) (x, y float64) {
		_, cell := filter.LineCell(b.Key[i])
		return (float64(cell)+0.5)*widthM + b.Mean[i*k+place], b.Mean[i*k+nuisance]
	}
	for i, v := range b.Mass {
		x, y := at(i)
		m.x += v * x
		m.y += v * y
	}
	for i, v := range b.Mass {
		x, y := at(i)
		c := b.Cov[i*p : i*p+p]
		m.xx += v * (c[filter.Packed(place, place)] + (x-m.x)*(x-m.x))
		m.xy += v * (c[filter.Packed(max(place, nuisance), min(place, nuisance))] + (x-m.x)*(y-m.y))
		m.yy += v * (c[filter.Packed(nuisance, nuisance)] + (y-m.y)*(y-m.y))
	}
	return m
}
