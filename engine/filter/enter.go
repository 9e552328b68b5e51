package filter

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// Nearest is the place on a line that is nearest to a point.
type Nearest struct {
	Chart  int32
	AlongM float64 // from the chart's start
	DistM  float64 // from the point, true metres
}

// Nearby is a LineSpace that finds its lines near a point.
type Nearby interface {
	LineSpace
	// NearLines appends the nearest place on each chart that comes within
	// radiusM true metres of a frame point, nearest first, then by chart.
	NearLines(dst []Nearest, p geo.Point, radiusM float64) []Nearest
}

// Entry says how what is off the lines comes onto them.
type Entry struct {
	// Hazard is the expected number of times that a vehicle on a line and in its
	// direction takes to it over the way that this is about.
	Hazard float64
	// LateralVar is the variance of a vehicle's distance from the line that it
	// is on, m², and HeadingVar of its heading about the line's, rad².
	LateralVar, HeadingVar float64
	// Among is E[exp(-D²/2L - δ²/2H)], as in Enter, summed over the lines, of a
	// vehicle that is somewhere among them and faces any way: see AmongLines.
	Among float64
}

// AmongLines is that mean for lines of so many metres in all, each direction
// counted, on an area: integrated across a line it is √(2πL), and the part
// √(2πH)/2π of the directions face along one.
func (e Entry) AmongLines(lengthM, areaM2 float64) float64 {
	return lengthM / areaM2 * math.Sqrt(2*math.Pi*e.LateralVar) * math.Sqrt(e.HeadingVar/(2*math.Pi))
}

// enterSigmas is how far around a Gaussian lines are looked for, enterMostM the
// farthest.
const (
	enterSigmas = 3.0
	enterMostM  = 100.0
	// beyondM is how far beyond a line's end a vehicle still is beside it.
	beyondM = 1.0
	// leastEntry is the mass below which nothing comes onto a line, since of what
	// it would be cut into, much would be too little to keep (Floor): it stays off.
	leastEntry = 1e-7
)

// Enter moves mass of l onto lines near by. Of a Gaussian whose place is D off a
// line and whose heading δ off the line's, both Gaussian, the part
//
//	1 - exp(-Hazard·E[exp(-D²/2L - δ²/2H)]),  L = LateralVar, H = HeadingVar,
//
// goes to the place on the line that is nearest to its mean, conditioned on D
// and δ being 0 with the variances L and H; where lines compete the hazards add
// up. What stays keeps its shape.
// Of one wider than enterMostM the part 1 - exp(-Hazard·Among) comes onto lines,
// too, of which there are too many to follow it: it is astray.
// on is the share of the whole that b has and off that of l; both are returned as
// they are then, with what is astray, and the three have the same sum.
func (l *Loose) Enter(b *Belief, space Nearby, e Entry, on, off float64, w *Workspace) (onAfter, offAfter, astray float64) {
	k := len(l.Quantities)
	heading := Index(l.Quantities, Heading)
	fresh, places, where := &w.loose.fresh, w.loose.places, w.loose.where[:0]
	fresh.reset()
	defer func() { w.loose.places, w.loose.where = places, where }()
	var moved float64
	for i := range l.Mass {
		var g gaussian
		l.load(&g, i, k)
		mean := geo.Point{E: g.mean[0], N: g.mean[1]}
		sigma := math.Sqrt(0.5*(g.cov[0]+g.cov[2]) + math.Sqrt(square(0.5*(g.cov[0]-g.cov[2]))+square(g.cov[1])))
		if sigma > enterMostM {
			part := g.mass * (1 - kernel.Exp(-e.Hazard*e.Among))
			l.Mass[i] -= part
			astray += part
			continue // wherever it is: the lines near its mean are none of its own
		}
		reach := math.Min(enterSigmas*math.Sqrt(sigma*sigma+e.LateralVar), enterMostM)
		places = space.NearLines(places[:0], mean, reach)
		if len(places) == 0 {
			continue
		}
		first, sum := len(fresh.Mass), 0.0
		w.at.Resize(WantPosition|WantHeading, 1, len(places))
		w.chart, w.along = resize(w.chart, len(places)), resize(w.along, len(places))
		for j, p := range places {
			w.chart[j], w.along[j] = p.Chart, p.AlongM
		}
		space.Sample(&w.at, w.chart, w.along, 1)
		for j := range places {
			// Where the line ends before it comes beside, its continuation will do.
			ahead := float64(w.at.TangentE[j]*(mean.E-w.at.East[j])) + float64(w.at.TangentN[j]*(mean.N-w.at.North[j]))
			if math.Abs(ahead) > beyondM {
				continue
			}
			piece, weight := g.onLine(k, heading, &w.at, j, e)
			if off*g.mass*weight*e.Hazard < leastEntry {
				continue
			}
			piece.mass = weight
			sum += weight
			fresh.push(uint64(len(where)), k-1, &piece)
			where = append(where, places[j])
		}
		if sum == 0 {
			continue
		}
		part := 1 - kernel.Exp(-e.Hazard*sum)
		for j := first; j < len(fresh.Mass); j++ {
			fresh.Mass[j] *= g.mass * part / sum
		}
		moved += g.mass * part
		l.Mass[i] -= g.mass * part
	}
	if moved == 0 && astray == 0 {
		return on, off, 0
	}
	left := math.Max(1-moved-astray, 0) // by rounding
	onAfter, offAfter, astray = on+off*moved, off*left, off*astray
	if moved > 0 {
		b.inject(space, fresh, where, on/onAfter, off/onAfter, w)
	}
	l.reduce(len(l.Mass), w)
	return onAfter, offAfter, astray
}

