package terrain

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"math"
	"strconv"

	"leadline/engine/geo"
)

// Unstated is what a raster says of a property that nobody told.
const Unstated = "unstated"

// Meta is what a raster knows about its heights beside the heights.
type Meta struct {
	VerticalDatum string  // what heights are above; "" is made Unstated
	SigmaM        float64 // standard deviation of the map's own vertical error; 0 is unstated
	Source        string  // where the heights come from; "" is made Unstated
	Licence       string  // licence text or name; "" is made Unstated
}

// z95 is the 95 % point of the normal distribution, so that 90 % of errors
// are within ±z95 standard deviations.
const z95 = 1.6448536269514722

// SigmaFromLE90 turns a linear error at 90 % into a standard deviation, for
// normal errors: 30 m (the specification of DTED level 1) is 18.2 m, 16 m
// (that of SRTM) 9.73 m.
func SigmaFromLE90(le90M float64) float64 { return le90M / z95 }

// Scan is what one pass over the heights finds.
type Scan struct {
	MinM, MaxM             float64 // range of the known heights
	Voids                  int     // samples without a height
	Col0, Col1, Row0, Row1 int     // the known samples lie in these columns and rows, ends included
}

// Raster is a height raster; a geo.Field in the frame around its middle. Make
// one with New. Its methods may be used by many goroutines at once.
type Raster struct {
	grid        Grid
	heights     []float32 // row-major, NaN is void
	meta        Meta
	scan        Scan
	fingerprint string
	frame       geo.Frame
	bounds      geo.Box
	mapping     *mapping
	slackC      float64 // a centimetre, in columns and in rows
	slackR      float64
}

var _ geo.Field = (*Raster)(nil)

// New makes a raster of heights in metres, up, row by row from the north;
// NaN is a void. It keeps heights, which the caller must not change after.
// Errors: an impossible grid or meta, an infinite height, no height at all.
//
// Heights are float32: at 9000 m the rounding is 0.5 mm.
func New(g Grid, heights []float32, meta Meta) (*Raster, error) {
	if err := g.Check(); err != nil {
		return nil, err
	}
	if len(heights) != g.Cols*g.Rows {
		return nil, fmt.Errorf("%d heights do not fill %d columns × %d rows", len(heights), g.Cols, g.Rows)
	}
	scan := Scan{MinM: math.Inf(1), MaxM: math.Inf(-1), Col0: g.Cols, Row0: g.Rows, Col1: -1, Row1: -1}
	for r := range g.Rows {
		for c, h := range heights[r*g.Cols : (r+1)*g.Cols] {
			if h != h {
				scan.Voids++
				heights[r*g.Cols+c] = float32(math.NaN()) // one bit pattern for one fingerprint
				continue
			}
			x := float64(h)
			if math.IsInf(x, 0) {
				return nil, fmt.Errorf("the height in column %d, row %d is infinite: mark unknown heights as NODATA", c, r)
			}
			scan.MinM, scan.MaxM = math.Min(scan.MinM, x), math.Max(scan.MaxM, x)
			scan.Col0, scan.Col1 = min(scan.Col0, c), max(scan.Col1, c)
			scan.Row0, scan.Row1 = min(scan.Row0, r), max(scan.Row1, r)
		}
	}
	meta = meta.filled()
	return Restore(g, heights, meta, scan, Fingerprint(g, heights, meta))
}

