package filter

import "leadline/engine/geo"

// Space is where a vehicle can be: the part that lines and planes share. A
// Space is immutable and may be shared by any number of goroutines.
type Space interface {
	// Fingerprint identifies the map, so that a belief is never read over
	// another one.
	Fingerprint() string
	// Frame is the metric frame of all points.
	Frame() geo.Frame
}

// LineSpace is a space of directed lines (charts), joined by links. Each
// chart is cut into cells of equal width; level l has cells of about 2^l
// times the width of level 0.
type LineSpace interface {
	Space
	// Lines returns the topology at a level: the same value each time.
	Lines(level int) *Lines
	// Levels is the number of levels, at least 1.
	Levels() int
	// Sample fills the wanted columns at positions alongM[i] metres from the
	// start of chart[i]; a position beyond an end is read at that end. widthM
	// is the resolution at which the answer is used: the heading variance
	// covers at least that much of the line.
	Sample(dst *Columns, chart []int32, alongM []float64, widthM float64)
}

// Survey is what all lines of a space come to.
type Survey struct {
	LengthM float64 // of every chart, each direction its own
	Box     geo.Box // of their starts
}

// Surveyed is a LineSpace that keeps its survey, which takes a while.
type Surveyed interface {
	LineSpace
	Survey() Survey
}

// SurveyOf surveys a space.
func SurveyOf(s LineSpace) Survey {
	lines := s.Lines(s.Levels() - 1)
	n := len(lines.LengthM)
	sv := Survey{Box: geo.EmptyBox()}
	chart, along := make([]int32, n), make([]float64, n)
	for i := range chart {
		chart[i] = int32(i)
		sv.LengthM += lines.LengthM[i]
	}
	var at Columns
	at.Resize(WantPosition, 1, n)
	s.Sample(&at, chart, along, lines.WidthM[0])
	for i := range at.East {
		sv.Box = sv.Box.Extend(geo.Point{E: at.East[i], N: at.North[i]})
	}
	return sv
}

// PlaneSpace is a plane, with a height under it or without.
type PlaneSpace interface {
	Space
	// Bounds is the part of the plane that belongs to the map.
	Bounds() geo.Box
	// DetailM is the distance over which what the map says changes: the
	// lattice spacing below which nothing more is seen at the start.
	DetailM() float64
	// Sample fills the wanted columns at the points dst.East, dst.North,
	// which the caller has set.
	Sample(dst *Columns)
}

// Lines is the topology of a LineSpace at one level. All slices are indexed
// by chart and must not be changed.
type Lines struct {
	Level   int
	LengthM []float64 // true length, > 0
	Cells   []int32   // number of cells, ≥ 1
	WidthM  []float64 // LengthM / Cells
	// Forward leads on from a chart's end, Backward from its start (for a
	// vehicle that reverses). The weights of one chart's links sum to 1; a
	// chart without links leaves the map there.
	Forward, Backward Links
}

// Links lists where charts lead: those of chart c are To[Start[c]:Start[c+1]].
type Links struct {
	Start  []int32
	To     []int32
	Weight []float64
}

// Of returns the links of a chart.
func (l *Links) Of(chart int32) (to []int32, weight []float64) {
	a, b := l.Start[chart], l.Start[chart+1]
	return l.To[a:b], l.Weight[a:b]
}

// Wants is a set of columns.
type Wants uint

// The columns that a likelihood or a caller may want.
const (
	WantPosition Wants = 1 << iota // East, North, and on lines TangentE, TangentN
	WantHeading                    // Heading, Curvature, HeadingVar (lines only)
	WantHeight                     // Height, SlopeE, SlopeN, HeightVar
)

// Columns are what a space says at positions: one entry a position, all
// slices of one length. Columns that were not wanted are nil.
type Columns struct {
	Wants Wants
	// Dim is the number of position quantities: 1 on lines, 2 on a plane.
	Dim int
	// East and North are metres in the space's frame.
	East, North []float64
	// TangentE and TangentN are the unit vector along a line. Nil on a plane.
	TangentE, TangentN []float64
	// Heading is the direction of the line in radians clockwise from frame
	// north; it does not jump at vertices. Curvature is its derivative along
	// the line, rad/m. HeadingVar is the variance, rad², with which a
	// vehicle's heading follows it here: larger near junctions and bends.
	Heading, Curvature, HeadingVar []float64
	// Height in metres above the map's vertical datum, NaN where unknown;
	// its gradient in the frame (on lines: the grade times the tangent); the
	// variance of the map's own error, m².
	Height, SlopeE, SlopeN, HeightVar []float64

	kept [11][]float64 // the memory of all, in this order
}

// Resize makes the wanted columns n long and the others nil, keeping all memory: what is
// wanted changes from call to call.
func (c *Columns) Resize(wants Wants, dim, n int) {
	c.Wants, c.Dim = wants, dim
	heading, height := wants&WantHeading != 0 && dim == 1, wants&WantHeight != 0
	for i, column := range [...]struct {
		wanted bool
		s      *[]float64
	}{
		{true, &c.East},
		{true, &c.North},
		{dim == 1, &c.TangentE},
		{dim == 1, &c.TangentN},
		{heading, &c.Heading},
		{heading, &c.Curvature},
		{heading, &c.HeadingVar},
		{height, &c.Height},
		{height, &c.SlopeE},
		{height, &c.SlopeN},
		{height, &c.HeightVar},
	} {
		if !column.wanted {
			*column.s = nil
			continue
		}
		c.kept[i] = resize(c.kept[i], n)
		*column.s = c.kept[i]
	}
}

// Len returns the number of positions.
func (c *Columns) Len() int { return len(c.East) }

// Row writes the derivative of something whose gradient in the frame is
// (gE, gN) at position i with respect to the position quantities: one number
// on lines, two on a plane.
func (c *Columns) Row(dst []float64, i int, gE, gN float64) {
	if c.Dim == 1 {
		dst[0] = float64(gE*c.TangentE[i]) + float64(gN*c.TangentN[i])
		return
	}
	dst[0], dst[1] = gE, gN
}