// onLine is a loose Gaussian as one over (along, rest) around the place j of the
// columns, with E[exp(-D²/2L - δ²/2H)]. Its first mean is relative to that place.
func (g *gaussian) onLine(k, heading int, at *Columns, j int, e Entry) (line gaussian, weight float64) {
	tE, tN := at.TangentE[j], at.TangentN[j]
	u := *g
	u.mean[0] -= at.East[j]
	u.mean[1] -= at.North[j]
	// D is the distance to the right of the line.
	var gain [2][MaxK]float64
	var p sym2
	for x := range k {
		gain[0][x] = float64(tN*g.at(x, 0)) - float64(tE*g.at(x, 1))
		gain[1][x] = g.at(x, heading)
	}
	p.a = float64(tN*gain[0][0]) - float64(tE*gain[0][1])
	p.b = gain[0][heading]
	p.c = gain[1][heading]
	r := [2]float64{
		-(float64(tN*u.mean[0]) - float64(tE*u.mean[1])),
		geo.WrapPi(at.Heading[j] - u.mean[heading]),
	}
	s := sym2{p.a + e.LateralVar, p.b, p.c + e.HeadingVar}
	log, inv := s.logNormal(2, r)
	weight = kernel.Exp(log) * math.Sqrt(e.LateralVar*e.HeadingVar)
	u.gainBy(k, 2, &gain, r, inv)
	line.mean[0] = float64(tE*u.mean[0]) + float64(tN*u.mean[1])
	copy(line.mean[1:k-1], u.mean[2:k])
	line.mean[heading-1] = geo.WrapPi(u.mean[heading])
	along := func(x int) float64 { return float64(tE*u.at(x, 0)) + float64(tN*u.at(x, 1)) }
	line.cov[0] = float64(tE*along(0)) + float64(tN*along(1))
	for x := 2; x < k; x++ {
		line.cov[Packed(x-1, 0)] = along(x)
		for y := 2; y <= x; y++ {
			line.cov[Packed(x-1, y-1)] = u.at(x, y)
		}
	}
	return line, weight
}

// inject multiplies the belief by keep and adds Gaussians, times scale, at
// places of lines; keys of from are indices of the places.
func (b *Belief) inject(space LineSpace, from *Gaussians, places []Nearest, keep, scale float64, w *Workspace) {
	k := len(b.Quantities)
	lines := space.Lines(b.Level)
	mv := w.newMover(b, Step{})
	mv.lines = lines
	u := w.turn(b, regrouped)
	mv.follow(u)
	w.out.reset()
	var g gaussian
	for i := range b.Mass {
		b.load(&g, i, k)
		g.mass *= keep
		w.out.push(b.Key[i], k, &g)
		mv.index, mv.from[0] = int32(i), g.mean[0]
		mv.note(g.mean[:])
	}
	mv.index = -1
	for i, key := range from.Key {
		from.load(&g, i, k)
		g.mass *= scale
		p := places[key]
		h := lines.WidthM[p.Chart]
		cell := int32(math.Min(math.Max(math.Floor(p.AlongM/h), 0), float64(lines.Cells[p.Chart]-1)))
		g.mean[0] += p.AlongM - float64((float64(cell)+0.5)*h)
		mv.sendLine(LineKey(p.Chart, cell), &g)
	}
	b.Pruned += mv.pruned
	b.LeftMap += mv.left
	into := w.intoFor(u, len(w.out.Key))
	w.merger.merge(&b.Gaussians, &w.out, k, mv.angular, perCell(1), into)
	w.end(u, b, &w.out, into, mv.source, mv.offset)
	total := 0.0
	for _, m := range b.Mass {
		total += m
	}
	for i := range b.Mass {
		b.Mass[i] /= total
	}
	for i := range w.departed.Mass { // relative to the belief, see Departed
		w.departed.Mass[i] /= total
	}
	b.thin(w)
}
