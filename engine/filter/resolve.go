package filter

import (
	"math"

	"leadline/engine/kernel"
)

// maxRefinements bounds by how many halvings one measurement sharpens a
// lattice: a factor of 1024.
const maxRefinements = 10

// UpdateWithin is Update for a belief on a plane that the measurement may make
// much sharper than it was: its spacing is first halved until it resolves the
// posterior as Adapt would have it, within a budget of cells or Gaussians; where
// modes far apart compete, until it makes the measurement hardly blunt.
// A sharp posterior does not pay for a wide prior: cells of a lattice far from all
// to which the measurement leaves anything are dropped before, and of the Gaussians only
// those are cut that it does not leave faint. A belief on lines it updates as Update does.
//
// Without it, a measurement with a sigma well below the spacing of a lattice
// leaves a posterior as wide as a cell, wherever in the cell the truth is; and
// a Gaussian as wide as a cell is updated by a measurement that is not linear
// over it, or that may be an outlier, as if it were one place.
func UpdateWithin(b *Belief, space Space, l any, maxCells int, w *Workspace) (logEvidence float64, err error) {
	if b.Dim == 1 || b.Map != space.Fingerprint() {
		return Update(b, space, l, w)
	}
	if len(b.Axes) > 0 {
		return b.updateSlices(space.(PlaneSpace), l, maxCells, w)
	}
	if len(b.Quantities) > 0 {
		return b.updateGaussians(space, l, maxCells, w)
	}
	plane := space.(PlaneSpace)
	left := b.weighTiles(plane, l, true, w)
	turns := w.turned()
	var before *Belief // before is set once the lattice is another one
	tight, weighed := 0.0, false
	for range maxRefinements {
		var cells int
		cells, logEvidence, err = w.outcomeOf(left, b.Tiles.Mass, cellFloor)
		if weighed = err == nil; err != nil {
			break
		}
		// scratch holds the posterior's masses, whose scale is asked for.
		t := Tiles{At: b.Tiles.At, Mass: w.scratch}
		scale := t.scale()
		blunt, twice := w.blunts(&t, cells, scale)
		tight = 0
		if twice {
			tight = square(leastSigma * 2 * b.Lattice.SpacingM)
		}
		if 4*cells > maxCells || scale >= 1/fineScale && !blunt {
			break
		}
		pruned := b.Pruned
		b.keepNear(w)
		// Not refine: the prior has been cut off where nothing is left, and
		// its moments mean nothing there.
		u := w.turn(b, refined)
		b.interpolate(&w.tiles, w.keep)
		w.tiles.spare.Surplus = b.Tiles.Surplus
		if before == nil {
			was := *b
			was.Pruned = pruned
			before = &was
			b.Tiles, w.tiles.spare, w.tiles.first = w.tiles.spare, w.tiles.first, b.Tiles
		} else {
			b.Tiles, w.tiles.spare = w.tiles.spare, b.Tiles
		}
		b.Lattice.SpacingM /= 2
		b.dropEmptyTiles()
		w.endTiles(u, b)
		left = b.weighTiles(plane, l, true, w)
		weighed = false
	}
	share := 1.0
	if before != nil {
		share = sum(b.Tiles.Mass) / sum(before.Tiles.Mass)
	}
	if !weighed {
		_, logEvidence, err = w.outcomeOf(left, b.Tiles.Mass, cellFloor)
	}
	if err == nil {
		b.weighed(w)
		b.Tight = tight
		return logEvidence + kernel.Log(share), nil
	}
	if before != nil {
		w.tiles.first = b.Tiles
		*b = *before
		w.unturn(b, turns)
	}
	return logEvidence, err
}

// updateGaussians is UpdateWithin for Gaussians.
func (b *Belief) updateGaussians(space Space, l any, maxCells int, w *Workspace) (float64, error) {
	k := len(b.Quantities)
	_, linear := l.(LinearLikelihood)
	turns := w.turned()
	var before *Belief
	b.condition(space, l, w)
	for range maxRefinements {
		if _, _, err := w.outcome(b.Mass, Floor); err != nil {
			break
		}
		after := &b.Gaussians
		if linear {
			after = &w.out
		}
		h := b.Lattice.SpacingM
		width, dense := w.tiles.width(after, w.scratch, k, h)
		if h <= fineGaussians*width || h < 2*minSpacingM || len(b.Key)+3*dense > maxCells || !b.wide(cutWidth*h/2, w) {
			break
		}
		if before == nil {
			before = b.Clone()
		}

		b.regrid(b.Lattice.finer(), w.scratch, w)
		b.condition(space, l, w)
		if b.Lattice.SpacingM == h {
			break
		}
	}
	logEvidence, err := b.settle(l, w)
	if err != nil && before != nil {
		*b = *before
		w.unturn(b, turns)
	}
	return logEvidence, err
}

// wide reports whether a Gaussian that is not faint in w.scratch is wider than
// sigma along an axis.
func (b *Belief) wide(sigma float64, w *Workspace) bool {
	k := len(b.Quantities)
	p := k * (k + 1) / 2
	var most float64
	w.tiles.density, most = b.densities(w.tiles.density, w.scratch, k, b.Lattice.SpacingM)
	for i, d := range w.tiles.density {
		if d >= cutShare*most && math.Max(b.Cov[i*p], b.Cov[i*p+2]) > sigma*sigma {
			return true
		}
	}
	return false
}

// outcome writes the masses that w.logs would leave, normalised, into
// w.scratch and returns how many are at least floor, and the log evidence; an
// error if none is left.
func (w *Workspace) outcome(mass []float64, floor float64) (n int, logEvidence float64, err error) {
	w.scratch = resize(w.scratch, len(mass))
	return weighInto(w.scratch, mass, w.logs, floor)
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
