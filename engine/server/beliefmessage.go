package server

import (
	"cmp"
	"math"
	"slices"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/kernel"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// BeliefReader is a session whose belief can be read, for pictures.
type BeliefReader interface {
	// ReadBelief spells out the present belief.
	ReadBelief(dst *filter.Cloud)
	// Cells says where its cells are: the level on roads, the lattice on a
	// plane.
	Cells() (level int, l filter.Lattice)
}

// picture is what is wanted of a belief.
type picture struct {
	gridCells, roadCells int  // at most
	packed               bool // without what is 0, and places as differences
}

// usual is the picture for those who do not say: 64 KiB of a grid; on roads each
// cell brings its place, some 25 bytes.
var usual = picture{gridCells: 1 << 16, roadCells: 4096}

// What may be asked for: 1 MiB of a grid; of roads 5 bytes a cell of a metre, and
// more cells are no finer than the pixels of a screen.
const (
	maxBeliefCells = 1 << 20
	maxRoadCells   = 1 << 15
)

// massStep is how far apart the masses of neighbouring bytes are, as a
// logarithm.
const massStep = 1.0 / 16

// least[b] is the least share of the heaviest mass that has the byte b: half a step below the
// middle. bytesFrom has the byte of shares from 1 down to the least that has one, at each 16th
// of a power of two, so that a logarithm is not taken a million times.
var (
	leastShare [257]float64
	bytesFrom  [24 * 16]byte
)

func init() {
	for b := range leastShare {
		leastShare[b] = kernel.Exp((float64(b) - 255.5) * massStep)
	}
	leastShare[0], leastShare[256] = 0, math.Inf(1)
	for i := range bytesFrom {
		share := math.Ldexp(1+float64(i%16)/16, i/16-len(bytesFrom)/16)
		for leastShare[int(bytesFrom[i])+1] <= share {
			bytesFrom[i]++
		}
	}
}

// massByte is the byte for a mass, given the heaviest one's: 255 plus the logarithm of its share
// in steps, rounded; 0 for less, for nothing and for NaN.
func massByte(mass, peak float64) byte {
	share := mass / peak
	switch {
	case !(share >= leastShare[1]):
		return 0
	case share >= leastShare[255]:
		return 255
	}
	// Exponent and four bits of the mantissa, from those of 2^-24 on.
	i := int(math.Float64bits(share)>>48) - (1023-len(bytesFrom)/16)<<4
	b := int(bytesFrom[i])
	for share >= leastShare[b+1] {
		b++
	}
	return byte(b)
}

// of makes a picture of a belief.
func (pic picture) of(cloud *filter.Cloud, space filter.Space, level int, l filter.Lattice) *leadlinev1.Belief {
	if lines, ok := space.(filter.LineSpace); ok {
		return pic.stretches(cloud, lines, level)
	}
	return pic.grid(cloud, space.Frame(), l)
}

// grid makes the picture of a belief on a plane. Cells are put together by
// twos, fours and so on each way, until their rectangle is small enough.
func (pic picture) grid(c *filter.Cloud, frame geo.Frame, l filter.Lattice) *leadlinev1.Belief {
	perM := 1 / l.SpacingM
	cell := func(v, origin float64) int { return int(math.Floor(float64((v-origin)*perM) + 0.5)) }
	// What is this light cannot be told even if a cell holds a hundred of it;
	// it must not widen the rectangle.
	least := 1e-9 * slices.Max(c.Mass)
	var west, south, east, north int
	first := true
	for i, m := range c.Mass {
		if m < least {
			continue
		}
		col, row := cell(c.East[i], l.Origin.E), cell(c.North[i], l.Origin.N)
		if first {
			west, east, south, north, first = col, col, row, row, false
		}
		west, east, south, north = min(west, col), max(east, col), min(south, row), max(north, row)
	}
	by, halvings := 1, 0
	for (floorDiv(east, by)-floorDiv(west, by)+1)*(floorDiv(north, by)-floorDiv(south, by)+1) > pic.gridCells {
		by, halvings = 2*by, halvings+1
	}
	west, east, south, north = floorDiv(west, by), floorDiv(east, by), floorDiv(south, by), floorDiv(north, by)
	columns := east - west + 1
	mass := make([]float64, columns*(north-south+1))
	out := &leadlinev1.Belief{}
	for i, m := range c.Mass {
		if m < least {
			out.Rest += m
			continue
		}
		col, row := cell(c.East[i], l.Origin.E)>>halvings-west, cell(c.North[i], l.Origin.N)>>halvings-south // rounded down
		mass[row*columns+col] += m
	}
	out.PeakMass = slices.Max(mass)
	g := &leadlinev1.BeliefGrid{
		Columns: uint32(columns), Rows: uint32(north - south + 1), CellM: l.SpacingM * float64(by), Mass: make([]byte, len(mass)),
	}
	for i, m := range mass {
		if g.Mass[i] = massByte(m, out.PeakMass); g.Mass[i] == 0 {
			out.Rest += m
		}
	}
	// The middle of by cells is half a cell off the middle of the first one.
	corner := func(col, row int) *leadlinev1.Position {
		at := func(i int) float64 { return (float64(i*by) + float64(by-1)/2) * l.SpacingM }
		return wire.FromPosition(frame.Inverse(l.Origin.Add(geo.Point{E: at(col), N: at(row)})))
	}
	g.First, g.FirstLast = corner(west, south), corner(east, south)
	g.LastFirst, g.Last = corner(west, north), corner(east, north)
	if pic.packed {
		g.Runs, g.Mass = withoutZeros(g.Mass)
	}
	out.Grid = g
	return out
}

// withoutZeros takes the longer runs of zeros out of a grid's bytes, in place,
// and returns how many are out and in, by turns.
func withoutZeros(mass []byte) (runs []uint32, told []byte) {
	const worth = 4 // zeros cost two numbers
	told = mass[:0]
	for i := 0; i < len(mass); {
		from := i
		for i < len(mass) && mass[i] == 0 {
			i++
		}
		if i == len(mass) {
			break
		}
		out := i - from
		from = i
		for zeros := 0; i < len(mass) && zeros < worth; i++ {
			if zeros++; mass[i] != 0 {
				zeros = 0
			}
		}
		for mass[i-1] == 0 {
			i--
		}
		runs = append(runs, uint32(out), uint32(i-from))
		if from == len(told) { // nothing has been left out before
			told = mass[:i]
		} else {
			told = append(told, mass[from:i]...)
		}
	}
	return runs, told
}

// floorDiv divides, rounding down.
func floorDiv(a, b int) int {
	q := a / b
	if a%b < 0 {
		q--
	}
	return q
}

// roadCell is a cell of a directed edge, with the byte that tells its mass.
type roadCell struct {
	chart, cell int32
	mass        float64
	told        byte
}

// stretches makes the picture of a belief on roads: of the heaviest cells, at
// a level that has few enough of them if there is one.
func (pic picture) stretches(c *filter.Cloud, space filter.LineSpace, level int) *leadlinev1.Belief {
	out := &leadlinev1.Belief{}
	var cells []roadCell
	var least byte
	for ; ; level++ {
		cells, out.PeakMass = roadCells(cells[:0], c, space.Lines(level))
		if least = heaviest(cells, pic.roadCells); least == 1 || level == space.Levels()-1 {
			break
		}
	}
	lines := space.Lines(level)
	var (
		run    *leadlinev1.BeliefStretch
		next   roadCell // that would go on with the run
		charts []int32
		alongM []float64
		told   int
	)
	for _, r := range cells {
		if r.told < least || told == pic.roadCells {
			out.Rest += r.mass
			continue
		}
		told++
		width := lines.WidthM[r.chart]
		if run == nil || r.chart != next.chart || r.cell != next.cell {
			run = &leadlinev1.BeliefStretch{Edge: uint32(r.chart), FromM: float64(r.cell) * width, CellM: width}
			out.Stretches = append(out.Stretches, run)
		}
		run.Mass = append(run.Mass, r.told)
		charts, alongM = append(charts, r.chart), append(alongM, (float64(r.cell)+0.5)*width)
		next = roadCell{chart: r.chart, cell: r.cell + 1}
	}
	var at filter.Columns
	at.Resize(filter.WantPosition, 1, len(charts))
	space.Sample(&at, charts, alongM, 0)
	frame := space.Frame()
	i := 0
	for _, s := range out.Stretches {
		var before [2]int32
		for range s.Mass {
			if pic.packed {
				here := [2]int32{int32(math.Round(100 * at.East[i])), int32(math.Round(100 * at.North[i]))}
				s.EastCm, s.NorthCm = append(s.EastCm, here[0]-before[0]), append(s.NorthCm, here[1]-before[1])
				before = here
			} else {
				s.Middles = append(s.Middles, wire.FromPosition(frame.Inverse(geo.Point{E: at.East[i], N: at.North[i]})))
			}
			i++
		}
	}
	return out
}

// roadCells appends the cells of a belief, by edge and distance, and returns
// the heaviest one's mass.
func roadCells(dst []roadCell, c *filter.Cloud, lines *filter.Lines) ([]roadCell, float64) {
	for i, m := range c.Mass {
		chart := c.Chart[i]
		cell := int32(c.AlongM[i] / lines.WidthM[chart]) // towards 0, also just before the start
		dst = append(dst, roadCell{chart: chart, cell: min(max(cell, 0), lines.Cells[chart]-1), mass: m})
	}
	order := func(a, b roadCell) int { return cmp.Or(cmp.Compare(a.chart, b.chart), cmp.Compare(a.cell, b.cell)) }
	if !slices.IsSortedFunc(dst, order) { // a mean may lie a little beyond its own cell
		slices.SortStableFunc(dst, order)
	}
	n, peak := 0, 0.0
	for _, r := range dst {
		if n > 0 && order(dst[n-1], r) == 0 {
			dst[n-1].mass += r.mass
		} else {
			dst[n] = r
			n++
		}
		peak = max(peak, dst[n-1].mass)
	}
	dst = dst[:n]
	for i := range dst {
		dst[i].told = massByte(dst[i].mass, peak)
	}
	return dst, peak
}

// heaviest returns the least byte of which, with all above, no more than so many
// cells are told.
func heaviest(cells []roadCell, most int) byte {
	var count [256]int
	for _, r := range cells {
		count[r.told]++
	}
	total := 0
	for b := 255; b > 0; b-- {
		if total += count[b]; total > most {
			return byte(min(b+1, 255)) // of equals at the top, the first ones
		}
	}
	return 1
}
