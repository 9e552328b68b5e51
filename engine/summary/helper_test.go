package summary

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// origin is far enough from the equator for true and frame north to differ.
var testFrame = geo.NewFrame(geo.FromDegrees(11.4, 47.2))

// gauss is one Gaussian of a test's mixture.
type gauss struct {
	m, e, n float64
	c       Cov
}

// planeInput is a belief over east and north on a plane.
func planeInput(gs []gauss) *Input {
	b := &filter.Belief{
		Map: "plane", Dim: 2, Lattice: filter.Lattice{SpacingM: 1},
		Quantities: []filter.Quantity{{Name: filter.East}, {Name: filter.North}},
	}
	c := new(filter.Cloud)
	for i, g := range gs {
		b.Key = append(b.Key, uint64(i))
		b.Cov = append(b.Cov, g.c.EE, g.c.EN, g.c.NN)
		c.Mean = append(c.Mean, 0, 0)
		c.East, c.North = append(c.East, g.e), append(c.North, g.n)
		c.Mass = append(c.Mass, g.m)
		c.VarEE, c.VarEN, c.VarNN = append(c.VarEE, g.c.EE), append(c.VarEN, g.c.EN), append(c.VarNN, g.c.NN)
	}
	b.Mass = c.Mass
	return &Input{Frame: testFrame, Belief: b, Cloud: c}
}

// latticeInput is a belief on the cells of a lattice of n × n around a point,
// with the masses of a Gaussian of the given sigma.
func latticeInput(n int, spacing, sigma float64, at geo.Point) *Input {
	b := &filter.Belief{Map: "plane", Dim: 2}
	b.Lattice = filter.Lattice{Origin: at, SpacingM: spacing}
	c := new(filter.Cloud)
	sum := 0.0
	for row := range n {
		for col := range n {
			p := b.Lattice.Centre(int32(col-n/2), int32(row-n/2))
			m := math.Exp(-0.5 * (p.Sub(at).Norm() / sigma) * (p.Sub(at).Norm() / sigma))
			c.East, c.North = append(c.East, p.E), append(c.North, p.N)
			c.Mass = append(c.Mass, m)
			sum += m
		}
	}
	h2 := spacing * spacing / 12
	for i := range c.Mass {
		c.Mass[i] /= sum
		c.VarEE, c.VarEN, c.VarNN = append(c.VarEE, h2), append(c.VarEN, 0), append(c.VarNN, h2)
	}
	return &Input{Frame: testFrame, Belief: b, Cloud: c}
}

// road is a straight chart of a test's map.
type road struct {
	from, to geo.Point
	name     string
	twin     int32
}

type roads []road

func (r roads) Name(chart int32) string { return r[chart].name }
func (r roads) Twin(chart int32) int32  { return r[chart].twin }

// part is one Gaussian along a chart; it is cut at cell edges.
type part struct {
	chart           int32
	m, along, sigma float64
}

// roadInput puts parts on the cells of a road map: each cell gets the mass,
// mean and variance of its piece of each part (moments of a truncated normal).
func roadInput(r roads, widthM float64, parts []part) *Input {
	l := &filter.Lines{}
	for _, x := range r {
		length := x.to.Sub(x.from).Norm()
		n := math.Ceil(length/widthM - 1e-9)
		l.LengthM = append(l.LengthM, length)
		l.Cells = append(l.Cells, int32(n))
		l.WidthM = append(l.WidthM, length/n)
	}
	b := &filter.Belief{
		Map: "roads", Dim: 1,
		Quantities: []filter.Quantity{{Name: filter.Along}, {Name: filter.Heading, Angular: true}, {Name: filter.OdometerScale}},
	}
	c := new(filter.Cloud)
	phi := func(x float64) float64 { return math.Exp(-x*x/2) / math.Sqrt(2*math.Pi) }
	cdf := func(x float64) float64 { return 0.5 * math.Erfc(-x/math.Sqrt2) }
	for chart := range r {
		t := r[chart].to.Sub(r[chart].from)
		length := t.Norm()
		t = geo.Point{E: t.E / length, N: t.N / length}
		for cell := range l.Cells[chart] {
			for _, p := range parts {
				if int(p.chart) != chart {
					continue
				}
				w := l.WidthM[chart]
				a, z := (float64(cell)*w-p.along)/p.sigma, (float64(cell+1)*w-p.along)/p.sigma
				q := cdf(z) - cdf(a)
				if a > 0 {
					q = cdf(-a) - cdf(-z)
				}
				if q*p.m < 1e-13 {
					continue
				}
				mean := (phi(a) - phi(z)) / q
				v := p.sigma * p.sigma * (1 + (a*phi(a)-z*phi(z))/q - mean*mean)
				if d := z - a; d < 0.01 {
					// The differences cancel; the density is linear here.
					mean = 0.5 * (a + z) * (1 - d*d/12)
					v = w * w / 12
				}
				along := p.along + p.sigma*mean
				c.Chart = append(c.Chart, int32(chart))
				c.AlongM = append(c.AlongM, along)
				c.VarM2 = append(c.VarM2, v)
				c.East = append(c.East, r[chart].from.E+t.E*along)
				c.North = append(c.North, r[chart].from.N+t.N*along)
				c.VarEE, c.VarEN, c.VarNN = append(c.VarEE, v*t.E*t.E), append(c.VarEN, v*t.E*t.N), append(c.VarNN, v*t.N*t.N)
				c.Mass = append(c.Mass, q*p.m)
				c.Mean = append(c.Mean, along-(float64(cell)+0.5)*w, geo.Heading(t), 0.01)
				b.Key = append(b.Key, filter.LineKey(int32(chart), cell))
				b.Cov = append(b.Cov, v, 0, 1e-4, 0, 0, 4e-6)
			}
		}
	}
	b.Mass = c.Mass
	return &Input{Frame: testFrame, Belief: b, Cloud: c, Lines: l, Names: r}
}

// summarize fails the test on an error.
func summarize(t testing.TB, opt Options, in *Input) (*Summarizer, *Posterior) {
	t.Helper()
	s, err := New(opt)
	if err != nil {
		t.Fatal(err)
	}
	p := new(Posterior)
	if err := s.Summarize(p, in); err != nil {
		t.Fatal(err)
	}
	return s, p
}

// draw returns points of a mixture.
func draw(rng *rand.Rand, gs []gauss, n int) []geo.Point {
	out := make([]geo.Point, n)
	for i := range out {
		u := rng.Float64()
		k := 0
		for ; k < len(gs)-1 && u >= gs[k].m; k++ {
			u -= gs[k].m
		}
		g := gs[k]
		// Lower Cholesky factor.
		a := math.Sqrt(g.c.EE)
		b := 0.0
		if a > 0 {
			b = g.c.EN / a
		}
		d := math.Sqrt(math.Max(g.c.NN-b*b, 0))
		x, y := rng.NormFloat64(), rng.NormFloat64()
		out[i] = geo.Point{E: g.e + a*x, N: g.n + b*x + d*y}
	}
	return out
}

// mixture is what the Summarizer made of its input.
func mixture(s *Summarizer) []gauss {
	out := make([]gauss, len(s.mass))
	for i := range out {
		out[i] = gauss{s.mass[i], s.east[i], s.north[i], s.covs[i]}
	}
	return out
}

// scaleAt is frame length over true length.
func scaleAt(p geo.Point) float64 { _, k := testFrame.Convergence(p); return k }
