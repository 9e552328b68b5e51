package filter

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// Slices hold the mass of a plane with velocity axes: a grid of four dimensions,
// east, north and the velocity along either. A slice is a velocity with a lattice
// of positions, of which the rows that have mass are kept, each from its first to
// its last cell.
//
// All slices of one velocity east share the place of their columns, all of one
// velocity north that of their rows, and both move as that velocity says, by any
// part of a cell: so what carries positions along spreads nothing. What passes
// from one velocity to another is shared out among the four nearest cells by
// weights that keep mass, mean and variance (sharesOf).
type Slices struct {
	// SpacingM and SpacingMPS are those along east and north.
	SpacingM, SpacingMPS [2]float64
	// BaseMPS is the velocity of the slices 0 along either axis.
	BaseMPS [2]float64
	// OriginM is where column 0 (row 0) lies for slices of the velocity Low,
	// Low+1, … east (north).
	Low     [2]int32
	OriginM [2][]float64
	At      []Slice // by velocity north, then east
	Rows    []SliceRow
	// Mass is that of the cells, each to be multiplied by Scale: what a measurement
	// makes of the sum is left to the next pass over the cells.
	Mass  []float64
	Scale float64
	// Pending is what the masses lack of the belief's covariance along either
	// axis: of the position, of both, of the velocity (m², m²/s, m²/s²). Noise
	// gathers there until it is worth a pass; what changing a spacing adds comes
	// off it.
	Pending [2][3]float64
}

// Slice is one velocity: its indices along either axis, its first row, where its
// rows are, and its mass in all.
type Slice struct {
	East, North, Row int32
	First, Count     int32
	Mass             float64
}

// SliceRow is the cells Col, Col+1, … of a row, a multiple of sliceLane, and where in
// Slices.Mass they are: slicePad cells of mass 0 are around them.
type SliceRow = kernel.Row

// sliceFloor is the mass of a cell at the end of a row below which it is dropped,
// and counted. There are many more cells to a tail than on a lattice of positions.
const sliceFloor = cellFloor

// Rows are as long as vectors are, so that nothing is left at their ends; and a row may
// be read as far beyond them as what it gives to the cells around it takes.
const (
	sliceLane = kernel.RowLane
	slicePad  = kernel.RowPad
)

// velocity is that of a slice's index along axis a.
func (s *Slices) velocity(a int, i int32) float64 {
	return s.BaseMPS[a] + float64(s.SpacingMPS[a]*float64(i))
}

func (s *Slices) origin(a int, i int32) float64 { return s.OriginM[a][i-s.Low[a]] }

// along is the index of a slice along axis a.
func (c *Slice) along(a int) int32 {
	if a == 0 {
		return c.East
	}
	return c.North
}

// row returns row k of a slice.
func (s *Slices) row(c *Slice, k int32) (SliceRow, []float64) {
	r := s.Rows[c.First+k]
	return r, s.Mass[r.Start : r.Start+int(r.Len)]
}

// cells is how many cells the rows have.
func (s *Slices) cells() int {
	n := 0
	for i := range s.Rows {
		n += int(s.Rows[i].Len)
	}
	return n
}

// box is where the outermost cells with mass lie along either axis, from the first
// cell's place to the one beyond the last.
func (s *Slices) box() (lo, hi [2]float64) {
	lo, hi = [2]float64{math.Inf(1), math.Inf(1)}, [2]float64{math.Inf(-1), math.Inf(-1)}
	for i := range s.At {
		c := &s.At[i]
		oE, oN := s.origin(0, c.East), s.origin(1, c.North)
		lo[1] = math.Min(lo[1], oN+float64(s.SpacingM[1]*float64(c.Row)))
		hi[1] = math.Max(hi[1], oN+float64(s.SpacingM[1]*float64(c.Row+c.Count)))
		if first, end := s.span(c); first < end {
			lo[0] = math.Min(lo[0], oE+float64(s.SpacingM[0]*float64(first)))
			hi[0] = math.Max(hi[0], oE+float64(s.SpacingM[0]*float64(end)))
		}
	}
	return lo, hi
}

// span is the first column of a slice's rows, and the one beyond the last; of no cells the
// former is the greater.
func (s *Slices) span(c *Slice) (first, end int32) {
	first, end = math.MaxInt32, math.MinInt32
	rows := s.Rows[c.First : c.First+c.Count]
	for i := range rows {
		if r := &rows[i]; r.Len > 0 {
			first, end = min(first, r.Col), max(end, r.Col+r.Len)
		}
	}
	return first, end
}

func (s *Slices) clone() Slices {
	c := *s
	for a := range 2 {
		c.OriginM[a] = append([]float64(nil), s.OriginM[a]...)
	}
	c.At = append([]Slice(nil), s.At...)
	c.Rows = append([]SliceRow(nil), s.Rows...)
	c.Mass = append([]float64(nil), s.Mass...)
	return c
}

// Whole reports whether the columns fit together, for what was read from
// elsewhere.
func (s *Slices) Whole() bool {
	if !(s.Scale > 0) {
		return false
	}
	for a := range 2 {
		if !(s.SpacingM[a] > 0 && s.SpacingMPS[a] > 0) || !geo.Finite(s.SpacingM[a], s.SpacingMPS[a], s.BaseMPS[a]) {
			return false
		}
	}
	for i := range s.At {
		c := &s.At[i]
		for a := range 2 {
			if at := int64(c.along(a)) - int64(s.Low[a]); at < 0 || at >= int64(len(s.OriginM[a])) {
				return false
			}
		}
		if c.First < 0 || c.Count < 0 || int64(c.First)+int64(c.Count) > int64(len(s.Rows)) {
			return false
		}
	}
	for _, r := range s.Rows {
		if r.Len < 0 || r.Len%sliceLane != 0 || r.Start < slicePad || r.Start > len(s.Mass)-slicePad-int(r.Len) {
			return false
		}
	}
	return true
}

