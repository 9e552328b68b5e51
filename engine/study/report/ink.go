package report

import (
	"bytes"
	"fmt"
	"image/color"
	"io"
	"regexp"
	"strings"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"
	"gonum.org/v1/plot/vg/vgsvg"
)

// The inks of pictures on white. On the page each is the variable of the style
// sheet that has its name, so that there they follow light and dark. The colours
// are Okabe and Ito's ("Color Universal Design", 2008), which people with any of
// the common colour deficiencies tell apart; width and dashes tell lines apart
// without them.
var (
	paper      = color.RGBA{0xff, 0xff, 0xff, 0xff}
	ink        = color.RGBA{0x1a, 0x1b, 0x1c, 0xff}
	faint      = color.RGBA{0xdc, 0xdd, 0xde, 0xff}
	road       = color.RGBA{0xb8, 0xb9, 0xba, 0xff}
	limit      = color.RGBA{0x60, 0x61, 0x62, 0xff}
	truth      = color.RGBA{0x00, 0x72, 0xb2, 0xff} // blue
	estimate   = color.RGBA{0xd5, 0x5e, 0x00, 0xff} // vermilion
	protection = color.RGBA{0x00, 0x8a, 0x66, 0xff} // bluish green, darkened for lines
	wideInk    = color.RGBA{0xe6, 0x9f, 0x01, 0xff} // orange
	wrongInk   = color.RGBA{0xb0, 0x40, 0x80, 0xff} // reddish purple, darkened
)

var inks = map[string]color.RGBA{
	"paper": paper, "ink": ink, "faint": faint, "road": road, "limit": limit, "truth": truth,
	"estimate": estimate, "protection": protection, "wide": wideInk, "wrong": wrongInk,
}

// variables replaces inks by variables, and leaves fonts to the style sheet.
var (
	variables = func() *strings.Replacer {
		var pairs []string
		for name, c := range inks {
			pairs = append(pairs, fmt.Sprintf(":#%02X%02X%02X", c.R, c.G, c.B), ":var(--"+name+")")
		}
		return strings.NewReplacer(pairs...)
	}()
	fonts  = regexp.MustCompile(`font-family:[^;"]*;font-variant:[^;"]*;font-weight:[^;"]*;font-style:[^;"]*;`)
	prolog = regexp.MustCompile(`(?s)^.*?(<svg)[^>]*?(viewBox="[^"]*")[^>]*>`)
)

// chart is a plot with its key, which is drawn beside it or below it.
type chart struct {
	*plot.Plot
	key     plot.Legend
	entries int
	textW   vg.Length // of the longest entry
}

func (c *chart) name(name string, of ...plot.Thumbnailer) {
	c.key.Add(name, of...)
	c.entries++
	c.textW = max(c.textW, c.key.TextStyle.Width(name))
}

// keyW is the room that the key takes beside the chart. A reader's font may be a
// seventh wider than the one that is measured here, which on the page it replaces.
func (c *chart) keyW() vg.Length {
	return c.key.ThumbnailWidth + c.textW*8/7 + vg.Points(24)
}

// picture is a chart with its size.
type picture struct {
	file string // its name
	alt  string // what it shows, for those who do not see it
	*chart
	w, h vg.Length
	wide bool // takes the page's width, with its key beside it
	note string
}

const keyH = 13 // points a line

func (p *picture) on(c draw.Canvas) {
	p.key.Left, p.key.Top = true, true
	if p.wide {
		p.Draw(draw.Crop(c, 0, -p.keyW(), 0, -vg.Points(4)))
		p.key.Draw(draw.Crop(c, p.w-p.keyW()+vg.Points(10), 0, 0, -vg.Points(6)))
		return
	}
	room := vg.Points(keyH*float64(p.entries) + 6)
	p.Draw(draw.Crop(c, 0, -vg.Points(10), room, -vg.Points(4)))
	p.key.Draw(draw.Crop(c, vg.Points(34), 0, 0, -(p.h - room + vg.Points(4))))
}

// inline is the picture for the page.
func (p *picture) inline() (string, error) {
	c := vgsvg.New(p.w, p.h)
	p.on(draw.New(c))
	var b bytes.Buffer
	if _, err := c.WriteTo(&b); err != nil {
		return "", err
	}
	svg := fonts.ReplaceAllString(variables.Replace(b.String()), "")
	return prolog.ReplaceAllString(svg, fmt.Sprintf(`$1 width="%.0fpt" $2 role="img" aria-label="%s">`, p.w.Points(), escape(p.alt))), nil
}

