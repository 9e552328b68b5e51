package filter

import (
	"math"
	"math/bits"

	"leadline/engine/geo"
)

// headingParts is into how many sectors the directions are cut where a heading
// is wide: 22.5° each. A plane starts with as many Gaussians a cell where the
// heading is unknown.
const headingParts = 16

const (
	sectorRad = 2 * math.Pi / headingParts
	// maxHeadingSigma is taken for any larger one: its density differs from a
	// uniform one by 2·exp(-σ²/2) = 7e-4.
	maxHeadingSigma = 4.0
)

// apart takes out of a step on a plane the noise that is wide and independent of
// all else, and returns it as steps of their own, in order of the quantities:
// what cuts a belief into many columns, rows and sectors then follows one
// another, with merging in between, and does not multiply.
func (b *Belief) apart(step Step) (Step, []Step) {
	k := len(b.Quantities)
	angular := angularMask(b.Quantities)
	var noise []Step
	for d := range k {
		v := step.Q[Packed(d, d)]
		switch {
		case d < 2 && v > square(b.Lattice.SpacingM):
		case d >= 2 && angular>>uint(d)&1 != 0 && v > square(0.25*sectorRad):
		default:
			continue
		}
		if correlated(step.Q, k, d) {
			continue
		}
		if noise == nil {
			step.Q = append([]float64(nil), step.Q...)
		}
		n := NewStep(k)
		n.Q[Packed(d, d)], step.Q[Packed(d, d)] = v, 0
		noise = append(noise, n)
	}
	return step, noise
}

// narrow is the smaller eigenvalue of the positions' covariance.
func narrow(q []float64) float64 {
	half := 0.5 * (q[0] - q[2])
	return 0.5*(q[0]+q[2]) - math.Sqrt(float64(half*half)+float64(q[1]*q[1]))
}

// pieces is about how many cells a variance covers.
func pieces(varM2 float64, l Lattice) float64 {
	return 1 + 2*foldSigmas*math.Sqrt(varM2)/l.SpacingM
}

// correlated reports whether quantity d has a covariance with another one.
func correlated(q []float64, k, d int) bool {
	for i := range k {
		if i != d && q[Packed(max(i, d), min(i, d))] != 0 {
			return true
		}
	}
	return false
}

// plane sends a Gaussian whose position is relative to the centre of a cell of
// the lattice from to a cell of mv.lattice. It is cut where its heading is
// wide, and unless it is faint into columns and rows.
func (mv *mover) plane(from Lattice, key uint64, g *gaussian, faint bool) {
	col, row := Cell(key)
	mv.moved = [2]float64{}
	if from != mv.lattice {
		h := mv.lattice.SpacingM
		at := from.Centre(col, row).Sub(mv.lattice.Origin)
		e, n := math.Floor(at.E/h+0.5), math.Floor(at.N/h+0.5)
		col, row = int32(e), int32(n)
		mv.moved = [2]float64{at.E - float64(e*h), at.N - float64(n*h)}
		g.mean[0] += mv.moved[0]
		g.mean[1] += mv.moved[1]
	}
	use := func(g *gaussian) { mv.squares(col, row, g) }
	if faint {
		use = func(g *gaussian) { mv.home(col, row, g) }
	}
	d := bits.TrailingZeros(mv.angular)
	if d >= mv.k || g.cov[Packed(d, d)] <= square(cutWidth*sectorRad) {
		use(g)
		return
	}
	if v := g.cov[Packed(d, d)]; v > square(maxHeadingSigma) {
		g.shrink(mv.k, d, maxHeadingSigma/math.Sqrt(v))
	}
	mv.cutAlong(d, sectorRad, g, func(piece *gaussian) {
		piece.mean[d] = geo.WrapPi(piece.mean[d])
		use(piece)
	})
}

