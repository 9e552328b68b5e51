package track

import (
	"fmt"
	"image/color"
	"io"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"

	"leadline/engine/geo"
	"leadline/engine/summary"
)

// Colours that people with any of the common colour deficiencies tell apart
// (Okabe and Ito, "Color Universal Design", 2008), on white or light grey.
var (
	roadColour   = color.RGBA{0xb8, 0xb8, 0xb8, 0xff}
	truthColour  = color.RGBA{0x00, 0x72, 0xb2, 0xff}  // blue
	meanColour   = color.RGBA{0xd5, 0x5e, 0x00, 0xff}  // vermilion
	radiusColour = color.NRGBA{0xe6, 0x9f, 0x00, 0x50} // orange, translucent
	searchColour = color.RGBA{0x55, 0x55, 0x55, 0xff}
	placeColour  = color.RGBA{0x00, 0x9e, 0x73, 0xff} // bluish green
)

const (
	pictureDPI = 160
	// pictureSide is the longer side of the map in the picture.
	pictureSide = 8 * vg.Inch
	mostCircles = 150 // radii that are drawn
)

// Picture draws the track over its ground as a PNG: the truth, the mean while
// located, its 95 % radius now and then, and the most probable places before.
func (t *Track) Picture(w io.Writer, g Ground) error {
	truth := make(plotter.XYs, 0, len(t.Truth))
	box := geo.EmptyBox()
	for _, at := range t.Truth {
		p := g.Frame.Forward(at.At)
		box = box.Extend(p)
		truth = append(truth, plotter.XY{X: p.E, Y: p.N})
	}
	var located []plotter.XYs // a line for each stretch
	var circles []plotter.XYs
	var search plotter.XYs
	was := false
	kept := 0
	for _, p := range t.Posteriors {
		if p.Status == summary.Located {
			kept++
		}
	}
	every := max(1, kept/mostCircles)
	n, drawn := 0, geo.Point{E: math.Inf(1)} // where the last circle is
	for _, p := range t.Posteriors {
		if p.Status != summary.Located {
			was = false
			at := g.Frame.Forward(p.MostProbable.Position)
			search = append(search, plotter.XY{X: at.E, Y: at.N})
			continue
		}
		if !was {
			located = append(located, nil)
		}
		was = true
		line := &located[len(located)-1]
		*line = append(*line, plotter.XY{X: p.MeanFrame.E, Y: p.MeanFrame.N})
		box = box.Extend(p.MeanFrame)
		// Where the vehicle stands, circles would cover one another.
		if n%every == 0 && p.MeanFrame.Sub(drawn).Norm() > p.Radius95M/2 {
			_, k := g.Frame.Convergence(p.MeanFrame)
			circles = append(circles, circle(p.MeanFrame, p.Radius95M*k))
			drawn = p.MeanFrame
		}
		n++
	}
	if box.Min.E > box.Max.E { // neither truth nor located: what there is
		for _, xy := range search {
			box = box.Extend(geo.Point{E: xy.X, N: xy.Y})
		}
	}
	if box.Min.E > box.Max.E {
		return fmt.Errorf("drawing the track: the drive has neither posteriors nor truth")
	}
	box = margin(box)
	origin := box.Min
	km := func(xys plotter.XYs) plotter.XYs { // of the picture, in place
		for i := range xys {
			xys[i].X, xys[i].Y = (xys[i].X-origin.E)/1000, (xys[i].Y-origin.N)/1000
		}
		return xys
	}
	p := plot.New()
	p.Title.Text = t.title()
	lon, lat := g.Frame.Inverse(origin).Degrees()
	p.X.Label.Text = fmt.Sprintf("kilometres east of lon %.4f°, lat %.4f°", lon, lat)
	p.Y.Label.Text = "kilometres north"
	style(p)
	wide, high := (box.Max.E-box.Min.E)/1000, (box.Max.N-box.Min.N)/1000
	if g.Relief != nil {
		p.Add(plotter.NewImage(Relief(g.Relief, box, reliefCells), 0, 0, wide, high))
	}
	add := func(xys plotter.XYs, c color.Color, width vg.Length, dashes ...vg.Length) (*plotter.Line, error) {
		l, err := plotter.NewLine(xys)
		if err != nil {
			return nil, err
		}
		l.LineStyle = draw.LineStyle{Color: c, Width: width, Dashes: dashes}
		p.Add(l)
		return l, nil
	}
	var legend []struct {
		name string
		of   plot.Thumbnailer
	}
	show := func(name string, of plot.Thumbnailer) {
		legend = append(legend, struct {
			name string
			of   plot.Thumbnailer
		}{name, of})
	}
	for _, road := range g.Roads {
		if xys := clip(road, box); len(xys) > 1 {
			if _, err := add(km(xys), roadColour, vg.Points(0.8)); err != nil {
				return err
			}
		}
	}
	for i, c := range circles {
		poly, err := plotter.NewPolygon(km(c))
		if err != nil {
			return err
		}
		poly.Color, poly.Width = radiusColour, 0
		p.Add(poly)
		if i == 0 {
			show("95 % radius", poly)
		}
	}
	if len(truth) > 1 {
		l, err := add(km(truth), truthColour, vg.Points(2.6))
		if err != nil {
			return err
		}
		show("truth", l)
	}
	if inside := within(search, box); len(inside) > 0 {
		s, err := plotter.NewScatter(km(inside))
		if err != nil {
			return err
		}
		s.GlyphStyle = draw.GlyphStyle{Color: searchColour, Radius: vg.Points(1.8), Shape: draw.CrossGlyph{}}
		p.Add(s)
		show("most probable, not located", s)
	}
	for i, xys := range located {
		if len(xys) < 2 {
			continue
		}
		l, err := add(km(xys), meanColour, vg.Points(1.1))
		if err != nil {
			return err
		}
		if i == 0 || len(legend) > 0 && legend[len(legend)-1].name != "mean, located" {
			show("mean, located", l)
		}
	}
	if at, names := g.places(box); len(at) > 0 {
		s, err := plotter.NewScatter(km(at))
		if err != nil {
			return err
		}
		s.GlyphStyle = draw.GlyphStyle{Color: placeColour, Radius: vg.Points(4.5), Shape: draw.PyramidGlyph{}}
		l, err := plotter.NewLabels(plotter.XYLabels{XYs: at, Labels: names})
		if err != nil {
			return err
		}
		for i := range l.TextStyle {
			l.TextStyle[i].Font.Variant, l.TextStyle[i].Font.Size = "Sans", vg.Points(8)
		}
		l.Offset = vg.Point{X: vg.Points(6), Y: vg.Points(2)}
		p.Add(s, l)
		show("post or beacon", s)
	}
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = 0, wide, 0, high
	p.X.Padding, p.Y.Padding = 0, 0
	for _, e := range legend {
		p.Legend.Add(e.name, e.of)
	}
	return save(w, p, wide, high, len(legend))
}

