package forecast

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
	"leadline/engine/study/track"
)

// Colours that people with any of the common colour deficiencies tell apart
// (Okabe and Ito, "Color Universal Design", 2008), on white or light grey.
var (
	groundColour = color.RGBA{0xb8, 0xb8, 0xb8, 0xff}
	limitColour  = color.RGBA{0x55, 0x55, 0x55, 0xff}
	boundColour  = color.RGBA{0x00, 0x72, 0xb2, 0xff}
	runsColour   = color.RGBA{0xd5, 0x5e, 0x00, 0xff}
	bandColour   = color.NRGBA{0xe6, 0x9f, 0x00, 0x60}
	errorColour  = color.RGBA{0xcc, 0x79, 0xa7, 0xff}
	helpColour   = color.RGBA{0x00, 0x00, 0x00, 0xff}
)

// classes are the colours of a route by its radius over the limit, darker and
// wider the worse, so that they can be told apart without colour, too.
var classes = []struct {
	upTo   float64
	name   string
	colour color.Color
	width  vg.Length
}{
	{0.5, "up to half of", color.RGBA{0x56, 0xb4, 0xe9, 0xff}, 2},
	{1, "up to", color.RGBA{0x00, 0x72, 0xb2, 0xff}, 2.8},
	{2, "up to twice", color.RGBA{0xe6, 0x9f, 0x00, 0xff}, 3.8},
	{math.Inf(1), "beyond twice", color.RGBA{0xd5, 0x5e, 0x00, 0xff}, 5},
}

const (
	pictureDPI   = 160
	pictureWide  = 9 * vg.Inch
	profileHigh  = 3.2 * vg.Inch
	mapMost      = 7.5 * vg.Inch
	leastRadiusM = 0.01
	reliefCells  = 500 // of the relief's longer side
)

// Picture draws a forecast as a PNG: the predicted radius along the way over the
// map with the route.
func (f *Forecast) Picture(w io.Writer, g track.Ground) error {
	profile, err := f.profile()
	if err != nil {
		return err
	}
	ground, wide, high, err := f.chart(g)
	if err != nil {
		return err
	}
	mapHigh := pictureWide * vg.Length(high/wide)
	mapWide := pictureWide
	if mapHigh > mapMost {
		mapHigh, mapWide = mapMost, pictureWide*mapMost/mapHigh
	}
	pad := vg.Points(10)
	keyHigh := vg.Points(15 * 6)
	total := profileHigh + mapHigh + keyHigh + 4*pad
	img := vgimg.NewWith(vgimg.UseWH(pictureWide+2*pad, total), vgimg.UseDPI(pictureDPI), vgimg.UseBackgroundColor(color.White))
	c := draw.New(img)
	keys := [2]plot.Legend{ground.Legend, profile.Legend}
	ground.Legend, profile.Legend = plot.NewLegend(), plot.NewLegend()
	profile.Draw(draw.Crop(c, pad, -pad, total-profileHigh-pad, -pad))
	left := (pictureWide - mapWide) / 2
	ground.Draw(draw.Crop(c, pad+left, -pad-left, keyHigh+2*pad, -profileHigh-2*pad))
	for i, key := range keys {
		key.Top, key.Left = true, true
		key.Draw(draw.Crop(c, pad+vg.Points(30)+vg.Length(i)*pictureWide/2, -pad, pad, -(total - keyHigh - pad)))
	}
	_, err = vgimg.PngCanvas{Canvas: img}.WriteTo(w)
	return err
}

func style(p *plot.Plot) {
	for _, s := range []*text.Style{&p.Title.TextStyle, &p.X.Label.TextStyle, &p.Y.Label.TextStyle, &p.X.Tick.Label, &p.Y.Tick.Label, &p.Legend.TextStyle} {
		s.Font.Variant = "Sans"
		s.Font.Size = vg.Points(9)
	}
	p.Title.TextStyle.Font.Size = vg.Points(11)
	p.Title.Padding = vg.Points(5)
	p.Legend.ThumbnailWidth = vg.Points(24)
	p.Legend.Padding = vg.Points(2)
}

