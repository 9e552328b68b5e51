package filter

import (
	"math"

	"leadline/engine/kernel"
)

// sliceSpace is the memory for working on slices.
type sliceSpace struct {
	spare  Slices
	index  []int32  // of a velocity in the source's At, -1 for none
	low    [2]int32 // the velocities of what is made
	count  [2]int32
	from   [2]int32 // those that index is over
	across [2]int32
	taps   []sliceTap
	weight [2][]float64
	// stir's: slices of one velocity north between the two axes, and which there are.
	between Slices
	line    []int32
	dropped float64
	lo, hi  []int32 // the cells of a new slice's rows
	// What gatherRow takes.
	starts  []int
	weights []float64
	partial []partial
	sheet   sheet
	lane    []float64
	last    []float64
	out     []float64 // masses that a measurement leaves, left by slice
	left    []float64
	margin  Belief
	flat    []float64
}

// sliceTap is a source's slice, shifted by rows and cols and weighed; of which there are
// count, each a column farther than the one before.
type sliceTap struct {
	slice             int32
	cols, rows, count int32
	weight            [4]float64
}

func oneTap(slice, cols, rows int32, weight float64) sliceTap {
	return sliceTap{slice, cols, rows, 1, [4]float64{weight}}
}

// Noise waits (Slices.Pending) until the variance of the velocity is pendingShare of
// a cell², or that of the position alone pendingAlone: belief and masses then
// differ by less than 1 % of their variance, which is that of two cells or more.
const (
	pendingShare = 0.02
	pendingAlone = 0.01
)

// predictSlices moves the slices and passes mass between them. A step is over east,
// north and their velocities; each axis is moved by itself,
//
//	x' = x + a·v + add, v' = c·v + add, with noise (xx, xv, vv),
//
// and only the noise of the two positions may be correlated between the axes.
func (b *Belief) predictSlices(step Step, w *Workspace) {
	s, ss := &b.Slices, &w.slices
	cross := step.Q[Packed(1, 0)]
	for i := range 4 {
		for j := range i {
			if i%2 != j%2 && !(i == 1 && j == 0) && step.Q[Packed(i, j)] != 0 {
				panic("filter: noise of a velocity that is correlated with the other axis")
			}
		}
	}
	for a := range 2 {
		by, keep := 0.0, 1.0
		if step.F != nil {
			by, keep = step.F[a*4+2+a], step.F[(2+a)*4+2+a]
		}
		if !(keep > 0) {
			panic("filter: a step that turns velocities round")
		}
		for i := range s.OriginM[a] {
			s.OriginM[a][i] += float64(by*s.velocity(a, s.Low[a]+int32(i))) + step.Add[a]
		}
		s.BaseMPS[a] = float64(keep*s.BaseMPS[a]) + step.Add[2+a]
		s.SpacingMPS[a] *= keep
		p := &s.Pending[a]
		xx, xv, vv := p[0], p[1], p[2]
		p[0] = xx + float64(2*by*xv) + float64(by*by*vv) + step.Q[Packed(a, a)]
		p[1] = float64(keep*(xv+float64(by*vv))) + step.Q[Packed(2+a, a)]
		p[2] = float64(keep*keep*vv) + step.Q[Packed(2+a, 2+a)]
	}
	if cross != 0 {
		b.spreadSlices(ss, cross)
	}
	b.stir(ss)
}

