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

// Bounds of a belief's message: 64 KiB of a grid; on roads each cell brings
// its place, some 25 bytes.
const (
	maxGridCells    = 1 << 16
	maxStretchCells = 4096
)

// massStep is how far apart the masses of neighbouring bytes are, as a
// logarithm.
const massStep = 1.0 / 16

// massByte is the byte for a mass, given the heaviest one's.
func massByte(mass, peak float64) byte {
	if !(mass > 0) {
		return 0
	}
	b := 255 + math.Round(kernel.Log(mass/peak)/massStep)
	return byte(min(max(b, 0), 255))
}

// beliefMessage makes a picture of a belief.
func beliefMessage(cloud *filter.Cloud, space filter.Space, level int, l filter.Lattice) *leadlinev1.Belief {
	if lines, ok := space.(filter.LineSpace); ok {
		return stretches(cloud, lines, level)
	}
	return grid(cloud, space.Frame(), l)
}

// grid makes the picture of a belief on a plane. Cells are put together by
// twos, fours and so on each way, until their rectangle is small enough.
func grid(c *filter.Cloud, frame geo.Frame, l filter.Lattice) *leadlinev1.Belief {
	cell := func(v, origin float64) int { return int(math.Floor((v-origin)/l.SpacingM + 0.5)) }
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
	by := 1
	for (floorDiv(east, by)-floorDiv(west, by)+1)*(floorDiv(north, by)-floorDiv(south, by)+1) > maxGridCells {
		by *= 2
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
		col, row := floorDiv(cell(c.East[i], l.Origin.E), by)-west, floorDiv(cell(c.North[i], l.Origin.N), by)-south
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
	out.Grid = g
	return out
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
func stretches(c *filter.Cloud, space filter.LineSpace, level int) *leadlinev1.Belief {
	out := &leadlinev1.Belief{}
	var cells []roadCell
	var least byte
	for ; ; level++ {
		cells, out.PeakMass = roadCells(cells[:0], c, space.Lines(level))
		if least = heaviest(cells); least == 1 || level == space.Levels()-1 {
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
		if r.told < least || told == maxStretchCells {
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
		for range s.Mass {
			s.Middles = append(s.Middles, wire.FromPosition(frame.Inverse(geo.Point{E: at.East[i], N: at.North[i]})))
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

// heaviest returns the least byte of which, with all above, no more than
// maxStretchCells cells are told.
func heaviest(cells []roadCell) byte {
	var count [256]int
	for _, r := range cells {
		count[r.told]++
	}
	total := 0
	for b := 255; b > 0; b-- {
		if total += count[b]; total > maxStretchCells {
			return byte(min(b+1, 255)) // of equals at the top, the first ones
		}
	}
	return 1
}