// profile plots radii against the way.
func (f *Forecast) profile() (*plot.Plot, error) {
	p := plot.New()
	style(p)
	p.Title.Text = fmt.Sprintf("%s: predicted 95 %% radius along the way", f.Route)
	p.X.Label.Text, p.Y.Label.Text = "way, km", "m"
	curve := func(name string, of func(Sample) (float64, bool), c color.Color, width vg.Length, dashes ...vg.Length) error {
		var xys plotter.XYs
		for _, s := range f.Samples {
			if m, ok := of(s); ok {
				xys = append(xys, plotter.XY{X: s.WayM / 1000, Y: math.Max(m, leastRadiusM)})
			}
		}
		if len(xys) < 2 {
			return nil
		}
		l, err := plotter.NewLine(xys)
		if err != nil {
			return err
		}
		l.LineStyle = draw.LineStyle{Color: c, Width: width, Dashes: dashes}
		p.Add(l)
		p.Legend.Add(name, l)
		return nil
	}
	if f.Runs > 0 {
		var band plotter.XYs
		for _, s := range f.Samples {
			if s.Runs != nil {
				band = append(band, plotter.XY{X: s.WayM / 1000, Y: math.Max(s.Runs.Radius95P5M, leastRadiusM)})
			}
		}
		for i := len(f.Samples) - 1; i >= 0; i-- {
			if s := f.Samples[i]; s.Runs != nil {
				band = append(band, plotter.XY{X: s.WayM / 1000, Y: math.Max(s.Runs.Radius95P95M, leastRadiusM)})
			}
		}
		if len(band) > 3 {
			poly, err := plotter.NewPolygon(band)
			if err != nil {
				return nil, err
			}
			poly.Color, poly.Width = bandColour, 0
			p.Add(poly)
			p.Legend.Add(fmt.Sprintf("stated by %d runs, 5 to 95 %% of them", f.Runs), poly)
		}
		run := func(of func(*RunFigures) float64) func(Sample) (float64, bool) {
			return func(s Sample) (float64, bool) {
				if s.Runs == nil {
					return 0, false
				}
				return of(s.Runs), true
			}
		}
		if err := curve("their median", run(func(r *RunFigures) float64 { return r.Radius95P50M }), runsColour, vg.Points(2)); err != nil {
			return nil, err
		}
		if err := curve("95 % of the runs' errors", run(func(r *RunFigures) float64 { return r.ErrorP95M }), errorColour, vg.Points(1.2), vg.Points(2), vg.Points(2)); err != nil {
			return nil, err
		}
	}
	if err := curve("Cramér–Rao bound", func(s Sample) (float64, bool) { return s.BoundRadius95M, true }, boundColour, vg.Points(1.5)); err != nil {
		return nil, err
	}
	if err := curve("limit", func(Sample) (float64, bool) { return f.LimitM, true }, limitColour, vg.Points(1.2), vg.Points(6), vg.Points(4)); err != nil {
		return nil, err
	}
	p.X.Min, p.X.Max = 0, f.LengthM/1000
	p.X.Padding = 0
	p.Y.Min = 0
	if lo, hi := f.span(); hi > 8*lo { // kilometres while nothing is known, metres later
		p.Y.Scale, p.Y.Tick.Marker = plot.LogScale{}, plot.TickerFunc(decades)
		p.Y.Min, p.Y.Max = lo*0.8, hi*1.2
	} else {
		p.Y.Max = hi * 1.1
	}
	return p, nil
}

// decades marks 1, 2 and 5 times each power of ten.
func decades(lo, hi float64) (out []plot.Tick) {
	for d := math.Pow(10, math.Floor(math.Log10(lo))); d <= hi; d *= 10 {
		for _, m := range []float64{1, 2, 5} {
			if v := m * d; v >= lo && v <= hi {
				out = append(out, plot.Tick{Value: v, Label: fmt.Sprintf("%g", math.Round(v*1e6)/1e6)})
			}
		}
	}
	return out
}

// span is between which figures a profile lies.
func (f *Forecast) span() (lo, hi float64) {
	lo, hi = f.LimitM, f.LimitM
	for _, s := range f.Samples {
		for _, m := range []float64{s.Radius95M, s.BoundRadius95M} {
			lo, hi = math.Min(lo, math.Max(m, leastRadiusM)), math.Max(hi, m)
		}
	}
	return lo, hi
}

