package filter

import (
	"math"

	"leadline/engine/kernel"
)

// foldSigmas is where splitting a wide Gaussian stops: what lies beyond goes
// into the outermost piece, so that mass, mean and variance stay exact.
const foldSigmas = 3.5

// lineMove is the memory for moving Gaussians on lines: means and covariances of some that
// have moved, with what they reach over, and where they are cut, in standard deviations,
// with the standard normal there.
type lineMove struct {
	mean, cov        []float64
	wide             gaussian // one that is cut
	reach            []extent
	z, density, tail []float64
	work             kernel.EdgeWork
}

// extent is where a Gaussian is along a chart, its standard deviation, the cells' width,
// and the first and last cell that it is cut for; the same if it is not cut.
type extent struct {
	chart                   int32
	whole                   bool
	pos, sigma, first, last float64
}

// lineRun is how many Gaussians are moved before they are cut.
const lineRun = 256

// sendLines is send on lines: for a run of Gaussians after the other, so that the edges at
// which they are cut are evaluated together.
func (mv *mover) sendLines(b *Belief, w *Workspace, add []float64) {
	k, lm := mv.k, &mv.line
	p := k * (k + 1) / 2
	lm.reach = resize(lm.reach, lineRun)
	for from := 0; from < len(b.Key); from += lineRun {
		to := min(from+lineRun, len(b.Key))
		lm.z = lm.z[:0]
		lm.mean, lm.cov = append(lm.mean[:0], b.Mean[from*k:to*k]...), append(lm.cov[:0], b.Cov[from*p:to*p]...)
		for i := range to - from {
			mean, cov := lm.mean[i*k:(i+1)*k], lm.cov[i*p:(i+1)*p]
			mv.local(w, b.Dim, from+i)
			advance(mean, cov, &mv.f, add, mv.step.Q)
			lm.cuts(&lm.reach[i], mv.lines, b.Key[from+i], mean[0], cov[0])
		}
		lm.evaluate()
		at := 0
		for i := range to - from {
			mv.index = int32(from + i)
			e, mean, cov, mass := &lm.reach[i], lm.mean[i*k:(i+1)*k], lm.cov[i*p:(i+1)*p], b.Mass[from+i]
			if !e.whole {
				lm.wide.mass = mass
				copy(lm.wide.mean[:], mean)
				copy(lm.wide.cov[:], cov)
				at = mv.cut(e, &lm.wide, at)
				continue
			}
			mv.from[0] = mean[0]
			mv.place(e.chart, e.pos, mean, cov, mass, 0)
		}
	}
}

// sendLine sends one Gaussian whose position is relative to the centre of a cell of a
// chart.
func (mv *mover) sendLine(key uint64, g *gaussian) {
	lm := &mv.line
	lm.z = lm.z[:0]
	var e extent
	lm.cuts(&e, mv.lines, key, g.mean[0], g.cov[0])
	lm.evaluate()
	mv.cut(&e, g, 0)
}

// cuts finds what a Gaussian of a cell, of a position in it and its variance, reaches over,
// and appends where it is cut.
func (lm *lineMove) cuts(e *extent, ln *Lines, key uint64, along, variance float64) {
	chart, cell := LineCell(key)
	h := ln.WidthM[chart]
	e.chart, e.pos, e.sigma = chart, float64((float64(cell)+0.5)*h)+along, math.Sqrt(variance)
	e.first, e.last = 0, 0
	if e.whole = !(e.sigma > 0.5*h); e.whole {
		return
	}
	e.first, e.last = math.Floor((e.pos-foldSigmas*e.sigma)/h), math.Floor((e.pos+foldSigmas*e.sigma)/h)
	for j := e.first; j < e.last; j++ {
		lm.z = append(lm.z, (float64((j+1)*h)-e.pos)/e.sigma)
	}
}

func (lm *lineMove) evaluate() {
	n := len(lm.z)
	lm.density, lm.tail = resize(lm.density, n), resize(lm.tail, n)
	kernel.Edges(lm.density, lm.tail, lm.z, &lm.work)
}

// cut sends a Gaussian, in pieces if it is wide, of which the edges are from at on; it
// returns where those of the next one are.
func (mv *mover) cut(e *extent, g *gaussian, at int) int {
	k := mv.k
	p := k * (k + 1) / 2
	if e.whole {
		mv.from[0] = g.mean[0]
		mv.place(e.chart, e.pos, g.mean[:k], g.cov[:p], g.mass, 0)
		return at
	}
	lm := &mv.line
	var whole cutting
	whole.begin(g, k, 0)
	left := edge{z: math.Inf(-1)}
	for j := e.first; j <= e.last; j++ {
		right := edge{z: math.Inf(1)}
		if j < e.last {
			right = edge{lm.z[at], lm.density[at], lm.tail[at]}
			at++
		}
		if c := between(left, right); c.share > 0 {
			piece := &mv.piece
			whole.piece(piece, k, c)
			// A folded tail may have its mean beyond its cell: it is at home
			// where its mean is.
			mv.from[0] = piece.mean[0]
			mv.place(e.chart, e.pos+float64(e.sigma*c.mean), piece.mean[:k], piece.cov[:p], piece.mass, 0)
		}
		left = right
	}
	return at
}

// placeDepth bounds how many short edges one step may cross.
const placeDepth = 64

// place puts a Gaussian with the given mass at a position along a chart, or
// beyond its ends. It uses the mean's position as scratch.
func (mv *mover) place(chart int32, pos float64, mean, cov []float64, mass float64, depth int) {
	ln := mv.lines
	length := ln.LengthM[chart]
	if pos >= 0 && pos < length || depth == placeDepth {
		if mass < Floor {
			mv.pruned += mass
			return
		}
		cell := int32(min(max(pos/ln.WidthM[chart], 0), float64(ln.Cells[chart]-1)))
		mean[0] = pos - float64((float64(cell)+0.5)*ln.WidthM[chart])
		mv.out.add(LineKey(chart, cell), mass, mean, cov)
		mv.note(mean)
		return
	}
	links, beyond := &ln.Forward, pos-length
	if pos < 0 {
		links, beyond = &ln.Backward, pos
	}
	to, weight := links.Of(chart)
	if len(to) == 0 {
		if mv.departed != nil {
			mv.depart(chart, beyond, mean, cov, mass)
			return
		}
		mv.left += mass
		return
	}
	if mass < Floor {
		mv.pruned += mass
		return
	}
	for i, next := range to {
		p := beyond
		if pos < 0 {
			p += ln.LengthM[next]
		}
		mv.place(next, p, mean, cov, float64(mass*weight[i]), depth+1)
	}
}

// depart keeps a Gaussian that has gone beyond an end of a chart that leads
// nowhere: 0 for the start, 1 for the end, and how far along the line's direction.
func (mv *mover) depart(chart int32, beyond float64, mean, cov []float64, mass float64) {
	if mass < Floor {
		mv.pruned += mass
		return
	}
	end := int32(1)
	if beyond < 0 {
		end = 0
	}
	mean[0] = beyond
	mv.departed.add(LineKey(chart, end), mass, mean, cov)
}