// write writes the picture as svg or png, on white and with a title.
func (p *picture) write(w io.Writer, format, title string) error {
	style := p.Title
	defer func() { p.Title = style }()
	p.Title.Text = title
	if width := p.Title.TextStyle.Width(title); width > p.w-p.keyW() { // a drive's name may be long
		p.Title.TextStyle.Font.Size *= (p.w - p.keyW()) / width
	}
	if format == "svg" {
		c := vgsvg.New(p.w, p.h)
		p.on(draw.New(c))
		_, err := c.WriteTo(w)
		return err
	}
	c := vgimg.PngCanvas{Canvas: vgimg.NewWith(vgimg.UseWH(p.w, p.h), vgimg.UseDPI(144), vgimg.UseBackgroundColor(paper))}
	p.on(draw.New(c))
	_, err := c.WriteTo(w)
	return err
}

// newPlot is an empty chart in the page's inks.
func newPlot(x, y string) *chart {
	p := plot.New()
	p.BackgroundColor = paper
	p.X.Label.Text, p.Y.Label.Text = x, y
	for _, s := range []*text.Style{&p.Title.TextStyle, &p.X.Label.TextStyle, &p.Y.Label.TextStyle, &p.X.Tick.Label, &p.Y.Tick.Label, &p.Legend.TextStyle} {
		s.Font.Variant, s.Font.Size, s.Color = "Sans", vg.Points(9), ink
	}
	p.Title.Padding = vg.Points(4)
	for _, a := range []*plot.Axis{&p.X, &p.Y} {
		a.LineStyle.Color, a.Tick.LineStyle.Color = limit, limit
		a.Padding, a.Tick.Marker = 0, plot.TickerFunc(evenTicks)
	}
	g := plotter.NewGrid()
	g.Vertical.Color, g.Horizontal.Color = faint, faint
	p.Add(g)
	c := &chart{Plot: p, key: p.Legend}
	c.key.ThumbnailWidth, c.key.Padding = vg.Points(22), vg.Points(2)
	return c
}

// lines draws polylines as one path.
type lines struct {
	xys   []plotter.XYs
	style draw.LineStyle
}

func (l lines) Plot(c draw.Canvas, p *plot.Plot) {
	x, y := p.Transforms(&c)
	var path vg.Path
	var cut [][]vg.Point
	for _, line := range l.xys {
		points := make([]vg.Point, len(line))
		for i, q := range line {
			points[i] = vg.Point{X: x(q.X), Y: y(q.Y)}
		}
		cut = append(cut, c.ClipLinesXY(points)...)
	}
	for _, line := range cut {
		for i, at := range line {
			if i == 0 {
				path.Move(at)
			} else {
				path.Line(at)
			}
		}
	}
	if len(path) > 0 {
		c.SetLineStyle(l.style)
		c.Stroke(path)
	}
}

func (l lines) Thumbnail(c *draw.Canvas) {
	y := c.Center().Y
	c.StrokeLine2(l.style, c.Min.X, y, c.Max.X, y)
}

// dots draws marks of one size as one path.
type dots struct {
	xys   plotter.XYs
	side  vg.Length
	ink   color.Color
	cross bool
}

func (d dots) Plot(c draw.Canvas, p *plot.Plot) {
	x, y := p.Transforms(&c)
	var at []vg.Point
	for _, q := range d.xys {
		if m := (vg.Point{X: x(q.X), Y: y(q.Y)}); c.Contains(m) {
			at = append(at, m)
		}
	}
	d.draw(&c, at)
}

func (d dots) Thumbnail(c *draw.Canvas) { d.draw(c, []vg.Point{c.Center()}) }

func (d dots) draw(c *draw.Canvas, at []vg.Point) {
	if len(at) == 0 {
		return
	}
	var path vg.Path
	h := d.side / 2
	for _, m := range at {
		if d.cross {
			path.Move(vg.Point{X: m.X - h, Y: m.Y - h})
			path.Line(vg.Point{X: m.X + h, Y: m.Y + h})
			path.Move(vg.Point{X: m.X - h, Y: m.Y + h})
			path.Line(vg.Point{X: m.X + h, Y: m.Y - h})
			continue
		}
		path.Move(vg.Point{X: m.X - h, Y: m.Y - h})
		path.Line(vg.Point{X: m.X + h, Y: m.Y - h})
		path.Line(vg.Point{X: m.X + h, Y: m.Y + h})
		path.Line(vg.Point{X: m.X - h, Y: m.Y + h})
		path.Close()
	}
	if d.cross {
		c.SetLineStyle(draw.LineStyle{Color: d.ink, Width: vg.Points(0.7)})
		c.Stroke(path)
		return
	}
	c.SetColor(d.ink)
	c.Fill(path)
}