// stir passes what is pending on to the masses: from velocity to velocity, each by as
// much farther as noise that gives such a change of velocity moves the position on
// average, and beside that what the position's noise has left. Both axes are done for
// one velocity north after the other, so that what lies between is in the cache.
func (b *Belief) stir(ss *sliceSpace) {
	var p [2]stirring
	for a := range p {
		p[a] = b.prepare(ss, a)
	}
	if !p[0].any && !p[1].any {
		return
	}
	s := &b.Slices
	ss.begin(s, 0, p[0].reach())
	ss.widen(s, 1, p[1].reach())
	dst, row := &ss.spare, &ss.between
	row.OriginM[0], row.Low[0] = s.OriginM[0], s.Low[0]
	row.OriginM[1], row.Low[1] = dst.OriginM[1], dst.Low[1]
	row.SpacingM, row.Scale = s.SpacingM, 1
	for j := range ss.count[1] {
		north := ss.low[1] + j
		from, scale := s, s.Scale
		ss.lineUp(north)
		if p[1].any {
			row.At, row.Rows, row.Mass = row.At[:0], row.Rows[:0], row.Mass[:0]
			for i := range ss.across[0] {
				east := ss.from[0] + i
				ss.line[i] = -1
				ss.taps = ss.taps[:0]
				p[1].each(func(n int32, weight float64) {
					ss.stirFrom(s, dst, ss.find([2]int32{east, north - n}), 1, north, n, &p[1], weight*s.Scale)
				})
				if ss.gather(row, s, [2]int32{east, north}, sliceFloor) {
					ss.line[i] = int32(len(row.At)) - 1
				}
			}
			from, scale = row, 1
		}
		for i := range ss.count[0] {
			east := ss.low[0] + i
			ss.taps = ss.taps[:0]
			p[0].each(func(n int32, weight float64) {
				k := int32(-1)
				if c := east - n - ss.from[0]; c >= 0 && c < ss.across[0] {
					k = ss.line[c]
				}
				ss.stirFrom(from, dst, k, 0, east, n, &p[0], weight*scale)
			})
			ss.gather(dst, from, [2]int32{east, north}, sliceFloor)
		}
	}
	b.Slices, ss.spare = ss.spare, b.Slices
	b.Slices.Scale = 1
	b.Pruned += math.Max(0, ss.dropped)
	ss.dropped = 0
	for a := range p {
		q := &b.Slices.Pending[a]
		if p[a].within > 0 {
			q[0] -= p[a].rest
		}
		if p[a].turn {
			*q = [3]float64{q[0] - float64(q[1]*p[a].lag), 0, 0}
		}
	}
}

// stirring is what is to be done along one axis: the weights of velocities 0, ±1, … away,
// by how many metres one m/s takes the position along, and the variance, cells², that
// comes beside.
type stirring struct {
	any, turn   bool
	weight      []float64
	lag, within float64
	rest        float64
}

func (p *stirring) reach() int32 { return int32(len(p.weight) - 1) }

// each calls use for the velocities from -reach to reach.
func (p *stirring) each(use func(n int32, weight float64)) {
	for n := -p.reach(); n <= p.reach(); n++ {
		use(n, p.weight[max(n, -n)])
	}
}

// prepare says what is to be done along axis a; a spread that four cells cannot take is
// done before.
func (b *Belief) prepare(ss *sliceSpace, a int) (p stirring) {
	s := &b.Slices
	h, hv := s.SpacingM[a], s.SpacingMPS[a]
	q := &s.Pending[a]
	p.turn = q[2] >= pendingShare*hv*hv
	p.lag, p.rest = lagOf(*q), rest(*q)
	least := pendingAlone
	if p.turn {
		least /= 10 // there is a pass anyway
	}
	if p.rest >= least*h*h {
		p.within = p.rest / (h * h)
	}
	if p.within > mostWithin {
		b.spreadAlong(ss, [2]int32{1 - int32(a), int32(a)}, p.within)
		s.Pending[a][0] -= p.rest
		p.within = 0
	}
	p.weight = append(ss.weight[a][:0], 1)
	if p.turn {
		p.weight = kernelOf(p.weight, s.Pending[a][2]/(hv*hv))
	}
	ss.weight[a] = p.weight
	p.any = p.turn || p.within > 0
	return p
}

// stirFrom adds what slice k of from, n velocities before index along axis a, leaves.
func (ss *sliceSpace) stirFrom(from, dst *Slices, k int32, a int, index, n int32, p *stirring, weight float64) {
	if k < 0 || weight*math.Abs(from.At[k].Mass) < sliceFloor {
		return
	}
	d := 0.0
	if n != 0 {
		d = (from.origin(a, index-n) - dst.origin(a, index) + float64(float64(n)*float64(dst.SpacingMPS[a]*p.lag))) / dst.SpacingM[a]
	}
	ss.shareAmongThree(k, a, d, p.within, weight)
}

// lineUp sets ss.line to the source's slices of one velocity north.
func (ss *sliceSpace) lineUp(north int32) {
	ss.line = resize(ss.line, int(ss.across[0]))
	for i := range ss.line {
		ss.line[i] = ss.find([2]int32{ss.from[0] + int32(i), north})
	}
}

// lagOf is by how many metres a change of velocity of 1 m/s takes the position along
// with it, on average, under noise of (xx, xv, vv); rest is the variance of the
// position that remains beside that.
func lagOf(p [3]float64) float64 {
	if p[2] > 0 {
		return p[1] / p[2]
	}
	return 0
}

func rest(p [3]float64) float64 { return p[0] - float64(p[1]*lagOf(p)) }