// save draws the plot so that its data area has the map's shape, with the
// legend of so many entries below it.
func save(w io.Writer, p *plot.Plot, wide, high float64, entries int) error {
	wantW := pictureSide * vg.Length(wide/math.Max(wide, high))
	wantH := pictureSide * vg.Length(high/math.Max(wide, high))
	key := p.Legend
	p.Legend = plot.NewLegend()
	p.Legend.TextStyle = key.TextStyle
	key.Left, key.Top = true, true
	key.XOffs, key.YOffs = vg.Points(12), -vg.Points(4)
	keyH := vg.Points(15 * float64(entries))
	width, height := wantW+vg.Inch, wantH+vg.Inch
	for range 3 {
		d := p.DataCanvas(draw.NewCanvas(vgimg.New(width, height), width, height))
		width += wantW - (d.Max.X - d.Min.X)
		height += wantH - (d.Max.Y - d.Min.Y)
	}
	if w := p.Title.TextStyle.Width(p.Title.Text); w > width { // the drive's name may be long
		p.Title.TextStyle.Font.Size *= width / w
	}
	pad := vg.Points(10)
	img := vgimg.NewWith(vgimg.UseWH(width+2*pad, height+keyH+2*pad), vgimg.UseDPI(pictureDPI), vgimg.UseBackgroundColor(color.White))
	c := draw.New(img)
	p.Draw(draw.Crop(c, pad, -pad, keyH+pad, -pad))
	key.Draw(draw.Crop(c, pad, -pad, pad, -(height + pad)))
	_, err := vgimg.PngCanvas{Canvas: img}.WriteTo(w)
	return err
}

func style(p *plot.Plot) {
	for _, s := range []*text.Style{&p.Title.TextStyle, &p.X.Label.TextStyle, &p.Y.Label.TextStyle, &p.X.Tick.Label, &p.Y.Tick.Label, &p.Legend.TextStyle} {
		s.Font.Variant = "Sans"
		s.Font.Size = vg.Points(10)
	}
	p.Title.TextStyle.Font.Size = vg.Points(12)
	p.Title.Padding = vg.Points(6)
	p.Legend.ThumbnailWidth = vg.Points(24)
	p.Legend.Padding = vg.Points(3)
}

// title says what the picture shows.
func (t *Track) title() string {
	title := t.Drive
	if t.All > 0 {
		title += fmt.Sprintf(": located in %d of %d posteriors", t.Located, t.All)
	}
	return title
}

// circle is a polygon of 48 corners: within 0.3 % of the radius.
func circle(at geo.Point, radiusM float64) plotter.XYs {
	xys := make(plotter.XYs, 48)
	for i := range xys {
		d := geo.Direction(2 * math.Pi * float64(i) / float64(len(xys)))
		xys[i] = plotter.XY{X: at.E + radiusM*d.E, Y: at.N + radiusM*d.N}
	}
	return xys
}
