package filter

import "math"

// foldSigmas is where splitting a wide Gaussian stops: what lies beyond goes
// into the outermost piece, so that mass, mean and variance stay exact.
const foldSigmas = 3.5

// line sends a Gaussian whose position is relative to the centre of a cell of
// a chart.
func (mv *mover) line(chart, cell int32, g *gaussian) {
	h := mv.lines.WidthM[chart]
	pos := float64((float64(cell)+0.5)*h) + g.mean[0]
	sigma := math.Sqrt(g.cov[0])
	if sigma <= 0.5*h {
		mv.from[0] = g.mean[0]
		mv.place(chart, pos, g, g.mass, 0)
		return
	}
	first := math.Floor((pos - foldSigmas*sigma) / h)
	last := math.Floor((pos + foldSigmas*sigma) / h)
	var whole cutting
	whole.begin(g, mv.k, 0)
	left := edge{z: math.Inf(-1)}
	for j := first; j <= last; j++ {
		right := edge{z: math.Inf(1)}
		if j < last {
			right = edgeAt((float64((j+1)*h) - pos) / sigma)
		}
		if c := between(left, right); c.share > 0 {
			whole.piece(&mv.piece, mv.k, c)
			// A folded tail may have its mean beyond its cell: it is at home
			// where its mean is.
			mv.from[0] = mv.piece.mean[0]
			mv.place(chart, pos+float64(sigma*c.mean), &mv.piece, mv.piece.mass, 0)
		}
		left = right
	}
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
		cell := int32(math.Min(math.Max(pos/ln.WidthM[chart], 0), float64(ln.Cells[chart]-1)))
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