// mostWithin is the variance, cells², up to which four cells take a Gaussian well.
const mostWithin = 0.25

// kernelOf is the kernel of a variance in cells²: the neighbours alone up to a half,
// whose fourth moment is the least that there is on a lattice, then the discrete
// normal distribution.
func kernelOf(dst []float64, variance float64) []float64 {
	if variance <= 0.5 {
		return append(dst[:0], 1-variance, 0.5*variance)
	}
	dst = discreteNormal(dst, variance)
	n := len(dst)
	for n > 2 && dst[n-1] < sliceFloor {
		n--
	}
	return dst[:n]
}

// shareOut adds taps that bring slice k to a place d cells along axis a, among the four
// cells around it, shareAmongThree among three.
func (ss *sliceSpace) shareOut(k int32, a int, d, weight float64) {
	m := math.Floor(d)
	shares := sharesOf(d-m, 0)
	ss.share(k, a, int32(m)-1, shares[:], weight)
}

func (ss *sliceSpace) shareAmongThree(k int32, a int, d, variance, weight float64) {
	m := math.Floor(d + 0.5)
	shares := threeSharesOf(d-m, variance)
	ss.share(k, a, int32(m)-1, shares[:], weight)
}

// share adds taps for cells from by on, without those that get nothing.
func (ss *sliceSpace) share(k int32, a int, by int32, shares []float64, weight float64) {
	for len(shares) > 0 && shares[0] == 0 {
		shares = shares[1:]
		by++
	}
	for len(shares) > 0 && shares[len(shares)-1] == 0 {
		shares = shares[:len(shares)-1]
	}
	if a == 1 {
		for i, share := range shares {
			ss.taps = append(ss.taps, oneTap(k, 0, by+int32(i), weight*share))
		}
		return
	}
	t := sliceTap{slice: k, cols: by, count: int32(len(shares))}
	for i, share := range shares {
		t.weight[i] = weight * share
	}
	ss.taps = append(ss.taps, t)
}

// spreadSlices spreads the positions of every slice by the noise that is pending,
// with a covariance between the axes.
func (b *Belief) spreadSlices(ss *sliceSpace, cross float64) {
	s := &b.Slices
	hE, hN := s.SpacingM[0], s.SpacingM[1]
	q := spreadable([3]float64{rest(s.Pending[0]), cross, rest(s.Pending[1])})
	s.Pending[0][0] -= q[0]
	s.Pending[1][0] -= q[2]
	u, lambda, n := directions(q[0]/(hE*hE), q[1]/(hE*hN), q[2]/(hN*hN))
	for i := range n {
		b.spreadAlong(ss, u[i], lambda[i])
	}
}

// spreadAlong convolves every slice along a direction of cells.
func (b *Belief) spreadAlong(ss *sliceSpace, u [2]int32, variance float64) {
	s := &b.Slices
	weight := kernelOf(nil, variance)
	ss.begin(s, 0, 0)
	for k := range s.At {
		c := &s.At[k]
		ss.taps = append(ss.taps[:0], oneTap(int32(k), 0, 0, weight[0]))
		for n, weight := range weight[1:] {
			m := int32(n + 1)
			ss.taps = append(ss.taps,
				oneTap(int32(k), m*u[0], m*u[1], weight), oneTap(int32(k), -m*u[0], -m*u[1], weight))
		}
		ss.gather(&ss.spare, s, [2]int32{c.East, c.North}, sliceFloor/s.Scale)
	}
	b.Pruned += math.Max(0, ss.dropped*s.Scale)
	ss.dropped = 0
	b.Slices, ss.spare = ss.spare, b.Slices
}

// begin indexes the slices of s and makes ss.spare an empty grid like it, with reach
// more velocities to either side along axis a; they have the places of the outermost.
func (ss *sliceSpace) begin(s *Slices, a int, reach int32) {
	ss.indexSlices(s)
	ss.like(s)
	for a := range 2 {
		ss.widen(s, a, 0)
	}
	ss.widen(s, a, reach)
}

// widen adds velocities along axis a to what begin made.
func (ss *sliceSpace) widen(s *Slices, a int, reach int32) {
	o := ss.spare.OriginM[a][:0]
	lo, hi := ss.low[a], ss.low[a]+ss.count[a]
	for i := lo - reach; i < hi+reach; i++ {
		o = append(o, s.origin(a, min(max(i, lo), hi-1)))
	}
	ss.spare.OriginM[a], ss.spare.Low[a] = o, lo-reach
	ss.low[a] -= reach
	ss.count[a] += 2 * reach
}

