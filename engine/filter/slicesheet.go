package filter

import (
	"math"

	"leadline/engine/kernel"
)

// sheet is what a measurement says of positions, at nodes that are a cell of the
// slices apart along east and half a cell along north. Slices lie between its nodes,
// each with an offset of its own: along east the logs are read between nodes by
// cubics, which is exact for parabolas, for each velocity east; along north the
// densities.
type sheet struct {
	east, north   float64 // of node (0, 0)
	stepE, stepN  float64
	cols, rows    int32
	lo, hi        []int32 // the nodes of a row that are needed
	logs          []float64
	most, least   float64
	lik           []float64 // for one velocity east, cells from col on
	col, width    int32
	ones          []float64
	firstRow, end int32
	smooth        []bool // of a row: cubics can be trusted
}

// steepLogs is how much the logs of four nodes may differ for a cubic through them:
// where they differ more, as at an edge beyond which nothing is possible, a line does.
const steepLogs = 20.0

// lay sets the sheet's nodes around all that has mass, and evaluates the measurement
// at them.
func (b *Belief) lay(space PlaneSpace, l any, w *Workspace) {
	s, sh := &b.Slices, &w.slices.sheet
	sh.stepE, sh.stepN = s.SpacingM[0], s.SpacingM[1]/2
	lo, hi := s.box()
	sh.east, sh.north = lo[0]-2*sh.stepE, lo[1]-2*sh.stepN
	sh.cols = int32((hi[0]-sh.east)/sh.stepE) + 4
	sh.rows = int32((hi[1]-sh.north)/sh.stepN) + 4
	sh.need(s)
	sh.logs = resize(sh.logs, int(sh.cols)*int(sh.rows))
	sh.smooth = resize(sh.smooth, int(sh.rows))
	ev := newEvaluation(l, math.Max(s.SpacingM[0], s.SpacingM[1]))
	sh.most, sh.least = math.Inf(-1), math.Inf(1)
	for r := range sh.rows {
		lo, hi := sh.lo[r], sh.hi[r]
		if hi <= lo {
			continue
		}
		w.at.Resize(ev.wants, 2, int(hi-lo))
		for c := lo; c < hi; c++ {
			w.at.East[c-lo] = sh.east + float64(sh.stepE*float64(c))
			w.at.North[c-lo] = sh.north + float64(sh.stepN*float64(r))
		}
		space.Sample(&w.at)
		w.logsOf(&ev)
		row := sh.logs[int(r)*int(sh.cols):][lo:hi]
		for i, v := range w.cellLogs {
			if v != v || v > math.MaxFloat64 {
				panic("filter: a likelihood returned NaN or +Inf")
			}
			row[i] = v
			sh.most, sh.least = math.Max(sh.most, v), math.Min(sh.least, v)
		}
	}
	const impossible = 800 // nats: exp of it is 0
	for r := range sh.rows {
		row := sh.logs[int(r)*int(sh.cols):]
		sh.smooth[r] = true
		for c := sh.lo[r]; c < sh.hi[r]; c++ {
			row[c] = math.Max(row[c], sh.most-impossible)
			if c >= sh.lo[r]+3 {
				q := row[c-3 : c+1]
				if max(q[0], q[1], q[2], q[3])-min(q[0], q[1], q[2], q[3]) > steepLogs {
					sh.smooth[r] = false
				}
			}
		}
	}
}

// need finds the nodes that are around cells with mass.
func (sh *sheet) need(s *Slices) {
	sh.lo, sh.hi = resize(sh.lo, int(sh.rows)), resize(sh.hi, int(sh.rows))
	for r := range sh.lo {
		sh.lo[r], sh.hi[r] = math.MaxInt32, math.MinInt32
	}
	for i := range s.At {
		c := &s.At[i]
		row, _ := sh.rowOf(s, c)
		off := int32(math.Floor((s.origin(0, c.East) - sh.east) / sh.stepE))
		for k, r := range s.Rows[c.First : c.First+c.Count] {
			if r.Len > 0 {
				at := row + 2*int32(k)
				sh.lo[at], sh.hi[at] = min(sh.lo[at], off+r.Col-1), max(sh.hi[at], off+r.Col+r.Len+2)
			}
		}
	}
	// Each takes one row before and two after it.
	last := len(sh.lo) - 1
	sh.widen(last)
}

func (sh *sheet) widen(last int) {
	lo, hi := append([]int32(nil), sh.lo...), append([]int32(nil), sh.hi...)
	for r := range lo {
		for k := max(0, r-2); k <= min(last, r+1); k++ {
			sh.lo[r], sh.hi[r] = min(sh.lo[r], lo[k]), max(sh.hi[r], hi[k])
		}
		if sh.hi[r] > sh.lo[r] {
			sh.lo[r], sh.hi[r] = max(0, sh.lo[r]), min(sh.cols, sh.hi[r])
		}
	}
}