// Restore makes a raster without reading its heights, from what New found
// when it was made: for files that carry checksums of their own.
func Restore(g Grid, heights []float32, meta Meta, scan Scan, fingerprint string) (*Raster, error) {
	if err := g.Check(); err != nil {
		return nil, err
	}
	meta = meta.filled()
	switch {
	case len(heights) != g.Cols*g.Rows:
		return nil, fmt.Errorf("%d heights do not fill %d columns × %d rows", len(heights), g.Cols, g.Rows)
	case !geo.Finite(meta.SigmaM) || meta.SigmaM < 0:
		return nil, fmt.Errorf("the vertical sigma is %v m: it must be a finite number, at least 0 (0: unstated)", meta.SigmaM)
	case scan.Voids == len(heights) || scan.Col0 > scan.Col1 || scan.Row0 > scan.Row1:
		return nil, fmt.Errorf("all %d heights are void: is the NODATA value right?", len(heights))
	case scan.Col0 < 0 || scan.Col1 >= g.Cols || scan.Row0 < 0 || scan.Row1 >= g.Rows || scan.Voids < 0 ||
		!geo.Finite(scan.MinM, scan.MaxM) || scan.MinM > scan.MaxM:
		return nil, fmt.Errorf("the summary %+v does not fit %d columns × %d rows", scan, g.Cols, g.Rows)
	}
	r := &Raster{grid: g, heights: heights, meta: meta, scan: scan, fingerprint: fingerprint}
	r.frame = geo.NewFrame(g.Middle())
	r.bounds = g.outline(r.frame, 0, float64(g.Cols-1), 0, float64(g.Rows-1))
	if reach := math.Max(r.bounds.Max.Norm(), r.bounds.Min.Norm()); !(reach <= maxReachM) {
		return nil, fmt.Errorf("the grid reaches %.0f km from its middle, over the limit of %.0f km of a local frame: cut out the region needed, for example with gdal_translate -projwin", reach/1000, maxReachM/1000)
	}
	var err error
	if r.mapping, err = newMapping(r.frame, g, r.bounds); err != nil {
		return nil, err
	}
	eM, nM := g.stepM(float64(g.Cols-1)/2, float64(g.Rows-1)/2)
	r.slackC, r.slackR = 0.01/eM, 0.01/nM
	return r, nil
}

func (m Meta) filled() Meta {
	for _, s := range []*string{&m.VerticalDatum, &m.Source, &m.Licence} {
		if *s == "" {
			*s = Unstated
		}
	}
	return m
}

// Fingerprint is the SHA-256, in hexadecimal, of everything a posterior
// depends on: CRS, grid, vertical datum, sigma, and the heights as
// little-endian float32. Source and licence stay out.
func Fingerprint(g Grid, heights []float32, meta Meta) string {
	f := func(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }
	meta = meta.filled()
	sum := sha256.New()
	fmt.Fprintf(sum, "heights 1\n%v\n%d %d\n%s %s %s %s\n%q\n%s\n", g.CRS, g.Cols, g.Rows,
		f(g.FirstX), f(g.FirstY), f(g.StepX), f(g.StepY), meta.VerticalDatum, f(meta.SigmaM))
	var buf [1 << 14]byte
	for len(heights) > 0 {
		n := min(len(heights), len(buf)/4)
		for i, h := range heights[:n] {
			binary.LittleEndian.PutUint32(buf[4*i:], math.Float32bits(h))
		}
		sum.Write(buf[:4*n])
		heights = heights[n:]
	}
	return hex.EncodeToString(sum.Sum(nil))
}

// Grid returns where the samples lie.
func (r *Raster) Grid() Grid { return r.grid }

// Meta returns what is known beside the heights.
func (r *Raster) Meta() Meta { return r.meta }

// Scan returns range, voids and known part of the heights.
func (r *Raster) Scan() Scan { return r.scan }

// Fingerprint names the raster's content; see the function Fingerprint.
func (r *Raster) Fingerprint() string { return r.fingerprint }

// Samples returns the heights themselves, row by row from the north, NaN for
// voids. They must not be changed.
func (r *Raster) Samples() []float32 { return r.heights }

// Frame is the metric frame of Sample, around the raster's middle.
func (r *Raster) Frame() geo.Frame { return r.frame }

// Bounds is a box of the frame that holds the raster, at most about a metre
// larger than needed.
func (r *Raster) Bounds() geo.Box { return r.bounds }

// KnownBox is a box of the frame that holds every known height.
func (r *Raster) KnownBox() geo.Box {
	s := r.scan
	return r.grid.outline(r.frame, float64(s.Col0), float64(s.Col1), float64(s.Row0), float64(s.Row1))
}

// HeightRange returns the lowest and the highest known height in metres.
func (r *Raster) HeightRange() (minM, maxM float64) { return r.scan.MinM, r.scan.MaxM }

// StepM returns the ground distance of one column and one row in metres, at
// the raster's middle.
func (r *Raster) StepM() (eastM, northM float64) {
	return r.grid.stepM(float64(r.grid.Cols-1)/2, float64(r.grid.Rows-1)/2)
}
