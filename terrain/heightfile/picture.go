package heightfile

import (
	"fmt"
	"image"
	"image/color"
	"io"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/palette/brewer"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"

	"leadline/engine/geo"
	"leadline/terrain"
)

// Figures of the picture: the map is at most 7.5 × 7.5 inches at 160 pixels an
// inch, of pictureCells shaded cells a side.
const (
	pictureDPI   = 160
	pictureSide  = 7.5 * vg.Inch
	pictureLeast = 2 * vg.Inch
	pictureCells = 1200
	barWidth     = 1.35 * vg.Inch
)

var voidColour = color.RGBA{0xd9, 0x7a, 0xa6, 0xff} // a pink that the scale never comes near, also to colour-blind eyes: it is lighter than the greens beside it

// Picture writes the raster as a PNG: a shaded relief in the local frame with
// a sequential scale (Brewer's YlGnBu, low is dark; it can be read without
// colour), a legend, a scale bar, and voids in a colour of their own.
func Picture(w io.Writer, r *terrain.Raster) error {
	b := r.Bounds()
	lo, hi := r.HeightRange()
	if hi-lo < 1 { // flat ground still needs a scale
		mid := (lo + hi) / 2
		lo, hi = mid-0.5, mid+0.5
	}
	scale := sequential()
	relief, voids := shade(r, b, lo, hi, scale)

	km := func(m float64) float64 { return m / 1000 }
	p := plot.New()
	lon, lat := r.Frame().Origin().Degrees()
	p.Title.Text = fmt.Sprintf("Heights, %d × %d samples, %s", r.Grid().Cols, r.Grid().Rows, r.Grid().CRS)
	p.X.Label.Text = fmt.Sprintf("kilometres east of %s, %s", degrees(lat, "N", "S"), degrees(lon, "E", "W"))
	p.Y.Label.Text = "kilometres north"
	sans(p)
	p.Add(plotter.NewImage(relief, km(b.Min.E), km(b.Min.N), km(b.Max.E), km(b.Max.N)), &scaleBar{voids: voids})
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = km(b.Min.E), km(b.Max.E), km(b.Min.N), km(b.Max.N)
	p.X.Padding, p.Y.Padding = 0, 0

	legend := plot.New()
	legend.Y.Label.Text = "metres above " + r.Meta().VerticalDatum
	if r.Meta().VerticalDatum == terrain.Unstated {
		legend.Y.Label.Text = "metres, vertical datum unstated"
	}
	sans(legend)
	legend.HideX()
	legend.Add(plotter.NewImage(ramp(scale), 0, lo, 1, hi))
	legend.X.Min, legend.X.Max, legend.Y.Min, legend.Y.Max = 0, 1, lo, hi
	legend.Y.Padding = 0

	// The map keeps its shape: labels and legend take the same room whatever
	// the size, so a few rounds find the page that leaves the map its due.
	wide, high := b.Max.E-b.Min.E, b.Max.N-b.Min.N
	wantW := max(pictureLeast, pictureSide*vg.Length(wide/math.Max(wide, high)))
	wantH := max(pictureLeast, pictureSide*vg.Length(high/math.Max(wide, high)))
	width, height := wantW+2*vg.Inch, wantH+vg.Inch
	for range 3 {
		d := p.DataCanvas(mapPart(draw.NewCanvas(vgimg.New(width, height), width, height)))
		width += wantW - (d.Max.X - d.Min.X)
		height += wantH - (d.Max.Y - d.Min.Y)
	}
	img := vgimg.NewWith(vgimg.UseWH(width, height), vgimg.UseDPI(pictureDPI), vgimg.UseBackgroundColor(color.White))
	canvas := draw.New(img)
	part := mapPart(canvas)
	p.Draw(part)
	// The legend stands beside the map's data area, as high as it.
	data := p.DataCanvas(part)
	side := draw.Crop(canvas, width-barWidth, -0.15*vg.Inch, data.Min.Y-canvas.Min.Y, data.Max.Y-canvas.Max.Y)
	legend.Draw(side)
	_, err := vgimg.PngCanvas{Canvas: img}.WriteTo(w)
	return err
}