// chart plots the route over its map; wide and high are the map's size, km.
func (f *Forecast) chart(g track.Ground) (p *plot.Plot, wide, high float64, err error) {
	box := geo.EmptyBox()
	points := make([]geo.Point, len(f.Samples))
	for i, s := range f.Samples {
		points[i] = g.Frame.Forward(geo.FromDegrees(s.Lon, s.Lat))
		box = box.Extend(points[i])
	}
	side := math.Max(math.Max(box.Max.E-box.Min.E, box.Max.N-box.Min.N), 200)
	grow := func(lo, hi *float64) {
		extra := math.Max(0.08*side, (0.5*side-(*hi-*lo))/2)
		*lo, *hi = *lo-extra, *hi+extra
	}
	grow(&box.Min.E, &box.Max.E)
	grow(&box.Min.N, &box.Max.N)
	wide, high = (box.Max.E-box.Min.E)/1000, (box.Max.N-box.Min.N)/1000
	at := func(q geo.Point) plotter.XY {
		return plotter.XY{X: (q.E - box.Min.E) / 1000, Y: (q.N - box.Min.N) / 1000}
	}
	p = plot.New()
	style(p)
	lon, lat := g.Frame.Inverse(box.Min).Degrees()
	p.X.Label.Text, p.Y.Label.Text = fmt.Sprintf("kilometres east of lon %.4f°, lat %.4f°", lon, lat), "kilometres north"
	if g.Relief != nil {
		p.Add(plotter.NewImage(track.Relief(g.Relief, box, reliefCells), 0, 0, wide, high))
	}
	line := func(xys plotter.XYs, c color.Color, width vg.Length) (*plotter.Line, error) {
		l, err := plotter.NewLine(xys)
		if err != nil {
			return nil, err
		}
		l.LineStyle = draw.LineStyle{Color: c, Width: width}
		p.Add(l)
		return l, nil
	}
	for _, road := range g.Roads {
		of, xys := geo.EmptyBox(), make(plotter.XYs, len(road))
		for i, q := range road {
			of, xys[i] = of.Extend(q), at(q)
		}
		if len(road) > 1 && of.Min.E <= box.Max.E && of.Max.E >= box.Min.E && of.Min.N <= box.Max.N && of.Max.N >= box.Min.N {
			if _, err := line(xys, groundColour, vg.Points(0.8)); err != nil {
				return nil, 0, 0, err
			}
		}
	}
	class := func(s Sample) int {
		for i, c := range classes {
			if s.Radius95M <= c.upTo*f.LimitM {
				return i
			}
		}
		return len(classes) - 1
	}
	shown := make([]*plotter.Line, len(classes))
	for i := 1; i < len(points); {
		k := class(f.Samples[i])
		xys := plotter.XYs{at(points[i-1])}
		for ; i < len(points) && class(f.Samples[i]) == k; i++ {
			xys = append(xys, at(points[i]))
		}
		l, err := line(xys, classes[k].colour, vg.Points(float64(classes[k].width)))
		if err != nil {
			return nil, 0, 0, err
		}
		shown[k] = l
	}
	for k, l := range shown {
		if l != nil {
			p.Legend.Add(fmt.Sprintf("95 %% radius %s the limit of %.3g m", classes[k].name, f.LimitM), l)
		}
	}
	var helps plotter.XYs
	for _, s := range f.Weak {
		for _, h := range s.Help {
			helps = append(helps, at(g.Frame.Forward(geo.FromDegrees(h.Lon, h.Lat))))
		}
	}
	if len(helps) > 0 {
		s, err := plotter.NewScatter(helps)
		if err != nil {
			return nil, 0, 0, err
		}
		s.GlyphStyle = draw.GlyphStyle{Color: helpColour, Radius: vg.Points(4.5), Shape: draw.PyramidGlyph{}}
		p.Add(s)
		p.Legend.Add("a fix or beacon here would help", s)
	}
	start, err := plotter.NewScatter(plotter.XYs{at(points[0])})
	if err != nil {
		return nil, 0, 0, err
	}
	start.GlyphStyle = draw.GlyphStyle{Color: color.Black, Radius: vg.Points(4), Shape: draw.RingGlyph{}}
	p.Add(start)
	p.Legend.Add("start", start)
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = 0, wide, 0, high
	p.X.Padding, p.Y.Padding = 0, 0
	return p, wide, high, nil
}
