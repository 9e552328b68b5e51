package network

import (
	"image"
	"image/color"
	"image/draw"
	"math"
	"sync"

	"golang.org/x/image/font"
	"golang.org/x/image/font/gofont/gobold"
	"golang.org/x/image/font/gofont/goregular"
	"golang.org/x/image/font/opentype"
	"golang.org/x/image/math/fixed"
	"golang.org/x/image/vector"

	"leadline/engine/geo"
)

// canvas draws smooth shapes and text on an image. Shapes are gathered by
// stroke and polygon, then painted in one colour, so that where they overlap
// they are not darker.
type canvas struct {
	img    *image.RGBA
	shapes *vector.Rasterizer
	origin geo.Point // frame point of the top left corner
	perM   float64   // pixels a metre
}

func newCanvas(width, height int) *canvas {
	c := &canvas{img: image.NewRGBA(image.Rect(0, 0, width, height)), shapes: vector.NewRasterizer(width, height)}
	draw.Draw(c.img, c.img.Bounds(), image.White, image.Point{}, draw.Src)
	return c
}

func (c *canvas) paint(colour color.RGBA) {
	c.shapes.Draw(c.img, c.img.Bounds(), image.NewUniform(colour), image.Point{})
	c.shapes.Reset(c.img.Bounds().Dx(), c.img.Bounds().Dy())
}

// polygon gathers a closed shape. All are wound the same way, as the
// rasterizer takes those wound the other way off.
func (c *canvas) polygon(p []geo.Point) {
	area := 0.0
	for i := range p {
		q := p[(i+1)%len(p)]
		area += p[i].E*q.N - q.E*p[i].N
	}
	at := func(i int) (float32, float32) {
		if area < 0 {
			i = len(p) - 1 - i
		}
		return float32(p[i].E), float32(p[i].N)
	}
	c.shapes.MoveTo(at(0))
	for i := 1; i < len(p); i++ {
		c.shapes.LineTo(at(i))
	}
	c.shapes.ClosePath()
}

// stroke gathers a line with round joints, or with dashes.
func (c *canvas) stroke(line []geo.Point, width, dash float64) {
	travelled := 0.0
	for i := 0; i+1 < len(line); i++ {
		a, b := line[i], line[i+1]
		v := b.Sub(a)
		length := v.Norm()
		if length == 0 {
			continue
		}
		if dash == 0 {
			c.segment(a, b, width)
			if width > 2 {
				c.polygon(disc(b, width/2, 8))
			}
			continue
		}
		for s := 0.0; s < length; {
			phase := math.Mod(travelled+s, 2*dash)
			on := phase < dash
			step := math.Min(length-s, dash-math.Mod(phase, dash))
			if step < 1e-9 {
				step = 1e-9 // rounding at the end of a dash
			}
			if on {
				at := func(s float64) geo.Point { return geo.Point{E: a.E + s/length*v.E, N: a.N + s/length*v.N} }
				c.segment(at(s), at(s+step), width)
			}
			s += step
		}
		travelled += length
	}
}

func (c *canvas) segment(a, b geo.Point, width float64) {
	v := b.Sub(a)
	l := v.Norm()
	if l == 0 {
		return
	}
	n := geo.Point{E: -v.N / l * width / 2, N: v.E / l * width / 2}
	c.polygon([]geo.Point{a.Add(n), b.Add(n), b.Sub(n), a.Sub(n)})
}

func disc(p geo.Point, r float64, corners int) []geo.Point {
	out := make([]geo.Point, corners)
	for i := range out {
		d := geo.Direction(2 * math.Pi * float64(i) / float64(corners))
		out[i] = geo.Point{E: p.E + r*d.E, N: p.N + r*d.N}
	}
	return out
}

const markRadius = 7.0

func circle(p geo.Point) []geo.Point { return disc(p, markRadius, 24) }

func triangle(p geo.Point) []geo.Point {
	return []geo.Point{{E: p.E, N: p.N + markRadius}, {E: p.E + markRadius, N: p.N - markRadius}, {E: p.E - markRadius, N: p.N - markRadius}}
}

// mark draws a filled shape with a white rim.
func (c *canvas) mark(p geo.Point, colour color.RGBA, shape func(geo.Point) []geo.Point) {
	s := shape(p)
	rim := make([]geo.Point, len(s))
	for i := range s {
		rim[i] = geo.Point{E: p.E + 1.4*(s[i].E-p.E), N: p.N + 1.4*(s[i].N-p.N)}
	}
	c.polygon(rim)
	c.paint(color.RGBA{0xff, 0xff, 0xff, 0xff})
	c.polygon(s)
	c.paint(colour)
}

// typeface is one of the two faces of the Go fonts.
type typeface int

const (
	regular typeface = iota
	bold
)

var typefaces = sync.OnceValue(func() [2]*opentype.Font {
	var f [2]*opentype.Font
	for i, ttf := range [2][]byte{goregular.TTF, gobold.TTF} {
		parsed, err := opentype.Parse(ttf)
		if err != nil {
			panic("network: the built-in font does not parse: " + err.Error())
		}
		f[i] = parsed
	}
	return f
})

func face(t typeface, size float64) font.Face {
	f, err := opentype.NewFace(typefaces()[t], &opentype.FaceOptions{Size: size, DPI: 72, Hinting: font.HintingFull})
	if err != nil {
		panic("network: the built-in font has no face: " + err.Error())
	}
	return f
}

// text writes with its baseline at y.
func (c *canvas) text(x, y int, s string, t typeface, size float64, colour color.RGBA) {
	d := font.Drawer{Dst: c.img, Src: image.NewUniform(colour), Face: face(t, size), Dot: fixed.P(x, y)}
	d.DrawString(s)
}

func (c *canvas) textWidth(s string, t typeface, size float64) int {
	return font.MeasureString(face(t, size), s).Ceil()
}
