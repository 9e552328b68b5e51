package terrain

import (
	"fmt"
	"math"

	"leadline/engine/geo"
)

// MaxSamples bounds a raster: 2 GiB of heights.
const MaxSamples = 1 << 29

// maxReachM bounds how far a raster may reach from its middle. The transverse
// Mercator series behind frames is good to 3000 km from the central meridian;
// at 1500 km the frame's scale is 2.8 % off, more than any use here bears.
const maxReachM = 1.5e6

// Grid places samples: the sample of column c and row r, both from 0, lies at
// (FirstX + c·StepX, FirstY + r·StepY) in the CRS, in degrees or metres. A
// sample is a point; where a file speaks of pixels as areas it is their
// middle. StepX is positive and StepY negative: the first row is the
// northernmost.
type Grid struct {
	CRS            CRS
	Cols, Rows     int
	FirstX, FirstY float64
	StepX, StepY   float64
}

// Check reports a grid that no raster can have.
func (g Grid) Check() error {
	switch {
	case g.CRS.IsZero():
		return fmt.Errorf("the grid has no coordinate system: name it, for example EPSG:4326 or EPSG:32633")
	case g.Cols < 2 || g.Rows < 2:
		return fmt.Errorf("the grid has %d columns and %d rows: heights between samples need at least 2 of each", g.Cols, g.Rows)
	case g.Cols > MaxSamples/g.Rows:
		return fmt.Errorf("the grid has %d × %d samples, over the limit of %d: cut it into pieces or thin it out", g.Cols, g.Rows, MaxSamples)
	case !geo.Finite(g.FirstX, g.FirstY, g.StepX, g.StepY) || g.StepX <= 0 || g.StepY >= 0:
		return fmt.Errorf("the grid begins at %v, %v with steps %v, %v: steps must be finite, the first positive and the second negative", g.FirstX, g.FirstY, g.StepX, g.StepY)
	}
	least, unit := 1e-4, "m" // a tenth of a millimetre: finer is a mistake
	if g.CRS.Geographic() {
		least, unit = 1e-9, "°"
	}
	if g.StepX < least || -g.StepY < least {
		return fmt.Errorf("the grid has steps of %v and %v %s, finer than %v %s: are they in another unit?", g.StepX, g.StepY, unit, least, unit)
	}
	lastX, lastY := g.FirstX+float64(g.Cols-1)*g.StepX, g.FirstY+float64(g.Rows-1)*g.StepY
	if g.CRS.Geographic() {
		if g.FirstY > 90 || lastY < -90 || g.FirstX < -360 || lastX > 540 {
			return fmt.Errorf("the grid covers longitude %v to %v and latitude %v to %v, which is not on the globe: is it in metres?", g.FirstX, lastX, lastY, g.FirstY)
		}
		// Beyond a quarter turn the frame's projection has no meaning.
		if lastX-g.FirstX > 120 {
			return fmt.Errorf("the grid spans %.4g° of longitude, too much for one local frame: cut out the region needed, for example with gdal_translate -projwin", lastX-g.FirstX)
		}
		return nil
	}
	tm, _ := g.CRS.TM()
	if math.Abs(g.FirstX-tm.FalseEastM) > 3e6 || math.Abs(lastX-tm.FalseEastM) > 3e6 ||
		math.Abs(g.FirstY-tm.FalseNorthM) > 1e7 || math.Abs(lastY-tm.FalseNorthM) > 1e7 {
		return fmt.Errorf("the grid covers %v to %v east and %v to %v north, outside what %v describes", g.FirstX, lastX, lastY, g.FirstY, g.CRS)
	}
	return nil
}

// Position returns the position of a column and row, which may be fractions.
func (g Grid) Position(col, row float64) geo.LonLat {
	return g.CRS.inverse(g.FirstX+float64(col*g.StepX), g.FirstY+float64(row*g.StepY))
}

// Middle returns the position of the grid's middle, the origin of its frame.
func (g Grid) Middle() geo.LonLat {
	return g.Position(float64(g.Cols-1)/2, float64(g.Rows-1)/2)
}

// Contains reports whether a position lies among the samples, edges included.
func (g Grid) Contains(p geo.LonLat) bool {
	c, r := g.index(p)
	return c >= 0 && c <= float64(g.Cols-1) && r >= 0 && r <= float64(g.Rows-1)
}

// index returns column and row of a position. Longitudes are taken the short
// way round from the grid's middle, so that grids may cross ±180°.
func (g Grid) index(p geo.LonLat) (col, row float64) {
	x, y := g.CRS.forward(p)
	if g.CRS.Geographic() {
		mid := g.FirstX + float64(float64(g.Cols-1)/2*g.StepX)
		x = mid + float64(geo.Deg(geo.WrapPi(geo.Rad(x-mid))))
	}
	return (x - g.FirstX) / g.StepX, (y - g.FirstY) / g.StepY
}

// outline returns a box of the frame that holds the samples of columns c0 to
// c1 and rows r0 to r1.
//
// Edges that are straight on the grid are arcs in the frame, of curvature
// below 1/R·tan(latitude); between points 2 km apart the sagitta is below
// (2 km)²/8R·tan = 0.08 m·tan, so a margin of 1 m holds up to latitude 85°
// and beyond it for every grid narrower than a few hundred kilometres.
func (g Grid) outline(frame geo.Frame, c0, c1, r0, r1 float64) geo.Box {
	box := geo.EmptyBox()
	const most = 2048
	var stepC, stepR int
	{
		a, b := frame.Forward(g.Position(c0, r0)), frame.Forward(g.Position(c1, r1))
		n := int(math.Min(most, math.Ceil(math.Max(math.Abs(a.E-b.E), math.Abs(a.N-b.N))/2000)+8))
		stepC, stepR = n, n
	}
	for i := 0; i <= stepC; i++ {
		c := c0 + (c1-c0)*float64(i)/float64(stepC)
		box = box.Extend(frame.Forward(g.Position(c, r0))).Extend(frame.Forward(g.Position(c, r1)))
	}
	for i := 0; i <= stepR; i++ {
		r := r0 + (r1-r0)*float64(i)/float64(stepR)
		box = box.Extend(frame.Forward(g.Position(c0, r))).Extend(frame.Forward(g.Position(c1, r)))
	}
	box.Min = box.Min.Sub(geo.Point{E: 1, N: 1})
	box.Max = box.Max.Add(geo.Point{E: 1, N: 1})
	return box
}

// stepM returns the ground distance in metres of one column and one row at a
// place of the grid, by differences over a tenth of a step.
func (g Grid) stepM(col, row float64) (eastM, northM float64) {
	f := geo.NewFrame(g.Position(col, row))
	const h = 0.05
	a, b := f.Forward(g.Position(col-h, row)), f.Forward(g.Position(col+h, row))
	c, d := f.Forward(g.Position(col, row-h)), f.Forward(g.Position(col, row+h))
	return b.Sub(a).Norm() / (2 * h), d.Sub(c).Norm() / (2 * h)
}
