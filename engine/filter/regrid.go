package filter

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// A belief of Gaussians on a plane holds in each cell what is wide there cut
// to the cell and what is narrow whole, so that another spacing changes no
// moment: on a coarser lattice Gaussians meet and merge, on a finer one the
// wide ones are cut. What the spacing decides is how much of the belief's
// shape is kept, and how large the pieces are for which a measurement is
// taken as linear.
//
// The spacing is at most fineGaussians of the belief's width where the budget
// allows, which keeps linear-Gaussian models within 1 % of the Kalman filter
// (TestKalmanWithNuisances); it doubles when twice the spacing would still be
// below coarseGaussians. The gap between the two keeps it from swinging.
const (
	fineGaussians   = 0.8
	coarseGaussians = 0.6
)

// A Gaussian fainter than cutShare of the densest one stays whole however wide
// it is, which keeps its moments as well: so a sharp peak does not have the
// wide and faint rest of the belief cut as finely as itself, and costs at most
// 1/cutShare times its own cells. What is fainter than seenShare does not enter
// the belief's width.
const (
	cutShare  = 1e-2
	seenShare = 1e-4
)

// Between minSpacingM and maxSpacingM a lattice of Gaussians is at home: cells
// finer than a centimetre say nothing, and over 20 000 km could not be numbered;
// no budget asks for more than the Earth's circumference.
const (
	minSpacingM = 0.01
	maxSpacingM = 4.1e7
)

// finer returns the lattice of half the spacing, coarser that of twice the
// spacing, whose cells are four of this one's.
func (l Lattice) finer() Lattice {
	q := l.SpacingM / 4
	return Lattice{geo.Point{E: l.Origin.E - q, N: l.Origin.N - q}, l.SpacingM / 2}
}

func (l Lattice) coarser() Lattice {
	q := l.SpacingM / 2
	return Lattice{geo.Point{E: l.Origin.E + q, N: l.Origin.N + q}, 2 * l.SpacingM}
}

// adaptGaussians is Adapt for Gaussians on a plane.
func (b *Belief) adaptGaussians(maxCells int, w *Workspace) bool {
	k, h, n := len(b.Quantities), b.Lattice.SpacingM, len(b.Key)
	width, dense := w.tiles.width(&b.Gaussians, b.Mass, k, h)
	switch {
	case h > fineGaussians*width && h >= 2*minSpacingM && n+3*dense <= maxCells:
		b.regrid(b.Lattice.finer(), b.Mass, w)
	case 2*h < coarseGaussians*width || n > maxCells && h <= maxSpacingM/2:
		b.regrid(b.Lattice.coarser(), b.Mass, w)
	}
	return b.Lattice.SpacingM != h
}

// makeRoom coarsens the lattice before the positions spread by a variance of at
// least varM2 along each axis: what is finer than the spacing that the spread
// leaves would be cut, spread and merged to no purpose.
func (b *Belief) makeRoom(varM2 float64, w *Workspace) {
	width, _ := w.tiles.width(&b.Gaussians, b.Mass, len(b.Quantities), b.Lattice.SpacingM)
	for wide := math.Sqrt(width*width + varM2); 2*b.Lattice.SpacingM < coarseGaussians*wide; {
		b.regrid(b.Lattice.coarser(), b.Mass, w)
	}
}

// regrid moves the Gaussians to the cells of another lattice, or of a coarser
// one if that would make too many pieces (see maxPieces). Those that are not
// faint are cut where they are wide. Mass, mean and covariance are kept; weight
// may be the masses of the belief or those of what it is about to become.
func (b *Belief) regrid(l Lattice, weight []float64, w *Workspace) {
	k := len(b.Quantities)
	density, most := b.densities(w.tiles.density, weight, k, b.Lattice.SpacingM)
	w.tiles.density = density
	mv := mover{k: k, dim: 2, lattice: l, out: &w.out, angular: angularMask(b.Quantities), faint: cutShare * most}
	u := w.turn(b, regrouped)
	for mv.follow(u); !mv.resend(b, density); mv.follow(u) {
		mv.lattice = mv.lattice.coarser()
	}
	b.Lattice = mv.lattice
	b.Pruned += mv.pruned
	before := sum(b.Mass)
	into := w.intoFor(u, len(w.out.Key))
	w.merger.merge(&b.Gaussians, &w.out, k, mv.angular, perCell(2), into)
	w.end(u, b, &w.out, into, mv.source, mv.offset)
	scale := before / sum(b.Mass)
	for i := range b.Mass {
		b.Mass[i] *= scale
	}
}

// resend sends every Gaussian from where it is to the cells of mv.lattice. It
// reports false if that makes too many pieces.
func (mv *mover) resend(b *Belief, density []float64) bool {
	mv.out.reset()
	mv.pruned, mv.cuts = 0, 0
	var g gaussian
	for i, key := range b.Key {
		b.load(&g, i, mv.k)
		mv.index = int32(i)
		mv.plane(b.Lattice, key, &g, density[i] < mv.faint)
		if mv.cuts > maxPieces {
			return false
		}
	}
	return true
}

func sum(s []float64) float64 {
	t := 0.0
	for _, v := range s {
		t += v
	}
	return t
}