// squares cuts a Gaussian into columns and rows where it is wide.
func (mv *mover) squares(col, row int32, g *gaussian) {
	h := mv.lattice.SpacingM
	wide := square(cutWidth * h)
	rows := func(g *gaussian) {
		if g.cov[2] <= wide {
			mv.home(col, row, g)
			return
		}
		mv.cutAlong(1, h, g, func(piece *gaussian) { mv.home(col, row, piece) })
	}
	if g.cov[0] <= wide {
		rows(g)
		return
	}
	mv.cutAlong(0, h, g, rows)
}

// home puts a Gaussian into the cell where its mean is.
func (mv *mover) home(col, row int32, g *gaussian) {
	if g.mass < Floor {
		mv.pruned += g.mass
		return
	}
	h := mv.lattice.SpacingM
	e, n := math.Floor(g.mean[0]/h+0.5), math.Floor(g.mean[1]/h+0.5)
	mv.from = [2]float64{g.mean[0] - mv.moved[0], g.mean[1] - mv.moved[1]}
	g.mean[0] -= float64(e * h)
	g.mean[1] -= float64(n * h)
	mv.out.push(CellKey(col+int32(e), row+int32(n)), mv.k, g)
	mv.note(g.mean[:])
}

// A Gaussian wider than cutWidth of a cell is cut into a row of narrower ones, a
// cell apart and pieceWidth of one wide: together they have a density that is
// smooth to 2·exp(-2π²·pieceWidth²) = 0.2 %. (Pieces with the moments of what
// lies between two edges would be 0.29 cells wide, and their density would
// swing by 38 % along each axis: a measurement much sharper than the cell, as
// after a long silence, would weigh that.)
const (
	cutWidth   = 0.7
	pieceWidth = 0.6
)

// cutAlong cuts a Gaussian into a row along quantity d. The masses are a
// discrete normal distribution of the variance that the pieces' own falls
// short; what lies beyond foldSigmas goes into the outermost ones, so that
// mass, mean and variance stay exact.
func (mv *mover) cutAlong(d int, h float64, g *gaussian, use func(*gaussian)) {
	const own = pieceWidth * pieceWidth
	v := g.cov[Packed(d, d)]/(h*h) - own
	n := max(1, int(math.Min(foldSigmas*math.Sqrt(v)+0.5, maxPieces)))
	if d < 2 {
		if mv.cuts += 2 * n; mv.cuts > maxPieces {
			return // on a coarser lattice again
		}
	}
	mv.taps[d] = discreteNormal(mv.taps[d], v)
	taps := mv.taps[d]
	n = min(n, len(taps)-1)
	cut := func(j int, share, at, variance float64) {
		piece := g.piece(mv.k, d, share, math.Copysign(float64(at*h), float64(j)), float64(variance*float64(h*h)))
		use(&piece)
	}
	var s0, s1, s2 float64
	for j := len(taps) - 1; j >= n; j-- {
		x := float64(j)
		s0 += taps[j]
		s1 += float64(taps[j] * x)
		s2 += float64(taps[j] * float64(x*x))
	}
	end := s1 / s0
	for j := -n; j <= n; j++ {
		if i := max(j, -j); i < n {
			cut(j, taps[i], float64(i), own)
		} else {
			cut(j, s0, end, own+math.Max(0, s2/s0-float64(end*end)))
		}
	}
}

// piece returns the part of g that lies shift along quantity d from its mean
// and has the variance v there.
func (g *gaussian) piece(k, d int, share, shift, v float64) gaussian {
	r := *g
	r.mass = float64(g.mass * share)
	vd := g.cov[Packed(d, d)]
	less := vd - v
	var gain [MaxK]float64
	for i := range k {
		gain[i] = g.at(i, d) / vd
		r.mean[i] += float64(gain[i] * shift)
	}
	for i := range k {
		for j := 0; j <= i; j++ {
			r.cov[Packed(i, j)] -= float64(float64(gain[i]*gain[j]) * less)
		}
	}
	return r
}

func square(x float64) float64 { return x * x }
