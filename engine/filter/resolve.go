package filter

import (
	"math"

	"leadline/engine/kernel"
)

// maxRefinements bounds by how many halvings one measurement sharpens a
// lattice: a factor of 1024.
const maxRefinements = 10

// UpdateWithin is Update for a belief that the measurement may make much
// sharper than it was: where the belief is a lattice, its spacing is first
// halved until it is at most 0.4 of the scale of the posterior, within a
// budget of cells. Cells to which the measurement leaves nothing are dropped
// before, so that a sharp posterior does not pay for a wide prior. Other
// beliefs it updates as Update does.
//
// Without it, a measurement with a sigma well below the spacing leaves a
// posterior as wide as a cell, wherever in the cell the truth is.
func UpdateWithin(b *Belief, space Space, l any, maxCells int, w *Workspace) (logEvidence float64, err error) {
	if len(b.Quantities) > 0 || b.Map != space.Fingerprint() {
		return Update(b, space, l, w)
	}
	plane := space.(PlaneSpace)
	b.logTiles(plane, l, w)
	var before *Belief
	for range maxRefinements {
		cells, ok := b.outcome(w)
		// scratch holds the posterior's masses, whose scale is asked for.
		t := Tiles{At: b.Tiles.At, Mass: w.scratch}
		if !ok || 4*cells > maxCells || t.scale() >= 1/fineScale {
			break
		}
		if before == nil {
			before = b.Clone()
		}
		for i, q := range w.scratch {
			if q < cellFloor {
				b.Pruned += q
				b.Tiles.Mass[i] = 0
			}
		}
		// Not refine: the prior has been cut off where nothing is left, and
		// its moments mean nothing there.
		b.interpolate(&w.tiles)
		w.tiles.spare.Surplus = b.Tiles.Surplus
		b.Tiles, w.tiles.spare = w.tiles.spare, b.Tiles
		b.Lattice.SpacingM /= 2
		b.dropEmptyTiles()
		b.logTiles(plane, l, w)
	}
	if before == nil {
		return b.weighTiles(w)
	}
	share := b.Tiles.mass() / before.Tiles.mass()
	logEvidence, err = b.weighTiles(w)
	if err != nil {
		*b = *before
		return logEvidence, err
	}
	return logEvidence + kernel.Log(share), nil
}

// outcome writes the masses that w.logs would leave, normalised, into
// w.scratch and returns how many are worth keeping; false if none is, or if a
// log is not one.
func (b *Belief) outcome(w *Workspace) (cells int, ok bool) {
	mass := b.Tiles.Mass
	most := math.Inf(-1)
	for i, l := range w.logs {
		if mass[i] > 0 {
			most = math.Max(most, l)
		}
	}
	if !(math.Abs(most) <= math.MaxFloat64) {
		return 0, false
	}
	w.scratch = resize(w.scratch, len(mass))
	sum := 0.0
	for i, l := range w.logs {
		w.scratch[i] = 0
		if mass[i] > 0 {
			w.scratch[i] = float64(mass[i] * kernel.Exp(l-most))
		}
		sum += w.scratch[i]
	}
	for i := range w.scratch {
		w.scratch[i] /= sum
		if w.scratch[i] >= cellFloor {
			cells++
		}
	}
	return cells, sum > 0
}

func (t *Tiles) mass() (sum float64) {
	for _, v := range t.Mass {
		sum += v
	}
	return sum
}

// contract returns what is left of a lattice's surplus of variance after a
// measurement that took its covariance from prior to post: A S Aᵀ with A =
// post prior⁻¹, which for Gaussians is I - K H, the derivative of the
// posterior's covariance by the prior's. Where a measurement does not contract
// (between modes), the surplus is not enlarged.
func contract(s [3]float64, prior, post latticeMoments) [3]float64 {
	det := float64(prior.ee*prior.nn) - float64(prior.en*prior.en)
	if !(det > 0) {
		return s
	}
	a := (float64(post.ee*prior.nn) - float64(post.en*prior.en)) / det
	b := (float64(post.en*prior.ee) - float64(post.ee*prior.en)) / det
	c := (float64(post.en*prior.nn) - float64(post.nn*prior.en)) / det
	d := (float64(post.nn*prior.ee) - float64(post.en*prior.en)) / det
	// Rows of A·S, then times Aᵀ.
	p0, p1 := float64(a*s[0])+float64(b*s[1]), float64(a*s[1])+float64(b*s[2])
	q0, q1 := float64(c*s[0])+float64(d*s[1]), float64(c*s[1])+float64(d*s[2])
	r := [3]float64{float64(p0*a) + float64(p1*b), float64(p0*c) + float64(p1*d), float64(q0*c) + float64(q1*d)}
	norm := func(m [3]float64) float64 {
		return math.Sqrt(float64(m[0]*m[0]) + float64(2*m[1]*m[1]) + float64(m[2]*m[2]))
	}
	if was, is := norm(s), norm(r); is > was {
		for i := range r {
			r[i] *= was / is
		}
	}
	return r
}
