package filter

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// margin spells the positions of slices out as a lattice without velocities, into
// ss.margin: with the finer of the two spacings, the same moments, and what is pending
// as a surplus below 0.
func (b *Belief) margin(ss *sliceSpace) *Belief {
	s, m := &b.Slices, &ss.margin
	lo, hi := s.box()
	cols := int(math.Ceil((hi[0]-lo[0])/s.SpacingM[0])) + 4
	rows := int(math.Ceil((hi[1]-lo[1])/s.SpacingM[1])) + 4
	origin := geo.Point{E: lo[0] - 2*s.SpacingM[0], N: lo[1] - 2*s.SpacingM[1]}
	flat := resize(ss.flat, cols*rows)
	clear(flat)
	ss.flat = flat
	// Of one velocity east first: their columns are the same.
	ss.indexSlices(s)
	for i := range ss.count[0] {
		ss.marginOf(s, i, flat, cols, rows, origin)
	}
	h := math.Min(s.SpacingM[0], s.SpacingM[1])
	hE, hN := s.SpacingM[0], s.SpacingM[1]
	for hE > 1.5*h {
		flat, cols = halveAcross(flat, cols, rows)
		hE /= 2
		origin.E -= refineReach * hE
	}
	for hN > 1.5*h {
		flat, rows = halveDown(flat, cols, rows)
		hN /= 2
		origin.N -= refineReach * hN
	}
	m.Map, m.Dim, m.Lattice = b.Map, 2, Lattice{origin, h}
	m.Tiles.Surplus = [3]float64{-s.Pending[0][0], 0, -s.Pending[1][0]}
	m.fill(flat, cols, rows)
	b.Lattice = m.Lattice
	return m
}

// marginOf adds the slices of the i-th velocity east to flat.
func (ss *sliceSpace) marginOf(s *Slices, i int32, flat []float64, cols, rows int, origin geo.Point) {
	var sum []float64
	var col, width int32
	for j := range ss.count[1] {
		k := ss.index[j*ss.count[0]+i]
		if k < 0 {
			continue
		}
		if sum == nil {
			if col, width = ss.columns(s, i); width == 0 {
				return
			}
			ss.lane = resize(ss.lane, rows*int(width))
			sum = ss.lane
			clear(sum)
		}
		c := &s.At[k]
		t := (s.origin(1, c.North)-origin.N)/s.SpacingM[1] + float64(c.Row)
		m := math.Floor(t)
		for q, share := range sharesOf(t-m, 0) {
			if share == 0 {
				continue
			}
			first := int32(m) + int32(q) - 1
			for r := range c.Count {
				row, mass := s.row(c, r)
				if row.Len > 0 {
					o := int(first+r)*int(width) + int(row.Col-col)
					kernel.AddScaled(sum[o:o+int(row.Len)], mass, share*s.Scale)
				}
			}
		}
	}
	if sum == nil {
		return
	}
	t := (s.origin(0, ss.low[0]+i)-origin.E)/s.SpacingM[0] + float64(col)
	m := math.Floor(t)
	for q, share := range sharesOf(t-m, 0) {
		first := int(m) + q - 1
		for r := range rows {
			kernel.AddScaled(flat[r*cols+first:][:width], sum[r*int(width):][:width], share)
		}
	}
}

// columns are the first column and how many there are of the slices of the i-th
// velocity east.
func (ss *sliceSpace) columns(s *Slices, i int32) (col, width int32) {
	lo, hi := int32(math.MaxInt32), int32(math.MinInt32)
	for j := range ss.count[1] {
		if k := ss.index[j*ss.count[0]+i]; k >= 0 {
			c := &s.At[k]
			first, end := s.span(c)
			lo, hi = min(lo, first), max(hi, end)
		}
	}
	return lo, max(0, hi-lo)
}

// halveAcross and halveDown double the resolution of a plain grid along its columns
// or rows.
func halveAcross(flat []float64, cols, rows int) (out []float64, n int) {
	n = 2*cols - 1 + 2*refineReach
	out = make([]float64, n*rows)
	for r := range rows {
		for c, v := range flat[r*cols : (r+1)*cols] {
			for k, share := range halvingShares {
				out[r*n+2*c+k] += float64(share * v)
			}
		}
	}
	return out, n
}

func halveDown(flat []float64, cols, rows int) (out []float64, n int) {
	n = 2*rows - 1 + 2*refineReach
	out = make([]float64, cols*n)
	for r := range rows {
		for k, share := range halvingShares {
			kernel.AddScaled(out[(2*r+k)*cols:][:cols], flat[r*cols:(r+1)*cols], share)
		}
	}
	return out, n
}

// fill makes tiles of a plain grid; what is below 0 is nothing, the rest adds up to
// what it was.
func (b *Belief) fill(flat []float64, cols, rows int) {
	t := &b.Tiles
	across, down := (cols+TileSide-1)/TileSide, (rows+TileSide-1)/TileSide
	t.At, t.Mass = t.At[:0], resize(t.Mass, across*down*tileCells)
	clear(t.Mass)
	sum, positives := 0.0, 0.0
	for r := range down {
		for c := range across {
			t.At = append(t.At, TileAt{int32(c), int32(r)})
		}
	}
	for r := range rows {
		for c, v := range flat[r*cols : (r+1)*cols] {
			sum += v
			if v > 0 {
				positives += v
				t.Mass[(r/TileSide*across+c/TileSide)*tileCells+r%TileSide*TileSide+c%TileSide] = v
			}
		}
	}
	again := sum / positives
	for i, v := range t.Mass {
		if t.Mass[i] = v * again; t.Mass[i] < cellFloor {
			t.Mass[i] = 0
		}
	}
	b.dropEmptyTiles()
}

// foretellSlices is what weighTiles does for who asked where a measurement falls, on the
// positions alone.
func (b *Belief) foretellSlices(space PlaneSpace, l any, w *Workspace) {
	b.margin(&w.slices).weighTiles(space, l, false, w)
}
