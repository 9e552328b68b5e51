package filter

import (
	"math"

	"leadline/engine/kernel"
)

// updateTiles weighs the lattice's cells.
func (b *Belief) updateTiles(space PlaneSpace, l any, w *Workspace) (float64, error) {
	b.logTiles(space, l, w)
	_, logEvidence, err := w.outcome(b.Tiles.Mass, cellFloor)
	if err == nil {
		b.weighed(w)
	}
	return logEvidence, err
}

// logTiles writes the log likelihood of every cell into w.logs.
func (b *Belief) logTiles(space PlaneSpace, l any, w *Workspace) {
	t := &b.Tiles
	w.logs = resize(w.logs, len(t.Mass))
	h := b.Lattice.SpacingM
	least := square(leastSigma * h)
	w.blunt = w.blunt[:0]
	var nw noiseWork
	var noise Noise
	lin, linear := l.(LinearLikelihood)
	like, plain := l.(Likelihood)
	wants := WantPosition
	switch {
	case linear:
		noise = lin.Noise()
		nw = newNoiseWork(&noise, lin.Rows())
		wants |= lin.Wants()
		w.blunt = resize(w.blunt, len(t.Mass))
	case plain:
		wants |= like.Wants()
	default:
		panic("filter: not a likelihood")
	}
	p := w.asked()
	turned, _ := l.(Turned)
	w.predictions.reset()
	w.predictions.least = true
	for i := range t.At {
		logs := w.logs[i*tileCells : (i+1)*tileCells]
		clear(logs)
		tile := t.tile(i)
		w.locateCells(wants, b.Lattice, t.At[i], tile)
		n := len(w.cells)
		space.Sample(&w.at)
		if !linear {
			w.cellLogs = resize(w.cellLogs, n)
			clear(w.cellLogs)
			like.LogLikelihood(w.cellLogs, &w.at)
			for j, x := range w.cells {
				logs[x] = w.cellLogs[j]
			}
			continue
		}
		m := lin.Rows()
		w.terms.Reset(n, m, 2)
		lin.Linearize(&w.terms, &w.at, nil, nil)
		blunt := w.blunt[i*tileCells : (i+1)*tileCells]
		if nw.simple() {
			w.densities(&nw, n, least)
		} else {
			w.cellLogs = resize(w.cellLogs, n)
			for j := range n {
				w.cellLogs[j] = nw.density(&w.terms, j, least)
			}
		}
		for j, x := range w.cells {
			logs[x] = w.cellLogs[j]
			blunt[x] = nw.blunt(&w.terms, j, least)
			if p != nil {
				w.predictions.add(tile[x], &w.terms, j, m, w.terms.ofPosition(j, m, least), &w.at, turned)
			}
		}
	}
	if p != nil && linear {
		_, circular := l.(Circular)
		w.predictions.into(p, &noise, lin.Rows(), circular)
	}
}

// weighed makes the outcome in w.scratch the cells' masses.
func (b *Belief) weighed(w *Workspace) {
	t := &b.Tiles
	owes := t.Surplus != [3]float64{}
	var prior latticeMoments
	if owes {
		prior = b.latticeMoments()
	}
	t.Mass, w.scratch = w.scratch, t.Mass
	before := b.Pruned
	b.dropTiles()
	if lost := b.Pruned - before; lost > 0 {
		scale := 1 / (1 - lost)
		for i := range t.Mass {
			t.Mass[i] *= scale
		}
	}
	if owes {
		t.Surplus = contract(t.Surplus, prior, b.latticeMoments())
	}
}

// locateCells sets w.cells to the cells of a tile that have mass, and w.at to their
// centres.
func (w *Workspace) locateCells(wants Wants, l Lattice, t TileAt, tile []float64) {
	w.cells = w.cells[:0]
	for x, v := range tile {
		if v != 0 {
			w.cells = append(w.cells, uint16(x))
		}
	}
	east, north := l.axes(t)
	w.at.Resize(wants, 2, len(w.cells))
	for j, x := range w.cells {
		w.at.East[j], w.at.North[j] = east[x%TileSide], north[x/TileSide]
	}
}

// axes are the places of a tile's columns and rows.
func (l Lattice) axes(t TileAt) (east, north [TileSide]float64) {
	for c := range int32(TileSide) {
		centre := l.Centre(t.Col*TileSide+c, t.Row*TileSide+c)
		east[c], north[c] = centre.E, centre.N
	}
	return east, north
}

// ofPosition is the variance of what the rows take of a position at i that has
// the variance within along each axis.
func (t *Terms) ofPosition(i, m int, within float64) sym2 {
	row := t.Row[i*m*2 : (i+1)*m*2]
	p := sym2{a: float64(within * (float64(row[0]*row[0]) + float64(row[1]*row[1])))}
	if m == 2 {
		p.b = float64(within * (float64(row[0]*row[2]) + float64(row[1]*row[3])))
		p.c = float64(within * (float64(row[2]*row[2]) + float64(row[3]*row[3])))
	}
	return p
}

