package filter

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"leadline/engine/geo"
)

// ErrNowhere is returned by Seed when the prior does not touch the map.
var ErrNowhere = errors.New("filter: the start lies nowhere on the map")

// Seed makes a belief from a prior. On lines mass is per metre of line; on a
// plane per area. qs are the quantities (positions first, none for a plane
// without nuisances); maxCells bounds the cells it may use, at the price of
// resolution.
func Seed(space Space, prior Prior, qs []Quantity, maxCells int) (*Belief, error) {
	if len(qs) > MaxK {
		return nil, fmt.Errorf("filter: %d quantities, at most %d are possible", len(qs), MaxK)
	}
	b := &Belief{Map: space.Fingerprint(), Quantities: qs}
	switch s := space.(type) {
	case LineSpace:
		b.Dim = 1
		if len(qs) == 0 || qs[0].Name != Along {
			return nil, errors.New("filter: the first quantity on lines is " + Along)
		}
		return b, b.seedLines(s, prior, maxCells)
	case PlaneSpace:
		b.Dim = 2
		if len(qs) > 0 && (len(qs) < 2 || qs[0].Name != East || qs[1].Name != North) {
			return nil, errors.New("filter: the first quantities on a plane are " + East + " and " + North)
		}
		if len(qs) > 2 && qs[2].Axis {
			if len(qs) != 4 || qs[2].Name != VelocityEast || qs[3].Name != VelocityNorth {
				return nil, errors.New("filter: a plane with velocity axes has no other quantities")
			}
			b.Quantities, b.Axes = nil, qs
			return b, b.seedSlices(s, prior, maxCells)
		}
		return b, b.seedPlane(s, prior, maxCells)
	}
	return nil, fmt.Errorf("filter: %T is neither a LineSpace nor a PlaneSpace", space)
}

// subPoints is at how many points along each axis of a cell a prior is read.
const subPoints = 4

func (b *Belief) seedLines(s LineSpace, prior Prior, maxCells int) error {
	charts := reached(s, prior)
	level, n := 0, 0
	for ; level < s.Levels()-1; level++ {
		lines := s.Lines(level)
		n = 0
		for _, c := range charts {
			n += int(lines.Cells[c])
		}
		if n <= maxCells {
			break
		}
	}
	b.Level = level
	lines := s.Lines(level)
	heading := Index(b.Quantities, Heading)
	var at Columns
	var chart []int32
	var along, density []float64
	k := len(b.Quantities)
	b.empty(min(n, maxCells), k)
	total := 0.0
	for _, c := range charts {
		n, h := int(lines.Cells[c]), lines.WidthM[c]
		chart, along, density = resize(chart, n*subPoints), resize(along, n*subPoints), resize(density, n*subPoints)
		for i := range along {
			chart[i] = c
			along[i] = (float64(i) + 0.5) * h / subPoints
		}
		at.Resize(WantPosition|WantHeading, 1, len(along))
		s.Sample(&at, chart, along, h)
		prior.Density(density, &at)
		for i := range n {
			var g gaussian
			for j := range subPoints {
				piece := gaussian{mass: density[i*subPoints+j] * h / subPoints}
				if piece.mass == 0 {
					continue
				}
				b.priorTo(&piece, k)
				piece.mean[0] = (float64(j)+0.5)*h/subPoints - h/2
				piece.cov[0] = h * h / (12 * subPoints * subPoints)
				if heading >= 0 {
					piece.mean[heading] = geo.WrapPi(at.Heading[i*subPoints+j])
					piece.cov[Packed(heading, heading)] = at.HeadingVar[i*subPoints+j]
				}
				g.absorbFirst(k, &piece, angularMask(b.Quantities))
			}
			if g.mass > 0 {
				b.push(LineKey(c, int32(i)), k, &g)
				total += g.mass
			}
		}
	}
	return b.normalise(total)
}

// absorbFirst is absorb, also into an empty g.
func (g *gaussian) absorbFirst(k int, h *gaussian, angular uint) {
	if g.mass == 0 {
		*g = *h
		return
	}
	g.absorb(k, h, angular)
}

// priorTo gives a Gaussian the prior of the nuisances.
func (b *Belief) priorTo(g *gaussian, k int) {
	for i := b.Dim; i < k; i++ {
		g.mean[i] = b.Quantities[i].PriorMean
		g.cov[Packed(i, i)] = b.Quantities[i].PriorVar
	}
}

