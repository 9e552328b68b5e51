package traffic

import (
	"math"
)

// grid is a density over position along the road and signed speed: slices of one
// speed each, whose masses stand for the vehicle at evenly spaced positions. Each
// slice has an origin of its own, which is no multiple of the spacing, so that
// what moves with its speed moves exactly.
type grid struct {
	stepM    float64
	stepMPS  float64
	firstMPS float64 // speed of the first slice
	slices   []slice
	spare    []float64 // for the masses of the next slices
	cells    []float64 // what the slices' masses lie in
}

type slice struct {
	fromM float64 // position of the first mass
	mass  []float64
}

func (g *grid) speed(k int) float64 { return g.firstMPS + float64(float64(k)*g.stepMPS) }

// count is how many cells there are.
func (g *grid) count() (n int) {
	for _, s := range g.slices {
		n += len(s.mass)
	}
	return n
}

func (g *grid) total() (sum float64) {
	for _, s := range g.slices {
		for _, m := range s.mass {
			sum += m
		}
	}
	return sum
}

func (g *grid) scale(by float64) {
	for _, s := range g.slices {
		for i := range s.mass {
			s.mass[i] *= by
		}
	}
}

// reach of the kernel that moves masses between slices.
const reach = 2

// weights are the five that move a mass by f cells, |f| ≤ ½, and spread it by a
// variance in cells²: with moments m1 to m4 those of N(f, v), the Lagrange
// polynomials of the nodes -2 … 2 in them. The four moments are exact, so that
// a smooth density is moved without a spread of the grid's own; some weights
// are below zero.
func weights(f, v float64) (w [2*reach + 1]float64) {
	f2 := float64(f * f)
	m2 := f2 + v
	m3 := float64(f * (f2 + float64(3*v)))
	m4 := float64(f2*(f2+float64(6*v))) + float64(3*float64(v*v))
	a, b := float64(float64(2.0/3)*m2)-m4/6, float64(float64(2.0/3)*f)-m3/6
	c, d := (m4-m2)/24, (m3-f)/12
	return [5]float64{c - d, a - b, 1 - float64(1.25*m2) + float64(0.25*m4), a + b, c + d}
}

// add adds to a slice weight times another one's masses, moved by shiftM and
// spread by a variance; the slice must be wide enough, by reach cells.
func (d slice) add(src slice, stepM, shiftM, varianceM2, weight float64) {
	at := (src.fromM + shiftM - d.fromM) / stepM
	n := math.Round(at)
	w := weights(at-n, varianceM2/float64(stepM*stepM))
	for i := range w {
		w[i] *= weight
	}
	dst := d.mass[int(n)-reach:][:len(src.mass)+2*reach]
	if w[0] == 0 && w[1] == 0 && w[3] == 0 && w[4] == 0 {
		for i, m := range src.mass {
			dst[i+reach] += float64(w[2] * m)
		}
		return
	}
	n1 := len(src.mass)
	at1 := func(i int) float64 {
		if i < 0 || i >= n1 {
			return 0
		}
		return src.mass[i]
	}
	sum := func(i int) float64 { // dst[i] hears of src[i-4 … i]
		s := float64(w[4]*at1(i-4)) + float64(w[3]*at1(i-3))
		s += float64(w[2] * at1(i-2))
		s += float64(w[1] * at1(i-1))
		return s + float64(w[0]*at1(i))
	}
	for i := range min(4, len(dst)) {
		dst[i] += sum(i)
	}
	for i := 4; i < n1; i++ {
		m := src.mass[i-4 : i+1 : i+1]
		s := float64(w[4]*m[0]) + float64(w[3]*m[1])
		s += float64(w[2] * m[2])
		s += float64(w[1] * m[3])
		dst[i] += s + float64(w[0]*m[4])
	}
	for i := max(4, n1); i < len(dst); i++ {
		dst[i] += sum(i)
	}
}