// mapPart leaves room for the legend and a margin.
func mapPart(c draw.Canvas) draw.Canvas {
	const margin = 0.15 * vg.Inch
	return draw.Crop(c, margin, -barWidth-margin, margin, -margin)
}

func sans(p *plot.Plot) {
	for _, s := range []*text.Style{&p.Title.TextStyle, &p.X.Label.TextStyle, &p.Y.Label.TextStyle, &p.X.Tick.Label, &p.Y.Tick.Label} {
		s.Font.Variant = "Sans"
		s.Font.Size = font.Length(10)
	}
	p.X.Tick.Marker, p.Y.Tick.Marker = plot.TickerFunc(ticks), plot.TickerFunc(ticks)
	p.Title.TextStyle.Font.Size = font.Length(12)
	p.Title.Padding = vg.Points(6)
}

func degrees(deg float64, plus, minus string) string {
	if deg < 0 {
		deg, plus = -deg, minus
	}
	return fmt.Sprintf("%.5f° %s", deg, plus)
}

// roundBelow is the largest of 1, 2 or 5 times a power of ten up to x.
func roundBelow(x float64) float64 {
	d := math.Pow(10, math.Floor(math.Log10(x)))
	for _, m := range []float64{5, 2} {
		if m*d <= x {
			return m * d
		}
	}
	return d
}

// ticks are some six round numbers.
func ticks(lo, hi float64) (out []plot.Tick) {
	step := roundBelow((hi - lo) / 5)
	for k := math.Ceil(lo / step); k*step <= hi; k++ {
		out = append(out, plot.Tick{Value: k * step, Label: fmt.Sprintf("%.6g", k*step)})
	}
	return out
}

// sequential is the colour scale, from low to high.
func sequential() (out [256]color.RGBA) {
	p, err := brewer.GetPalette(brewer.TypeSequential, "YlGnBu", 9)
	if err != nil {
		panic("heightfile: " + err.Error()) // the palette is compiled in
	}
	c := p.Colors()
	for i := range out {
		x := (1 - float64(i)/255) * float64(len(c)-1)
		k := min(int(x), len(c)-2)
		a, _ := color.RGBAModel.Convert(c[k]).(color.RGBA)
		b, _ := color.RGBAModel.Convert(c[k+1]).(color.RGBA)
		mix := func(a, b uint8) uint8 { return uint8(math.Round(float64(a) + (x-float64(k))*(float64(b)-float64(a)))) }
		out[i] = color.RGBA{mix(a.R, b.R), mix(a.G, b.G), mix(a.B, b.B), 0xff}
	}
	return out
}

func ramp(scale [256]color.RGBA) image.Image {
	img := image.NewRGBA(image.Rect(0, 0, 1, 256))
	for i, c := range scale {
		img.SetRGBA(0, 255-i, c)
	}
	return img
}

