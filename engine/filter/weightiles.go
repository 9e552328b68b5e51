package filter

import (
	"math"

	"leadline/engine/kernel"
)

// updateTiles weighs the lattice's cells.
func (b *Belief) updateTiles(space PlaneSpace, l any, w *Workspace) (float64, error) {
	b.logTiles(space, l, w)
	return b.weighTiles(w)
}

// logTiles writes the log likelihood of every cell into w.logs.
func (b *Belief) logTiles(space PlaneSpace, l any, w *Workspace) {
	t := &b.Tiles
	w.logs = resize(w.logs, len(t.Mass))
	clear(w.logs)
	h := b.Lattice.SpacingM
	within := h * h / 12
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
	case plain:
		wants |= like.Wants()
	default:
		panic("filter: not a likelihood")
	}
	p := w.asked()
	turned, _ := l.(Turned)
	w.predictions.reset()
	for i := range t.At {
		logs := w.logs[i*tileCells : (i+1)*tileCells]
		w.at.Resize(wants, 2, tileCells)
		b.Lattice.points(&w.at, t.At[i])
		space.Sample(&w.at)
		if !linear {
			like.LogLikelihood(logs, &w.at)
			continue
		}
		m := lin.Rows()
		w.terms.Reset(tileCells, m, 2)
		lin.Linearize(&w.terms, &w.at, nil, nil)
		for x, mass := range t.tile(i) {
			if mass == 0 {
				continue
			}
			logs[x] = nw.density(&w.terms, x, within)
			if p != nil {
				w.predictions.add(mass, &w.terms, x, m, w.terms.withinCell(x, m, within), &w.at, turned)
			}
		}
	}
	if p != nil && linear {
		_, circular := l.(Circular)
		w.predictions.into(p, &noise, lin.Rows(), circular)
	}
}

// weighTiles weighs the cells by w.logs.
func (b *Belief) weighTiles(w *Workspace) (float64, error) {
	t := &b.Tiles
	owes := t.Surplus != [3]float64{}
	var prior latticeMoments
	if owes {
		prior = b.latticeMoments()
	}
	logEvidence, err := weigh(t.Mass, w.logs)
	if err != nil {
		return logEvidence, err
	}
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
	return logEvidence, nil
}

// points writes the centres of a tile's cells.
func (l Lattice) points(at *Columns, t TileAt) {
	i := 0
	for r := range int32(TileSide) {
		n := l.Centre(0, t.Row*TileSide+r).N
		for c := range int32(TileSide) {
			at.East[i] = l.Centre(t.Col*TileSide+c, 0).E
			at.North[i] = n
			i++
		}
	}
}

// withinCell is the variance of what the rows take of a position at i that has
// the variance within along each axis.
func (t *Terms) withinCell(i, m int, within float64) sym2 {
	row := t.Row[i*m*2 : (i+1)*m*2]
	p := sym2{a: float64(within * (float64(row[0]*row[0]) + float64(row[1]*row[1])))}
	if m == 2 {
		p.b = float64(within * (float64(row[0]*row[2]) + float64(row[1]*row[3])))
		p.c = float64(within * (float64(row[2]*row[2]) + float64(row[3]*row[3])))
	}
	return p
}

// density returns the log likelihood at a lattice cell whose position has the
// variance within along each axis.
func (w *noiseWork) density(t *Terms, i int, within float64) float64 {
	if flat := t.Flat[i]; flat == flat {
		return float64(w.power * flat)
	}
	m := w.m
	var r [2]float64
	copy(r[:], t.Residual[i*m:(i+1)*m])
	p := t.withinCell(i, m, within)
	if len(w.parts) == 1 && math.IsInf(w.logFlat, -1) {
		log, _ := w.part(0, p, r, t.Extra[i])
		return float64(w.power*w.logW[0]) + log
	}
	var logs [maxParts]float64
	most := w.logFlat
	for c := range w.parts {
		l, _ := w.part(c, p, r, t.ExtraOf(i, c))
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