// transfer is a move of one slice's masses onto another.
type transfer struct {
	to             int // of the next slices
	shiftM, weight float64
}

// layout is where the next slices lie: their positions, and how many cells.
type layout struct{ low, high []float64 }

func (l *layout) reset(n int) {
	if cap(l.low) < n {
		l.low, l.high = make([]float64, n), make([]float64, n)
	}
	l.low, l.high = l.low[:n], l.high[:n]
	for k := range n {
		l.low[k], l.high[k] = math.Inf(1), math.Inf(-1)
	}
}

// rebuild makes n next slices out of the present ones: every slice k gives what
// moves(k) says, all with one variance. origin(k) is a position of the next
// slice's lattice, whose spacing is the present one. It returns what negative
// weights had left below zero, which is put to zero; else the sum is kept.
func (g *grid) rebuild(w *work, n int, varianceM2 float64, origin func(k int) float64, moves func(k int) []transfer) (clipped float64) {
	w.layout.reset(n)
	low, high := w.layout.low, w.layout.high
	for k, s := range g.slices {
		if len(s.mass) == 0 {
			continue
		}
		for _, t := range moves(k) {
			from := s.fromM + t.shiftM
			low[t.to] = math.Min(low[t.to], from)
			high[t.to] = math.Max(high[t.to], from+float64(float64(len(s.mass)-1)*g.stepM))
		}
	}
	next, cells := make([]slice, n), 0
	for k := range next {
		if low[k] > high[k] {
			continue
		}
		o := origin(k)
		first := math.Floor((low[k]-o)/g.stepM) - reach
		size := int(math.Ceil((high[k]-o)/g.stepM)-first) + reach + 1
		next[k].fromM, low[k] = o+float64(first*g.stepM), float64(cells)
		cells += size
		high[k] = float64(cells)
	}
	if cap(g.spare) < cells {
		g.spare = make([]float64, cells+cells/4)
	}
	buffer := g.spare[:cells]
	clear(buffer)
	for k := range next {
		if low[k] < high[k] {
			next[k].mass = buffer[int(low[k]):int(high[k]):int(high[k])]
		}
	}
	for k, s := range g.slices {
		if len(s.mass) == 0 {
			continue
		}
		for _, t := range moves(k) {
			next[t.to].add(s, g.stepM, t.shiftM, varianceM2, t.weight)
		}
	}
	for i, m := range buffer {
		if m < 0 {
			clipped -= m
			buffer[i] = 0
		}
	}
	g.slices, g.spare, g.cells = next, g.cells, buffer
	return clipped
}

// trim takes off the cells at the ends of slices, and the slices at the ends,
// that have no more than a part of the greatest mass, and says what they had.
func (g *grid) trim() (pruned float64) {
	most := 0.0
	for _, s := range g.slices {
		for _, m := range s.mass {
			most = max(most, m)
		}
	}
	least := float64(most * negligible)
	for k := range g.slices {
		s := &g.slices[k]
		lo, hi := 0, len(s.mass)
		for lo < hi && s.mass[lo] <= least {
			pruned += s.mass[lo]
			lo++
		}
		for lo < hi && s.mass[hi-1] <= least {
			hi--
			pruned += s.mass[hi]
		}
		s.fromM += float64(float64(lo) * g.stepM)
		s.mass = s.mass[lo:hi]
	}
	lo, hi := 0, len(g.slices)
	for lo < hi && len(g.slices[lo].mass) == 0 {
		lo++
	}
	for lo < hi && len(g.slices[hi-1].mass) == 0 {
		hi--
	}
	g.firstMPS = g.speed(lo)
	g.slices = g.slices[lo:hi]
	return pruned
}

// negligible is the part of the greatest mass from which on a cell counts: of a
// normal distribution what lies beyond 6.8 sigma.
const negligible = 1e-10

// work is what grids share between calls.
type work struct {
	layout    layout
	transfers []transfer
	kernel    []float64
	factors   []float64
}