// shade paints the box of the frame. Light comes from the north-west; slopes
// are exaggerated so that their root mean square reaches 0.35, and change the
// lightness by a fifth at most, so that the scale stays readable.
func shade(r *terrain.Raster, b geo.Box, lo, hi float64, scale [256]color.RGBA) (img *image.RGBA, voids bool) {
	wide, high := b.Max.E-b.Min.E, b.Max.N-b.Min.N
	cell := math.Max(wide, high) / pictureCells
	w, h := max(1, int(wide/cell)), max(1, int(high/cell))
	img = image.NewRGBA(image.Rect(0, 0, w, h))
	e, n := make([]float64, w), make([]float64, w)
	d := make([]geo.Heights, h)
	sum, count := 0.0, 0
	for y := range h {
		for x := range w {
			e[x] = b.Min.E + (float64(x)+0.5)*wide/float64(w)
			n[x] = b.Max.N - (float64(y)+0.5)*high/float64(h)
		}
		d[y] = geo.Heights{HeightM: make([]float64, w), SlopeE: make([]float64, w), SlopeN: make([]float64, w)}
		r.Sample(d[y], e, n)
		for x := range w {
			sum += d[y].SlopeE[x]*d[y].SlopeE[x] + d[y].SlopeN[x]*d[y].SlopeN[x]
			if d[y].HeightM[x] == d[y].HeightM[x] {
				count++
			}
		}
	}
	exaggerate := 0.0
	if sum > 0 {
		exaggerate = 0.35 / math.Sqrt(sum/float64(count))
	}
	g := r.Grid()
	for y := range h {
		for x := range w {
			m := d[y].HeightM[x]
			if m != m {
				q := geo.Point{E: b.Min.E + (float64(x)+0.5)*wide/float64(w), N: b.Max.N - (float64(y)+0.5)*high/float64(h)}
				if g.Contains(r.Frame().Inverse(q)) {
					img.SetRGBA(x, y, voidColour)
					voids = true
				}
				continue
			}
			c := scale[min(255, max(0, int(math.Round((m-lo)/(hi-lo)*255))))]
			se, sn := exaggerate*d[y].SlopeE[x], exaggerate*d[y].SlopeN[x]
			// Cosine of the angle to light 45° high in the north-west,
			// relative to level ground's.
			light := (1 + (se-sn)/math.Sqrt2) / math.Sqrt(1+se*se+sn*sn)
			f := math.Max(-0.2, math.Min(0.2, 0.25*(light-1)))
			tone := func(v uint8) uint8 {
				if f < 0 {
					return uint8(float64(v) * (1 + f))
				}
				return uint8(float64(v) + f*(255-float64(v)))
			}
			img.SetRGBA(x, y, color.RGBA{tone(c.R), tone(c.G), tone(c.B), 0xff})
		}
	}
	return img, voids
}

// scaleBar is a bar of a round length at the map's lower left, and the key to
// the void colour where there are voids.
type scaleBar struct{ voids bool }

func (s *scaleBar) Plot(c draw.Canvas, p *plot.Plot) {
	trX, _ := p.Transforms(&c)
	length := roundBelow((p.X.Max - p.X.Min) / 4)
	label := fmt.Sprintf("%g km", length)
	if length < 1 {
		label = fmt.Sprintf("%g m", math.Round(length*1000))
	}
	size := trX(p.X.Min+length) - trX(p.X.Min)
	style := p.X.Tick.Label
	style.XAlign, style.YAlign = draw.XCenter, draw.YBottom
	at := vg.Point{X: c.Min.X + vg.Points(14), Y: c.Min.Y + vg.Points(14)}
	panel := func(min, max vg.Point) {
		c.FillPolygon(color.RGBA{0xff, 0xff, 0xff, 0xff}, []vg.Point{min, {X: max.X, Y: min.Y}, max, {X: min.X, Y: max.Y}})
	}
	pad := vg.Points(6)
	panel(vg.Point{X: at.X - pad, Y: at.Y - pad}, vg.Point{X: at.X + size + pad, Y: at.Y + vg.Points(18)})
	line := draw.LineStyle{Color: color.Black, Width: vg.Points(2)}
	c.StrokeLine2(line, at.X, at.Y, at.X+size, at.Y)
	for _, x := range []vg.Length{at.X, at.X + size} {
		c.StrokeLine2(line, x, at.Y-vg.Points(2), x, at.Y+vg.Points(4))
	}
	c.FillText(style, vg.Point{X: at.X + size/2, Y: at.Y + vg.Points(3)}, label)
	if !s.voids {
		return
	}
	style.XAlign, style.YAlign = draw.XLeft, draw.YBottom
	text := "no height"
	left := at.X + size + vg.Points(24)
	box := vg.Points(11)
	panel(vg.Point{X: left - pad, Y: at.Y - pad}, vg.Point{X: left + box + vg.Points(5) + style.Width(text) + pad, Y: at.Y + vg.Points(18)})
	c.FillPolygon(voidColour, []vg.Point{{X: left, Y: at.Y}, {X: left + box, Y: at.Y}, {X: left + box, Y: at.Y + box}, {X: left, Y: at.Y + box}})
	c.FillText(style, vg.Point{X: left + box + vg.Points(5), Y: at.Y}, text)
}