// rowOf is the row of nodes at or before a slice's first row, and how far beyond it
// that lies, in nodes.
func (sh *sheet) rowOf(s *Slices, c *Slice) (row int32, f float64) {
	t := (s.origin(1, c.North) + float64(s.SpacingM[1]*float64(c.Row)) - sh.north) / sh.stepN
	m := math.Floor(t)
	return int32(m), t - m
}

// readBetween sets sh.lik to the densities at the columns of the slices of the i-th
// velocity east, for the rows of nodes that they need; false if there are none.
func (sh *sheet) readBetween(ss *sliceSpace, s *Slices, i int32) bool {
	col, width := ss.columns(s, i)
	if width == 0 {
		return false
	}
	sh.col, sh.width = col, width
	top, bottom := int32(math.MaxInt32), int32(math.MinInt32)
	for j := range ss.count[1] {
		if k := ss.index[j*ss.count[0]+i]; k >= 0 {
			c := &s.At[k]
			row, _ := sh.rowOf(s, c)
			top, bottom = min(top, row-1), max(bottom, row+2*c.Count+1)
		}
	}
	top, bottom = max(top, 0), min(bottom, sh.rows)
	sh.firstRow, sh.end = top, bottom
	n := int(sh.width)
	sh.lik = resize(sh.lik, n*int(bottom-top))
	for len(sh.ones) < n {
		sh.ones = append(sh.ones, 1)
	}
	t := (s.origin(0, ss.low[0]+i) - sh.east) / sh.stepE
	m := math.Floor(t)
	shares := sharesOf(t-m, 0)
	off := int32(m) + col // the node at or before the first column
	for r := top; r < bottom; r++ {
		out := sh.lik[int(r-top)*n:][:n]
		// Columns whose four nodes are there.
		a, b := max(0, sh.lo[r]+1-off), min(sh.width, sh.hi[r]-2-off)
		clear(out)
		if b <= a {
			continue
		}
		logs := sh.logs[int(r)*int(sh.cols):]
		ss.lane = resize(ss.lane, int(b-a))
		lane := ss.lane
		clear(lane)
		from := off + a - 1
		if sh.smooth[r] {
			for k, share := range shares {
				if share != 0 {
					kernel.AddScaled(lane, logs[from+int32(k):][:len(lane)], share)
				}
			}
		} else {
			sh.careful(lane, logs[from:], t-m, shares)
		}
		kernel.Weigh(out[a:b], sh.ones[:len(lane)], lane, sh.most, 0)
	}
	return true
}

// careful reads logs between nodes where they may be steep.
func (sh *sheet) careful(dst, logs []float64, f float64, shares [4]float64) {
	for x := range dst {
		q := logs[x : x+4]
		v := q[1] + float64(f*(q[2]-q[1]))
		if max(q[0], q[1], q[2], q[3])-min(q[0], q[1], q[2], q[3]) <= steepLogs {
			v = float64(shares[0]*q[0]) + float64(shares[1]*q[1]) + float64(shares[2]*q[2]) + float64(shares[3]*q[3])
		}
		dst[x] = v
	}
}

// weigh writes what the measurement leaves of a slice into ss.out and returns the sum.
func (sh *sheet) weigh(ss *sliceSpace, s *Slices, c *Slice) (sum float64) {
	row, f := sh.rowOf(s, c)
	shares := sharesOf(f, 0)
	plain := true
	for i := range shares {
		plain = plain && shares[i] != 0
		shares[i] *= s.Scale
	}
	rows := s.Rows[c.First : c.First+c.Count]
	// Those of from up to to have all four rows of nodes.
	at, last := row-1-sh.firstRow, sh.end-sh.firstRow
	from, to := int32(0), int32(0)
	if plain {
		from = min(max(0, (1-at)/2), c.Count)
		to = max(from, min(c.Count, (last-at-2)/2))
	}
	for k := range from {
		sum += sh.weighRow(ss, s, &rows[k], at+2*k, shares[:])
	}
	n := int(sh.width)
	sum = kernel.WeighRows(sum, ss.out, s.Mass, rows[from:to], sh.lik, int(at+2*from)*n-int(sh.col), 2*n, n, &shares)
	for k := to; k < c.Count; k++ {
		sum += sh.weighRow(ss, s, &rows[k], at+2*k, shares[:])
	}
	return sum
}

// weighRow is weigh for a row whose first row of nodes is at, of which some may be
// missing.
func (sh *sheet) weighRow(ss *sliceSpace, s *Slices, r *SliceRow, at int32, shares []float64) float64 {
	if r.Len == 0 {
		return 0
	}
	n := sh.width
	starts, weights := ss.starts[:0], ss.weights[:0]
	for i, share := range shares {
		if o := at + int32(i); share != 0 && o >= 0 && o < sh.end-sh.firstRow {
			starts, weights = append(starts, int(o*n+r.Col-sh.col)), append(weights, share)
		}
	}
	ss.starts, ss.weights = starts, weights
	from, to := r.Start, r.Start+int(r.Len)
	return kernel.WeighBy(ss.out[from:to], s.Mass[from:to], sh.lik, starts, weights)
}
