package filter

import (
	"leadline/engine/geo"
)

// Belief is probability over a space's cells. The zero value is empty; make
// one with the Seed functions. One goroutine owns a Belief.
type Belief struct {
	// Map is the fingerprint of the space, Level the cell size; Lattice says
	// where the cells of a plane are.
	Map     string
	Level   int
	Lattice Lattice
	// Dim is the number of position quantities, 1 or 2, also where
	// Quantities is empty (a plane without nuisances).
	Dim        int
	Quantities []Quantity

	Gaussians       // every belief but a plane without quantities or with velocity axes
	Tiles     Tiles // a plane without quantities
	// Axes are the positions and velocities of a plane that has velocity axes: its
	// quantities are the axes of a grid, it has no others, and its mass is in Slices.
	Axes   []Quantity
	Slices Slices
	// Tight is the variance, m², by which a lattice has yet to spread before
	// Adapt may double its spacing, which would have made the last measurement
	// blunt: see UpdateWithin.
	Tight float64

	// Counts since the belief was seeded, as fractions of the whole mass.
	Pruned  float64 // too little to carry on
	LeftMap float64 // went over the end of a line that leads nowhere
	// Restarted was given to places that the belief had not followed (Scatter).
	Restarted float64
}

// Clip gives back the memory that the columns have beyond what they hold.
func (b *Belief) Clip() {
	b.Gaussians.Clip()
	clip(&b.Tiles.At, 8)
	clip(&b.Tiles.Mass, 8)
	clip(&b.Slices.At, 8)
	clip(&b.Slices.Rows, 8)
	clip(&b.Slices.Mass, 8)
}

// Clip gives back the memory that the columns have far beyond what they hold.
func (c *Gaussians) Clip() {
	clip(&c.Key, 2)
	clip(&c.Mass, 2)
	clip(&c.Mean, 2)
	clip(&c.Cov, 2)
}

// clip leaves a part more than what there is.
func clip[T any](column *[]T, part int) {
	if n := len(*column); cap(*column) > n+n/part+8 {
		*column = append(make([]T, 0, n), *column...)
	}
}

// Lodge moves a belief's Gaussians into the memory of room, which then has theirs: where
// many beliefs are worked on by turns, each has no more than it holds between. Called
// again, it moves them back.
func (b *Belief) Lodge(room *Gaussians) {
	g := &b.Gaussians
	room.Key, room.Mass = lodge(room.Key, g.Key), lodge(room.Mass, g.Mass)
	room.Mean, room.Cov = lodge(room.Mean, g.Mean), lodge(room.Cov, g.Cov)
	*g, *room = *room, *g
}

func lodge[T any](dst, src []T) []T {
	if n := len(src); cap(dst) < n {
		dst = make([]T, 0, n+n/8)
	}
	return append(dst[:0], src...)
}

// Gaussians are the columns of a belief, one entry a Gaussian, in ascending
// order of Key; a cell holds a few of them side by side. The masses sum to 1
// between calls.
type Gaussians struct {
	Key  []uint64  // the cell, see LineKey and CellKey
	Mass []float64 //
	Mean []float64 // K a Gaussian; positions relative to the cell's centre
	Cov  []float64 // packed, K(K+1)/2 a Gaussian
}

// LineKey names a cell on a line.
func LineKey(chart, cell int32) uint64 { return uint64(uint32(chart))<<32 | uint64(uint32(cell)) }

// LineCell is the inverse of LineKey.
func LineCell(key uint64) (chart, cell int32) { return int32(key >> 32), int32(uint32(key)) }

// CellKey names a cell of a lattice, ordered by row.
func CellKey(col, row int32) uint64 {
	return uint64(uint32(row)^1<<31)<<32 | uint64(uint32(col)^1<<31)
}

// Cell is the inverse of CellKey.
func Cell(key uint64) (col, row int32) {
	return int32(uint32(key) ^ 1<<31), int32(uint32(key>>32) ^ 1<<31)
}

// Lattice says where the cells of a plane are: the centre of (col, row) is
// Origin + SpacingM·(col, row).
type Lattice struct {
	Origin   geo.Point
	SpacingM float64
}

// Centre returns the centre of a cell.
func (l Lattice) Centre(col, row int32) geo.Point {
	return geo.Point{
		E: l.Origin.E + float64(l.SpacingM*float64(col)),
		N: l.Origin.N + float64(l.SpacingM*float64(row)),
	}
}

// TileSide is the number of cells along a side of a tile.
const TileSide = 32

// Tiles hold the mass of a plane without quantities: squares of
// TileSide×TileSide cells, row by row, in ascending order of (row, column).
type Tiles struct {
	At   []TileAt
	Mass []float64 // TileSide² a tile
	// Surplus is by how much the variance of the lattice's masses exceeds
	// the belief's own (east-east, east-north, north-north, m²): what
	// changing the spacing added. Predict takes it back from the next spread;
	// Update forgets it.
	Surplus [3]float64
}

// TileAt names a tile: its first cell is (Col·TileSide, Row·TileSide).
type TileAt struct{ Col, Row int32 }

// Moved are the quantities that a step is over: the belief's own, or its axes.
func (b *Belief) Moved() []Quantity {
	if len(b.Axes) > 0 {
		return b.Axes
	}
	return b.Quantities
}

// K returns the number of quantities.
func (b *Belief) K() int { return len(b.Quantities) }

// Cloud is a belief spelled out for reading: one entry a Gaussian or occupied
// cell, with its place in the frame and its covariance there.
type Cloud struct {
	East, North         []float64 // m in the space's frame
	Mass                []float64 // sums to 1
	VarEE, VarEN, VarNN []float64 // m²: within the Gaussian, or h²/12 of a lattice cell
	// On lines: the chart and the distance from its start, with its variance.
	Chart  []int32
	AlongM []float64
	VarM2  []float64
	// Means of the quantities, K each, positions within the cell included.
	Mean []float64
}