// like makes ss.spare an empty grid with the spacings and places of s.
func (ss *sliceSpace) like(s *Slices) {
	d := &ss.spare
	at, rows, mass, o := d.At[:0], d.Rows[:0], d.Mass[:0], d.OriginM
	*d = *s
	d.At, d.Rows, d.Mass = at, rows, mass
	for a := range 2 {
		d.OriginM[a] = append(o[a][:0], s.OriginM[a]...)
	}
	if n := s.cells(); cap(d.Mass) < n+n/3 { // a pass makes the rows a little longer
		d.Mass = make([]float64, 0, n+n/2)
	}
}

// indexSlices sets ss.index over the velocities that s has.
func (ss *sliceSpace) indexSlices(s *Slices) {
	for a := range 2 {
		lo, hi := int32(math.MaxInt32), int32(math.MinInt32)
		for i := range s.At {
			v := s.At[i].along(a)
			lo, hi = min(lo, v), max(hi, v)
		}
		ss.low[a], ss.count[a] = lo, hi-lo+1
	}
	ss.index = resize(ss.index, int(ss.count[0])*int(ss.count[1]))
	for i := range ss.index {
		ss.index[i] = -1
	}
	for i := range s.At {
		c := &s.At[i]
		ss.index[(c.North-ss.low[1])*ss.count[0]+c.East-ss.low[0]] = int32(i)
	}
	ss.from, ss.across = ss.low, ss.count
}

// find returns the index of a velocity, or -1.
func (ss *sliceSpace) find(at [2]int32) int32 {
	i, j := at[0]-ss.from[0], at[1]-ss.from[1]
	if i < 0 || j < 0 || i >= ss.across[0] || j >= ss.across[1] {
		return -1
	}
	return ss.index[j*ss.across[0]+i]
}

// gather appends to dst the slice of a velocity that ss.taps make of src, without what
// is faint at the ends of rows, which counts as dropped. It reports false where there
// is none.
func (ss *sliceSpace) gather(dst, src *Slices, at [2]int32, floor float64) bool {
	if len(ss.taps) == 0 {
		return false
	}
	top, bottom := int32(math.MaxInt32), int32(math.MinInt32)
	for _, t := range ss.taps {
		c := &src.At[t.slice]
		top, bottom = min(top, c.Row+t.rows), max(bottom, c.Row+c.Count+t.rows)
	}
	ss.noRows(bottom - top)
	for _, t := range ss.taps {
		c := &src.At[t.slice]
		lo, hi := ss.lo[c.Row+t.rows-top:], ss.hi[c.Row+t.rows-top:]
		for k, r := range src.Rows[c.First : c.First+c.Count] {
			if r.Len > 0 {
				lo[k], hi[k] = min(lo[k], r.Col+t.cols), max(hi[k], r.Col+t.cols+r.Len+t.count-1)
			}
		}
	}
	c := dst.place(at, top, ss.lo, ss.hi)
	for _, t := range ss.taps {
		for _, weight := range t.weight {
			c.Mass += float64(weight * src.At[t.slice].Mass)
		}
	}
	first, last := int32(math.MaxInt32), int32(-1)
	for k := range c.Count {
		r := &dst.Rows[c.First+k]
		if r.Len == 0 {
			continue
		}
		ss.gatherRow(src, dst.Mass[r.Start:r.Start+int(r.Len)], r.Col, top+k)
		clear(dst.Mass[r.Start+int(r.Len):][:slicePad])
		gone := dst.trim(r, floor)
		c.Mass -= gone
		ss.dropped += gone
		if r.Len > 0 {
			first, last = min(first, k), k
		}
	}
	if last < 0 {
		dst.At = dst.At[:len(dst.At)-1]
		return false
	}
	c.First += first
	c.Row += first
	c.Count = last - first + 1
	return true
}

// trim cuts a row's faint ends and returns their mass.
func (s *Slices) trim(r *SliceRow, floor float64) (gone float64) {
	mass := s.Mass[r.Start : r.Start+int(r.Len)]
	x, y := 0, len(mass)
	for x < y && faint(mass[x:x+sliceLane], floor) {
		x += sliceLane
	}
	for y > x && faint(mass[y-sliceLane:y], floor) {
		y -= sliceLane
	}
	if y-x < len(mass) {
		gone = wipe(mass[:x]) + wipe(mass[y:])
		r.Start += x
		r.Col += int32(x)
		r.Len = int32(y - x)
	}
	return gone
}