// leastSigma is the least standard deviation that a measurement has on a lattice,
// in cells: sharper ones are made as blunt as that. The sum over points of a
// density so wide differs from its integral by at most 2·exp(-2π²·leastSigma²) of
// it, 1.4 % (Poisson's summation formula); a sharper one would be seen or missed
// as the points happen to lie. What is blunter is taken at the points as it is,
// without a variance for the cell: a lattice's masses have the belief's own.
const leastSigma = 0.5

// blunt is the variance of a measurement on a lattice over that of the first part
// of its noise, along the first row: above 1 the lattice adds to it.
func (w *noiseWork) blunt(t *Terms, i int, least float64) float32 {
	if flat := t.Flat[i]; flat == flat {
		return 0
	}
	row := t.Row[i*w.m*2 : (i+1)*w.m*2]
	g := float64(row[0]*row[0]) + float64(row[1]*row[1])
	return float32(float64(least*g) * w.power / w.noise(0, t.Extra[i]).a)
}

// density returns the log likelihood at a point of a lattice, on which no
// measurement is sharper than the variance least along each axis.
func (w *noiseWork) density(t *Terms, i int, least float64) float64 {
	if flat := t.Flat[i]; flat == flat {
		return float64(w.power * flat)
	}
	m := w.m
	var r [2]float64
	copy(r[:], t.Residual[i*m:(i+1)*m])
	p := t.ofPosition(i, m, least)
	if len(w.parts) == 1 && math.IsInf(w.logFlat, -1) {
		log, _ := w.part(0, w.short(0, p, t.Extra[i]), r, t.Extra[i])
		return float64(w.power*w.logW[0]) + log
	}
	var logs [maxParts]float64
	most := w.logFlat
	for c := range w.parts {
		l, _ := w.part(c, w.short(c, p, t.ExtraOf(i, c)), r, t.ExtraOf(i, c))
		logs[c] = w.logW[c] + l/w.power
		most = math.Max(most, logs[c])
	}
	if math.IsInf(most, -1) {
		return most
	}
	sum := kernel.Exp(w.logFlat - most)
	for c := range w.parts {
		sum += kernel.Exp(logs[c] - most)
	}
	return float64(w.power * (most + kernel.Log(sum)))
}

// simple says whether the noise is one Gaussian of one component, with outliers or
// without, that counts in full.
func (w *noiseWork) simple() bool { return w.m == 1 && len(w.parts) == 1 && w.power == 1 }

// densities writes noiseWork.density of n points into w.cellLogs, for a simple
// noise.
func (w *Workspace) densities(nw *noiseWork, n int, least float64) {
	t, noise, mean := &w.terms, nw.parts[0].Cov[0], nw.parts[0].Mean
	w.cellLogs, w.residual, w.variance = resize(w.cellLogs, n), resize(w.residual, n), resize(w.variance, n)
	for j := range n {
		if flat := t.Flat[j]; flat == flat {
			w.residual[j], w.variance[j] = 0, 1
			continue
		}
		e, n := t.Row[2*j], t.Row[2*j+1]
		v := noise + t.Extra[j]
		if wide := float64(least * (float64(e*e) + float64(n*n))); wide > v {
			v = (wide - v) + v
		}
		w.residual[j], w.variance[j] = t.Residual[j]-mean, v
	}
	kernel.LogNormal(w.cellLogs, w.residual, w.variance, nw.logW[0])
	if !math.IsInf(nw.logFlat, -1) {
		kernel.LogAdd(w.cellLogs, nw.logFlat)
	}
	for j, flat := range t.Flat {
		if flat == flat {
			w.cellLogs[j] = flat
		}
	}
}

// short returns the least variance that makes the noise of part c as wide as a
// covariance along every direction.
func (w *noiseWork) short(c int, least sym2, extra float64) sym2 {
	n := w.noise(c, extra)
	return sym2{n.a / w.power, n.b / w.power, n.c / w.power}.short(w.m, least)
}

// short returns the least covariance that makes s as wide as another one along
// every direction.
func (s sym2) short(m int, least sym2) sym2 {
	if m == 1 {
		return sym2{a: math.Max(0, least.a-s.a)}
	}
	d := sym2{least.a - s.a, least.b - s.b, least.c - s.c}
	mid, half := 0.5*(d.a+d.c), 0.5*(d.a-d.c)
	r := math.Sqrt(float64(half*half) + float64(d.b*d.b))
	switch {
	case mid+r <= 0:
		return sym2{}
	case mid-r >= 0:
		return d
	}
	// The positive eigenvalue times its projection, (d - (mid - r)·1)/2r.
	x := (mid + r) / (2 * r)
	return sym2{float64(x * (d.a - mid + r)), float64(x * d.b), float64(x * (d.c - mid + r))}
}