// StateMoments are the mean and covariance (packed) of east, north, velocity east,
// velocity north, with their mass.
type StateMoments struct {
	Mass float64
	Mean [4]float64
	Cov  [10]float64
}

// moments are those of the belief: what is pending counts.
func (s *Slices) moments() StateMoments {
	m := s.massMoments()
	for a := range 2 {
		m.Cov[Packed(a, a)] += s.Pending[a][0]
		m.Cov[Packed(2+a, a)] += s.Pending[a][1]
		m.Cov[Packed(2+a, 2+a)] += s.Pending[a][2]
	}
	return m
}

// massMoments are those of the masses alone, about a point near by, so that far-off
// frames cost no digits.
func (s *Slices) massMoments() (m StateMoments) {
	parts := make([]StateMoments, len(s.At))
	for i := range s.At {
		c := &s.At[i]
		p := &parts[i]
		*p = s.sliceMoments(c)
		m.Mass += p.Mass
	}
	if m.Mass == 0 {
		return m
	}
	ref := parts[0].Mean
	for i := range parts {
		for d := range ref {
			m.Mean[d] += float64(parts[i].Mass / m.Mass * (parts[i].Mean[d] - ref[d]))
		}
	}
	for i := range parts {
		p := &parts[i]
		share := p.Mass / m.Mass
		var off [4]float64
		for d := range off {
			off[d] = p.Mean[d] - ref[d] - m.Mean[d]
			for e := range d + 1 {
				m.Cov[Packed(d, e)] += float64(share * (p.Cov[Packed(d, e)] + float64(off[d]*off[e])))
			}
		}
	}
	for d := range ref {
		m.Mean[d] += ref[d]
	}
	m.Mass *= s.Scale
	return m
}

// sliceMoments are those of one slice.
func (s *Slices) sliceMoments(c *Slice) (m StateMoments) {
	hE, hN := s.SpacingM[0], s.SpacingM[1]
	var s0, e, n, ee, en, nn float64 // in cells from the slice's first row and column 0
	for k := range c.Count {
		r, mass := s.row(c, k)
		var r0, r1, r2 float64
		for x, v := range mass {
			f := float64(x)
			r0 += v
			v *= f
			r1 += v
			r2 += float64(v * f)
		}
		col, y := float64(r.Col), float64(k)
		first := r1 + float64(col*r0)
		s0 += r0
		e += first
		n += float64(y * r0)
		ee += r2 + float64(2*col*r1) + float64(float64(col*col)*r0)
		en += float64(y * first)
		nn += float64(float64(y*y) * r0)
	}
	m.Mass = s0
	m.Mean = [4]float64{s.origin(0, c.East), s.origin(1, c.North), s.velocity(0, c.East), s.velocity(1, c.North)}
	if s0 == 0 {
		return m
	}
	e /= s0
	n /= s0
	m.Mean[0] += float64(hE * e)
	m.Mean[1] += float64(hN * (n + float64(c.Row)))
	m.Cov[Packed(0, 0)] = float64(hE * hE * math.Max(0, ee/s0-float64(e*e)))
	m.Cov[Packed(1, 0)] = float64(hE * hN * (en/s0 - float64(e*n)))
	m.Cov[Packed(1, 1)] = float64(hN * hN * math.Max(0, nn/s0-float64(n*n)))
	return m
}

// shift moves all places by d.
func (s *Slices) shift(a int, d float64) {
	for i := range s.OriginM[a] {
		s.OriginM[a][i] += d
	}
}

// sharesOf are the weights of the cells -1, 0, 1, 2 for mass that comes to a place f
// of a cell beyond cell 0, 0 ≤ f < 1, with a variance of v cells²: mass, mean,
// variance and the third moment are those of a Gaussian there. They are the means of
// Lagrange's cubics over it, and not all positive.
func sharesOf(f, v float64) [4]float64 {
	m2 := float64(f*f) + v
	m3 := float64(f*f*f) + float64(3*f*v)
	return [4]float64{
		(3*m2 - m3 - 2*f) / 6,
		(m3 - 2*m2 - f + 2) / 2,
		(m2 - m3 + 2*f) / 2,
		(m3 - f) / 6,
	}
}

// threeSharesOf are the weights of the cells -1, 0, 1 for mass that comes to a place f of
// a cell beyond cell 0, |f| ≤ 1/2, with a variance of v cells²: mass, mean and variance
// are those of a Gaussian there. What passes to the next velocity on either side lies
// nearly as far beyond a cell as short of one, so that third moments cancel; and a
// cell more would make a step longer by a fifth.
func threeSharesOf(f, v float64) [3]float64 {
	m2 := float64(f*f) + v
	return [3]float64{0.5 * (m2 - f), 1 - m2, 0.5 * (m2 + f)}
}

// CellsApart is by how many cells of positions neighbouring velocities come apart in t
// seconds.
func (s *Slices) CellsApart(t float64) float64 {
	return math.Max(s.SpacingMPS[0]*t/s.SpacingM[0], s.SpacingMPS[1]*t/s.SpacingM[1])
}

// total is the sum of the slices' masses, not scaled.
func (s *Slices) total() (sum float64) {
	for i := range s.At {
		sum += s.At[i].Mass
	}
	return sum
}

// rescale makes the masses add up to 1.
func (s *Slices) rescale() { s.Scale = 1 / s.total() }