// densities writes into dst weight over area of each Gaussian, and returns the
// greatest. A Gaussian's area is the root of its positions' determinant, at
// least that of mass spread evenly over a cell of size h.
func (c *Gaussians) densities(dst, weight []float64, k int, h float64) ([]float64, float64) {
	dst = resize(dst, len(weight))
	p := k * (k + 1) / 2
	even, most := h*h/12, 0.0
	for i, m := range weight {
		v := c.Cov[i*p : i*p+3]
		area := even
		if det := float64(v[0]*v[2]) - float64(v[1]*v[1]); det > even*even {
			area = math.Sqrt(det)
		}
		dst[i] = m / area
		most = math.Max(most, dst[i])
	}
	return dst, most
}

// width returns the length over which Gaussians at home in cells of size h
// change, with the given weights in place of their masses: the standard
// deviation, along the sharper axis, of a Gaussian that overlaps as much with
// itself moved by one cell. What is fainter than seenShare of the densest does
// not count. It also returns how many Gaussians are not fainter than cutShare.
//
// The weights are shared out among the nine cells around each Gaussian's mean
// by quadratic B-splines, so that what moves from one cell to the next does
// so smoothly. That adds h²/4 to the variance between the means, which is
// taken off again, and the Gaussians' own variance is added, as the harmonic
// mean, so that the sharp ones decide. Of two equal Gaussians σ apart by h,
// the overlap Σ√(p(i)·p(i+1)) is exp(-h²/8σ²): the affinity of Bhattacharyya,
// Bull. Calcutta Math. Soc. 35 (1943).
func (ts *tileSpace) width(c *Gaussians, weight []float64, k int, h float64) (widthM float64, dense int) {
	density, most := c.densities(ts.density, weight, k, h)
	ts.density = density
	unseen := seenShare * most
	ts.coverGaussians(c, k, h, unseen)
	p := k * (k + 1) / 2
	least := 1e-6 * h * h
	var total, infoE, infoN float64
	for i, key := range c.Key {
		if density[i] < unseen {
			continue
		}
		if density[i] >= cutShare*most {
			dense++
		}
		m := weight[i]
		total += m
		infoE += m / math.Max(c.Cov[i*p], least)
		infoN += m / math.Max(c.Cov[i*p+2], least)
		col, row, x, y := nearestCell(key, c.Mean[i*k], c.Mean[i*k+1], h)
		ts.shareOut(col, row, spline(x), spline(y), m)
	}
	je, jn := ts.spare.roughness()
	axis := func(rough, info float64) float64 {
		own := total / info
		between := -0.125 / kernel.Log(1-math.Min(0.5*rough/total, 1)) // in cells
		return math.Max(own/4, float64((between-0.25)*h*h)+own)
	}
	return math.Sqrt(math.Min(axis(je, infoE), axis(jn, infoN))), dense
}

// nearestCell is the cell that a position relative to another one's centre is
// in, and where in it, in cells.
func nearestCell(key uint64, e, n, h float64) (col, row int32, x, y float64) {
	col, row = Cell(key)
	de, dn := math.Floor(e/h+0.5), math.Floor(n/h+0.5)
	return col + int32(de), row + int32(dn), e/h - de, n/h - dn
}

// spline returns the quadratic B-spline's weights at the cells -1, 0, 1 for x
// in [-0.5, 0.5].
func spline(x float64) [3]float64 {
	a, b := 0.5-x, 0.5+x
	return [3]float64{0.5 * float64(a*a), 0.75 - float64(x*x), 0.5 * float64(b*b)}
}

// coverGaussians sets ts.spare to empty tiles around the Gaussians of at least
// a density.
func (ts *tileSpace) coverGaussians(c *Gaussians, k int, h, least float64) {
	at := ts.spare.At[:0]
	add := func(t TileAt) {
		for i := len(at) - 1; i >= 0 && i >= len(at)-4; i-- {
			if at[i] == t {
				return
			}
		}
		at = append(at, t)
	}
	for i, key := range c.Key {
		if ts.density[i] < least {
			continue
		}
		col, row, _, _ := nearestCell(key, c.Mean[i*k], c.Mean[i*k+1], h)
		// The cells before the nine as well, where roughness looks for 0.
		for r := floorDiv(row-2, TileSide); r <= floorDiv(row+1, TileSide); r++ {
			for c := floorDiv(col-2, TileSide); c <= floorDiv(col+1, TileSide); c++ {
				add(TileAt{c, r})
			}
		}
	}
	ts.empty(sortedTiles(at))
}

// shareOut adds a mass to nine cells.
func (ts *tileSpace) shareOut(col, row int32, x, y [3]float64, m float64) {
	tc, tr := floorDiv(col-1, TileSide), floorDiv(row-1, TileSide)
	c0, r0 := int(col-1-tc*TileSide), int(row-1-tr*TileSide)
	if c0+2 < TileSide && r0+2 < TileSide {
		tile := ts.spare.tile(int(ts.index[TileAt{tc, tr}]))
		for r, wy := range y {
			line := tile[(r0+r)*TileSide+c0:]
			for c, wx := range x {
				line[c] += float64(m * float64(wx*wy))
			}
		}
		return
	}
	for r, wy := range y {
		for c, wx := range x {
			ts.spare.add(ts, col+int32(c)-1, row+int32(r)-1, float64(m*float64(wx*wy)))
		}
	}
}