// gatherRow writes one row of a slice, from col on: of the rows that reach all over
// it, with what is around them, together, of the others one by one.
func (ss *sliceSpace) gatherRow(s *Slices, dst []float64, col, row int32) {
	starts, weights := ss.starts[:0], ss.weights[:0]
	ss.partial = ss.partial[:0]
	n := int32(len(dst))
	for i := range ss.taps {
		t := &ss.taps[i]
		c := &s.At[t.slice]
		k := row - t.rows - c.Row
		if k < 0 || k >= c.Count {
			continue
		}
		r := &s.Rows[c.First+k]
		if r.Len == 0 {
			continue
		}
		off := col - t.cols - r.Col
		if off-t.count+1 >= -slicePad && off+n <= r.Len+slicePad {
			from := r.Start + int(off)
			for q, weight := range t.weight[:t.count] {
				starts, weights = append(starts, from-q), append(weights, weight)
			}
			continue
		}
		for q, weight := range t.weight[:t.count] {
			ss.partial = append(ss.partial, partial{r.Start, int32(q) - off, r.Len, weight})
		}
	}
	ss.starts, ss.weights = starts, weights
	if len(starts) > 0 {
		kernel.Combine(dst, s.Mass, starts, weights)
	} else {
		clear(dst)
	}
	for _, p := range ss.partial {
		kernel.AddScaled(dst[p.col:p.col+p.length], s.Mass[p.start:p.start+int(p.length)], p.weight)
	}
}

// partial is a row that covers a part of another one, from cell col on.
type partial struct {
	start       int
	col, length int32
	weight      float64
}

// noRows makes n empty rows.
func (ss *sliceSpace) noRows(n int32) {
	ss.lo, ss.hi = resize(ss.lo, int(n)), resize(ss.hi, int(n))
	for r := range ss.lo {
		ss.lo[r], ss.hi[r] = math.MaxInt32, math.MinInt32
	}
}

// place appends a slice with rows from lo to hi, or a little longer. Their masses are
// not set, nor what is after them.
func (s *Slices) place(at [2]int32, top int32, lo, hi []int32) *Slice {
	s.At = append(s.At, Slice{East: at[0], North: at[1], Row: top, First: int32(len(s.Rows)), Count: int32(len(lo))})
	n := max(len(s.Mass), slicePad)
	old := len(s.Mass)
	for r := range lo {
		row := SliceRow{Start: n}
		if hi[r] > lo[r] {
			row.Col, row.Len = lo[r], (hi[r]-lo[r]+sliceLane-1)&^(sliceLane-1)
			n += int(row.Len) + slicePad
		}
		s.Rows = append(s.Rows, row)
	}
	if cap(s.Mass) < n {
		s.Mass = append(make([]float64, 0, n+n/2), s.Mass...)
	}
	s.Mass = s.Mass[:n]
	if old == 0 {
		clear(s.Mass[:min(n, slicePad)])
	}
	return &s.At[len(s.At)-1]
}

// placeClear is place with masses of 0.
func (s *Slices) placeClear(at [2]int32, top int32, lo, hi []int32) *Slice {
	old := len(s.Mass)
	c := s.place(at, top, lo, hi)
	clear(s.Mass[old:])
	return c
}

// trimSlices drops what is faint at the ends of rows, the rows and slices that have
// nothing left, and counts it.
func (b *Belief) trimSlices() {
	s := &b.Slices
	floor := sliceFloor / s.Scale
	dropped := 0.0
	kept := s.At[:0]
	for i := range s.At {
		c := s.At[i]
		first, last := int32(math.MaxInt32), int32(-1)
		for k := range c.Count {
			r := &s.Rows[c.First+k]
			if r.Len == 0 {
				continue
			}
			gone := s.trim(r, floor)
			c.Mass -= gone
			dropped += gone
			if r.Len > 0 {
				first, last = min(first, k), k
			}
		}
		if last < 0 {
			continue
		}
		c.First += first
		c.Row += first
		c.Count = last - first + 1
		kept = append(kept, c)
	}
	s.At = kept
	b.Pruned += math.Max(0, dropped*s.Scale)
}

func faint(mass []float64, floor float64) bool {
	return max(mass[0], mass[1], mass[2], mass[3]) < floor && min(mass[0], mass[1], mass[2], mass[3]) > -floor
}

// wipe makes masses 0 and returns what they were in all.
func wipe(mass []float64) (sum float64) {
	for i, v := range mass {
		sum += v
		mass[i] = 0
	}
	return sum
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