func (b *Belief) normalise(total float64) error {
	if !(total > 0) {
		return ErrNowhere
	}
	for i := range b.Mass {
		b.Mass[i] /= total
	}
	for i := range b.Tiles.Mass {
		b.Tiles.Mass[i] /= total
	}
	b.thinCount()
	return nil
}

func (b *Belief) thinCount() {
	if len(b.Quantities) > 0 {
		b.thin(nil)
	} else {
		b.dropTiles()
	}
}

// reached returns the charts that the prior may touch, in ascending order: by
// reading the coarsest cells, each with its own size as slack.
func reached(s LineSpace, prior Prior) []int32 {
	lines := s.Lines(s.Levels() - 1)
	box := prior.Box()
	var charts []int32
	var at Columns
	var chart []int32
	var along []float64
	for _, c := range candidates(s, lines, box) {
		if math.IsInf(box.Max.E, 1) {
			charts = append(charts, c)
			continue
		}
		n, h := int(lines.Cells[c]), lines.WidthM[c]
		chart, along = resize(chart, n), resize(along, n)
		for i := range n {
			chart[i], along[i] = c, (float64(i)+0.5)*h
		}
		at.Resize(WantPosition, 1, n)
		s.Sample(&at, chart, along, h)
		for i := range n {
			if at.East[i] >= box.Min.E-h && at.East[i] <= box.Max.E+h && at.North[i] >= box.Min.N-h && at.North[i] <= box.Max.N+h {
				charts = append(charts, c)
				break
			}
		}
	}
	return charts
}

// nearbyM is how wide a start may be whose charts are looked up, and not tried one
// after the other.
const nearbyM = 5e3

// candidates are the charts that may come near a box, ascending: all, unless it is
// small and the space finds what is near.
func candidates(s LineSpace, lines *Lines, box geo.Box) []int32 {
	n := len(lines.LengthM)
	d := box.Max.Sub(box.Min)
	if near, ok := s.(Nearby); ok && d.E < nearbyM && d.N < nearbyM {
		widest := slices.Max(lines.WidthM)
		middle := geo.Point{E: box.Min.E + d.E/2, N: box.Min.N + d.N/2}
		// A frame's metre may be shorter than a true one, by less than a tenth.
		found := near.NearLines(nil, middle, 1.1*(d.Norm()/2+2*widest))
		charts := make([]int32, len(found))
		for i, at := range found {
			charts[i] = at.Chart
		}
		slices.Sort(charts)
		return charts
	}
	charts := make([]int32, n)
	for c := range charts {
		charts[c] = int32(c)
	}
	return charts
}

func (b *Belief) seedPlane(s PlaneSpace, prior Prior, maxCells int) error {
	box, bounds := prior.Box(), s.Bounds()
	box.Min.E, box.Min.N = math.Max(box.Min.E, bounds.Min.E), math.Max(box.Min.N, bounds.Min.N)
	box.Max.E, box.Max.N = math.Min(box.Max.E, bounds.Max.E), math.Min(box.Max.N, bounds.Max.N)
	if !(box.Max.E > box.Min.E) || !(box.Max.N > box.Min.N) {
		return ErrNowhere
	}
	if math.IsInf(box.Max.E-box.Min.E, 1) || math.IsInf(box.Max.N-box.Min.N, 1) {
		return errors.New("filter: a plane without bounds needs a start with bounds")
	}
	fine := fineScale
	if len(b.Quantities) > 0 {
		fine = coarseGaussians
	}
	h := math.Min(s.DetailM(), fine*leastExtent(prior))
	if !(h > 0) {
		return fmt.Errorf("filter: no lattice with a spacing of %v m", h)
	}
	parts := float64(b.headingParts())
	for (box.Max.E-box.Min.E)/h*((box.Max.N-box.Min.N)/h)*parts > float64(maxCells) {
		h *= 2
	}
	b.Lattice = Lattice{geo.Point{E: (box.Min.E + box.Max.E) / 2, N: (box.Min.N + box.Max.N) / 2}, h}
	if p, ok := prior.(AtPoint); ok {
		b.Lattice.Origin = p.Point
	}
	col0 := int32(math.Floor((box.Min.E - b.Lattice.Origin.E) / h))
	col1 := int32(math.Ceil((box.Max.E - b.Lattice.Origin.E) / h))
	row0 := int32(math.Floor((box.Min.N - b.Lattice.Origin.N) / h))
	row1 := int32(math.Ceil((box.Max.N - b.Lattice.Origin.N) / h))
	if len(b.Quantities) > 0 {
		return b.seedCells(s, prior, col0, col1, row0, row1)
	}
	// What is smooth is read at the points; an area has an edge.
	finer := 1
	if _, ok := prior.(Within); ok {
		finer = subPoints
	}
	var at Columns
	at.Resize(WantPosition, 2, tileCells)
	density := make([]float64, tileCells)
	total := 0.0
	for r := floorDiv(row0, TileSide); r <= floorDiv(row1, TileSide); r++ {
		for c := floorDiv(col0, TileSide); c <= floorDiv(col1, TileSide); c++ {
			t := TileAt{c, r}
			b.Tiles.At = append(b.Tiles.At, t)
			n := len(b.Tiles.Mass)
			b.Tiles.Mass = append(b.Tiles.Mass, make([]float64, tileCells)...)
			for i := range finer * finer {
				b.Lattice.points(&at, t)
				for j := range at.East {
					at.East[j] += h * ((float64(i%finer)+0.5)/float64(finer) - 0.5)
					at.North[j] += h * ((float64(i/finer)+0.5)/float64(finer) - 0.5)
				}
				prior.Density(density, &at)
				for j, v := range density {
					if bounds.Contains(geo.Point{E: at.East[j], N: at.North[j]}) {
						b.Tiles.Mass[n+j] += v
					}
				}
			}
			for _, v := range b.Tiles.Mass[n:] {
				total += v
			}
		}
	}
	return b.normalise(total)
}

