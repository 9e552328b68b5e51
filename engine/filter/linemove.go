package filter

import (
	"math"

	"leadline/engine/kernel"
)

// foldSigmas is where splitting a wide Gaussian stops: what lies beyond goes
// into the outermost piece, so that mass, mean and variance stay exact.
const foldSigmas = 3.5

// lineMove is the memory for moving Gaussians on lines: some that have moved, with what
// they reach over, and where they are cut, in standard deviations, with the standard
// normal there.
type lineMove struct {
	moved            []gaussian
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
	if len(lm.moved) == 0 {
		lm.moved, lm.reach = make([]gaussian, lineRun), make([]extent, lineRun)
	}
	for from := 0; from < len(b.Key); from += lineRun {
		to := min(from+lineRun, len(b.Key))
		lm.z = lm.z[:0]
		for i := from; i < to; i++ {
			g := &lm.moved[i-from]
			b.load(g, i, k)
			mv.advance(g, w, b.Dim, i, add)
			lm.cuts(&lm.reach[i-from], mv.lines, b.Key[i], g)
		}
		lm.evaluate()
		at := 0
		for i := range to - from {
			mv.index = int32(from + i)
			at = mv.cut(&lm.reach[i], &lm.moved[i], at)
		}
	}
}

// sendLine sends one Gaussian whose position is relative to the centre of a cell of a
// chart.
func (mv *mover) sendLine(key uint64, g *gaussian) {
	lm := &mv.line
	lm.z = lm.z[:0]
	var e extent
	lm.cuts(&e, mv.lines, key, g)
	lm.evaluate()
	mv.cut(&e, g, 0)
}

// cuts finds what a Gaussian of a cell reaches over, and appends where it is cut.
func (lm *lineMove) cuts(e *extent, ln *Lines, key uint64, g *gaussian) {
	chart, cell := LineCell(key)
	h := ln.WidthM[chart]
	e.chart, e.pos, e.sigma = chart, float64((float64(cell)+0.5)*h)+g.mean[0], math.Sqrt(g.cov[0])
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
	if e.whole {
		mv.from[0] = g.mean[0]
		mv.place(e.chart, e.pos, g, g.mass, 0)
		return at
	}
	lm := &mv.line
	var whole cutting
	whole.begin(g, mv.k, 0)
	left := edge{z: math.Inf(-1)}
	for j := e.first; j <= e.last; j++ {
		right := edge{z: math.Inf(1)}
		if j < e.last {
			right = edge{lm.z[at], lm.density[at], lm.tail[at]}
			at++
		}
		if c := between(left, right); c.share > 0 {
			whole.piece(&mv.piece, mv.k, c)
			// A folded tail may have its mean beyond its cell: it is at home
			// where its mean is.
			mv.from[0] = mv.piece.mean[0]
			mv.place(e.chart, e.pos+float64(e.sigma*c.mean), &mv.piece, mv.piece.mass, 0)
		}
		left = right
	}
	return at
}

// placeDepth bounds how many short edges one step may cross.
const placeDepth = 64

// place puts a Gaussian with the given mass at a position along a chart, or
// beyond its ends. It uses g's own mass and position as scratch.
func (mv *mover) place(chart int32, pos float64, g *gaussian, mass float64, depth int) {
	ln := mv.lines
	length := ln.LengthM[chart]
	if pos >= 0 && pos < length || depth == placeDepth {
		if mass < Floor {
			mv.pruned += mass
			return
		}
		cell := int32(min(max(pos/ln.WidthM[chart], 0), float64(ln.Cells[chart]-1)))
		g.mass = mass
		g.mean[0] = pos - float64((float64(cell)+0.5)*ln.WidthM[chart])
		mv.out.push(LineKey(chart, cell), mv.k, g)
		mv.note(g)
		return
	}
	links, beyond := &ln.Forward, pos-length
	if pos < 0 {
		links, beyond = &ln.Backward, pos
	}
	to, weight := links.Of(chart)
	if len(to) == 0 {
		if mv.departed != nil {
			mv.depart(chart, beyond, g, mass)
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
		mv.place(next, p, g, float64(mass*weight[i]), depth+1)
	}
}

// depart keeps a Gaussian that has gone beyond an end of a chart that leads
// nowhere: 0 for the start, 1 for the end, and how far along the line's direction.
func (mv *mover) depart(chart int32, beyond float64, g *gaussian, mass float64) {
	if mass < Floor {
		mv.pruned += mass
		return
	}
	end := int32(1)
	if beyond < 0 {
		end = 0
	}
	own := *g
	own.mass, own.mean[0] = mass, beyond
	mv.departed.push(LineKey(chart, end), mv.k, &own)
}
