package filter

import (
	"cmp"
	"math"
	"slices"

	"leadline/engine/geo"
)

// Loosen adds to dst what a belief on lines is when the lines are taken away:
// its Gaussians on the plane, each with a variance lateralM2 across its line,
// merged by moments within squares and sectors of heading, and then down to most.
// Masses are the belief's.
func (b *Belief) Loosen(dst *Loose, space LineSpace, lateralM2 float64, most int, w *Workspace) {
	w.locate(b, space, WantPosition)
	dst.gather(&b.Gaussians, &w.at, lateralM2, w)
	dst.reduce(most, w)
}

// looseM is the side of the squares in which Gaussians are merged first: a
// located belief lies in a few of them. Where there would be more than
// mostSquares, the side is doubled, so that the rest of the merging stays cheap;
// from wideSquareM on the headings are merged, too.
const (
	looseM      = 30.0
	wideSquareM = 1000.0
	mostSquares = 16
)

// looseWork is memory for what follows no lines.
type looseWork struct {
	squares   []inSquare
	gaussians []gaussian
	// What comes onto lines: its keys are indices of where.
	fresh  Gaussians
	places []Nearest
	where  []Nearest
}

// inSquare is the Gaussian i, and the square and sector in which it is.
type inSquare struct {
	e, n, h int32
	i       int
}

// gather adds Gaussians over line quantities at the places of the columns, whose
// position means are in the columns.
func (l *Loose) gather(from *Gaussians, at *Columns, lateralM2 float64, w *Workspace) {
	k := len(l.Quantities)
	heading := Index(l.Quantities, Heading)
	w.loose.squares = resize(w.loose.squares, len(from.Mass))
	entries := w.loose.squares
	for side := looseM; ; side *= 2 {
		for i := range entries {
			h := 0.0
			if side < wideSquareM { // 45° sectors, well above what tells two roads of one way apart
				h = math.Floor(geo.WrapPi(from.Mean[i*(k-1)+heading-1]) / (math.Pi / 4))
			}
			entries[i] = inSquare{int32(math.Floor(at.East[i] / side)), int32(math.Floor(at.North[i] / side)), int32(h), i}
		}
		slices.SortFunc(entries, func(a, b inSquare) int { // sums run in this order
			return cmp.Or(cmp.Compare(a.e, b.e), cmp.Compare(a.n, b.n), cmp.Compare(a.h, b.h), cmp.Compare(a.i, b.i))
		})
		squares := 0
		for i, x := range entries {
			if i == 0 || x.e != entries[i-1].e || x.n != entries[i-1].n || x.h != entries[i-1].h {
				squares++
			}
		}
		if squares <= mostSquares {
			break
		}
	}
	angular := angularMask(l.Quantities)
	for a := 0; a < len(entries); {
		var g gaussian
		first := entries[a]
		for ; a < len(entries) && entries[a].e == first.e && entries[a].n == first.n && entries[a].h == first.h; a++ {
			i := entries[a].i
			var line gaussian
			from.load(&line, i, k-1)
			if line.mass > 0 {
				piece := line.unlined(k, at.East[i], at.North[i], at.TangentE[i], at.TangentN[i], lateralM2)
				g.absorbFirst(k, &piece, angular)
			}
		}
		if g.mass > 0 {
			l.push(0, k, &g)
		}
	}
}

// unlined is a Gaussian over (along, rest) as one over (east, north, rest), k
// quantities, at a place and tangent of its line.
func (g *gaussian) unlined(k int, e, n, tE, tN, lateralM2 float64) gaussian {
	u := gaussian{mass: g.mass}
	u.mean[0], u.mean[1] = e, n
	copy(u.mean[2:k], g.mean[1:k-1])
	v := g.cov[0]
	u.cov[0] = float64(v*float64(tE*tE)) + float64(lateralM2*float64(tN*tN))
	u.cov[1] = float64((v - lateralM2) * float64(tE*tN))
	u.cov[2] = float64(v*float64(tN*tN)) + float64(lateralM2*float64(tE*tE))
	for i := 2; i < k; i++ {
		c := g.at(i-1, 0)
		u.cov[Packed(i, 0)], u.cov[Packed(i, 1)] = float64(c*tE), float64(c*tN)
		for j := 2; j <= i; j++ {
			u.cov[Packed(i, j)] = g.at(i-1, j-1)
		}
	}
	return u
}

// Depart has Predict keep what goes over the end of a line that leads nowhere,
// instead of counting it as having left the map; Departed takes it.
func (w *Workspace) Depart(keep bool) { w.departs = keep }

// Departed adds what has gone over ends since to dst, each at its distance
// beyond the end along the line's direction there, and returns its share of the
// whole; what is left of the
// belief has mass 1 again; if nothing is, it stays at those ends.
func (b *Belief) Departed(dst *Loose, space LineSpace, lateralM2 float64, most int, w *Workspace) (share float64) {
	n, k := len(w.departed.Mass), len(b.Quantities)
	if n == 0 {
		return 0
	}
	lines := space.Lines(b.Level)
	w.at.Resize(WantPosition, 1, n)
	w.chart, w.along = resize(w.chart, n), resize(w.along, n)
	for i, key := range w.departed.Key {
		chart, end := LineCell(key)
		w.chart[i], w.along[i] = chart, float64(end)*lines.LengthM[chart]
	}
	space.Sample(&w.at, w.chart, w.along, 1)
	left := 0.0
	for i, m := range w.departed.Mass {
		beyond := w.departed.Mean[i*k]
		w.at.East[i] += float64(beyond * w.at.TangentE[i])
		w.at.North[i] += float64(beyond * w.at.TangentN[i])
		left += m
	}
	dst.gather(&w.departed, &w.at, lateralM2, w)
	dst.reduce(most, w)
	stay := 0.0
	for _, m := range b.Mass {
		stay += m
	}
	if stay == 0 {
		b.stayAtEnds(lines, w)
	} else {
		for i := range b.Mass {
			b.Mass[i] /= stay
		}
	}
	w.departed.reset()
	return left / (left + stay)
}

// stayAtEnds makes a belief of which all has gone over ends one at those ends,
// since a belief is never empty: its share of the whole is then next to nothing.
func (b *Belief) stayAtEnds(lines *Lines, w *Workspace) {
	k := len(b.Quantities)
	u := w.turn(b, given)
	w.out.reset()
	var g gaussian
	for i, key := range w.departed.Key {
		w.departed.load(&g, i, k)
		chart, end := LineCell(key)
		h := lines.WidthM[chart]
		cell, at := int32(0), -h/2
		if end == 1 {
			cell, at = lines.Cells[chart]-1, h/2
		}
		g.mean[0] = at
		w.out.push(LineKey(chart, cell), k, &g)
	}
	w.merger.merge(&b.Gaussians, &w.out, k, angularMask(b.Quantities), perCell(1), nil)
	total := 0.0
	for _, m := range b.Mass {
		total += m
	}
	for i := range b.Mass {
		b.Mass[i] /= total
	}
	u.gave(b)
}