// points writes the centres of a tile's cells.
func (l Lattice) points(at *Columns, t TileAt) {
	east, north := l.axes(t)
	for r, n := range north {
		copy(at.East[r*TileSide:], east[:])
		for c := range east {
			at.North[r*TileSide+c] = n
		}
	}
}

// headingParts is how many Gaussians a cell starts with.
func (b *Belief) headingParts() int {
	if i := Index(b.Quantities, Heading); i >= 0 && b.Quantities[i].PriorVar > float64(math.Pi*math.Pi/9) {
		return headingParts // wider than ±60°: nothing is known of it
	}
	return 1
}

// seedCells puts Gaussians into the cells of a rectangle. Their own width comes
// off a point's prior; an area is blurred by it.
func (b *Belief) seedCells(s PlaneSpace, prior Prior, col0, col1, row0, row1 int32) error {
	h := b.Lattice.SpacingM
	if p, ok := prior.(AtPoint); ok {
		// What a cell holds is read as a mass at its mean: between the means lies
		// h²/12 less than the prior's variance.
		if v := p.SigmaM*p.SigmaM - (pieceWidth*pieceWidth-1.0/12)*h*h; v > 0.5*p.SigmaM*p.SigmaM {
			prior = AtPoint{p.Point, math.Sqrt(v)}
		}
	}
	bounds := s.Bounds()
	k := len(b.Quantities)
	heading := Index(b.Quantities, Heading)
	parts := b.headingParts()
	var at Columns
	at.Resize(WantPosition, 2, subPoints*subPoints)
	density := make([]float64, subPoints*subPoints)
	total := 0.0
	for row := row0; row <= row1; row++ {
		for col := col0; col <= col1; col++ {
			c := b.Lattice.Centre(col, row)
			if !bounds.Contains(c) {
				continue
			}
			for i := range density {
				at.East[i] = c.E + h*((float64(i%subPoints)+0.5)/subPoints-0.5)
				at.North[i] = c.N + h*((float64(i/subPoints)+0.5)/subPoints-0.5)
			}
			prior.Density(density, &at)
			var g gaussian
			for i, d := range density {
				if d > 0 {
					piece := gaussian{mass: d}
					b.priorTo(&piece, k)
					piece.mean[0], piece.mean[1] = at.East[i]-c.E, at.North[i]-c.N
					g.absorbFirst(k, &piece, 0)
				}
			}
			// As wide as the pieces of what is cut, so that the density is smooth.
			own := square(pieceWidth * h)
			g.cov[0], g.cov[1], g.cov[2] = own, 0, own
			if g.mass == 0 {
				continue
			}
			total += g.mass
			for i := range parts {
				p := g
				if parts > 1 {
					p.mass /= float64(parts)
					p.mean[heading] = geo.WrapPi(sectorRad * float64(i))
					p.cov[Packed(heading, heading)] = square(pieceWidth * sectorRad)
				}
				b.push(CellKey(col, row), k, &p)
			}
		}
	}
	return b.normalise(total)
}
