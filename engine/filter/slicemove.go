package filter

import (
	"math"
)

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
	t := sliceTap{slice: k, wide: 1, high: 1}
	if n := int32(len(shares)); a == 0 {
		t.cols, t.wide = by, n
	} else {
		t.rows, t.high = by, n
	}
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
