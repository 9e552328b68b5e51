package network

import (
	"fmt"
	"image"
	"image/color"
	"image/draw"
	"image/png"
	"io"
	"math"
	"strings"

	"leadline/engine/geo"
)

// Colours of the picture: a palette that people with any of the common colour
// deficiencies tell apart (Okabe and Ito, "Color Universal Design", 2008), on
// white.
var (
	inkColour    = color.RGBA{0x33, 0x33, 0x33, 0xff}
	faintColour  = color.RGBA{0x77, 0x77, 0x77, 0xff}
	coreColour   = color.RGBA{0x59, 0x59, 0x59, 0xff}
	onceColour   = color.RGBA{0xe6, 0x9f, 0x00, 0xff} // orange
	apartColour  = color.RGBA{0xd5, 0x5e, 0x00, 0xff} // vermilion
	tunnelColour = color.RGBA{0x00, 0x72, 0xb2, 0xff} // blue
	bridgeColour = color.RGBA{0x56, 0xb4, 0xe9, 0xff} // sky blue
	trapColour   = color.RGBA{0xcc, 0x79, 0xa7, 0xff} // reddish purple
	missColour   = color.RGBA{0x00, 0x9e, 0x73, 0xff} // bluish green
)

// Sizes of the picture in pixels.
const (
	pictureWidth = 1600
	margin       = 40
	headHeight   = 96
	footHeight   = 190
	mostHeight   = 2400
	leastHeight  = 500
)

// kind is a way to draw a road; later kinds lie over earlier ones.
type kind struct {
	label  string
	colour color.RGBA
	width  float64 // pixels
	dash   float64 // pixels on and off, 0 for a full line
	of     func(m *Map, c int32) bool
}

var kinds = []kind{
	{"drivable throughout", coreColour, 1.3, 0, func(m *Map, c int32) bool { return true }},
	{"on a bridge", bridgeColour, 4.4, 0, func(m *Map, c int32) bool { return m.Bridge(c) }},
	{"one way in or out", onceColour, 2.6, 0, func(m *Map, c int32) bool { return m.parts().strong[c] != 0 && m.parts().weak[c] == 0 }},
	{"cut off from the rest", apartColour, 3.2, 0, func(m *Map, c int32) bool { return m.parts().weak[c] != 0 }},
	{"in a tunnel", tunnelColour, 3.4, 7, func(m *Map, c int32) bool { return m.Tunnel(c) }},
}

// Picture draws the map as a PNG: roads by how they hang together and which way
// they may be driven, bridges and tunnels, what Check found, a scale bar and a north arrow. North of the
// frame is up, which is true north in the middle of the map.
func Picture(w io.Writer, m *Map) error {
	r := Check(m)
	box := geo.EmptyBox()
	for i := range m.d.East {
		box = box.Extend(geo.Point{E: m.d.East[i], N: m.d.North[i]})
	}
	// A map that is a single straight line still needs some room.
	wide := math.Max(box.Max.E-box.Min.E, 50)
	high := math.Max(box.Max.N-box.Min.N, 50)
	perM := math.Min((pictureWidth-2*margin)/wide, (mostHeight-headHeight-footHeight)/high)
	height := max(leastHeight, int(high*perM)+headHeight+footHeight)
	c := newCanvas(pictureWidth, height)
	c.perM = perM
	c.origin = geo.Point{
		E: (box.Min.E+box.Max.E)/2 - pictureWidth/2/perM,
		N: (box.Min.N+box.Max.N)/2 + (headHeight+float64(height-headHeight-footHeight)/2)/perM,
	}
	for _, k := range kinds {
		c.roads(m, k)
	}
	c.arrows(m)
	for _, s := range r.NearMisses.List {
		c.mark(c.place(m, s), missColour, circle)
	}
	for _, s := range r.Traps.List {
		c.mark(c.place(m, s), trapColour, triangle)
	}
	c.head(r)
	c.foot(r, m.oneWays())
	return png.Encode(w, c.img)
}

func (c *canvas) place(m *Map, s Spot) geo.Point {
	return c.pixel(m.frame.Forward(geo.FromDegrees(s.LonDeg, s.LatDeg)))
}

// pixel returns where a frame point is in the picture, x right and y down, as
// E and N.
func (c *canvas) pixel(p geo.Point) geo.Point {
	return geo.Point{E: (p.E - c.origin.E) * c.perM, N: (c.origin.N - p.N) * c.perM}
}

// roads strokes all roads of a kind.
func (c *canvas) roads(m *Map, k kind) {
	var line []geo.Point
	for chart := range int32(m.Charts()) {
		if !m.first(chart) || !k.of(m, chart) {
			continue
		}
		east, north := m.Polyline(chart)
		line = line[:0]
		for i := range east {
			p := c.pixel(geo.Point{E: east[i], N: north[i]})
			// What lies within half a pixel of the last point is not seen.
			if n := len(line); n > 0 && i < len(east)-1 && p.Sub(line[n-1]).Norm() < 0.5 {
				continue
			}
			line = append(line, p)
		}
		c.stroke(line, k.width, k.dash)
	}
	c.paint(k.colour)
}

func (c *canvas) head(r Report) {
	title, _, _ := strings.Cut(orUnstated(r.Source), "\n")
	c.text(margin, 44, title, bold, 26, inkColour)
	s := r.Size
	c.text(margin, 74, fmt.Sprintf("%.0f km of road, %d roads between %d junctions; %.1f %% of the directed length can be driven to from everywhere on it",
		s.RoadKM, s.Roads, s.Junctions, 100*r.Strong.Share), regular, 18, faintColour)
	// North arrow, top right.
	x, y := float64(pictureWidth-margin-14), 30.0
	c.polygon([]geo.Point{{E: x, N: y}, {E: x + 9, N: y + 30}, {E: x, N: y + 23}, {E: x - 9, N: y + 30}})
	c.paint(inkColour)
	c.text(int(x)-6, int(y)+50, "N", bold, 18, inkColour)
}

func (c *canvas) foot(r Report, oneWays int) {
	top := c.img.Bounds().Dy() - footHeight + 18
	draw.Draw(c.img, image.Rect(margin, top, pictureWidth-margin, top+1), image.NewUniform(color.RGBA{0xcc, 0xcc, 0xcc, 0xff}), image.Point{}, draw.Src)
	// Legend: two rows of kinds and marks.
	counts := []string{
		fmt.Sprintf("%.0f km", r.Strong.LargestKM),
		plural(r.Structures.Bridges, "road"),
		plural(r.Strong.Count-r.Weak.Count, "part"),
		fmt.Sprintf("%s, %.1f km", plural(r.Weak.Count-1, "part"), r.Weak.OtherKM),
		plural(r.Structures.Tunnels, "road"),
	}
	const column = 380
	cell := func(i int) (x, y int) { return margin + (i%4)*column, top + 36 + (i/4)*34 }
	for i, k := range kinds {
		x, y := cell(i)
		c.stroke([]geo.Point{{E: float64(x), N: float64(y - 6)}, {E: float64(x + 34), N: float64(y - 6)}}, math.Max(k.width, 2), k.dash)
		c.paint(k.colour)
		c.text(x+46, y, k.label+" ("+counts[i]+")", regular, 17, inkColour)
	}
	for i, mk := range []struct {
		label  string
		colour color.RGBA
		shape  func(geo.Point) []geo.Point
		n      int
	}{
		{"trap: nothing leads on", trapColour, triangle, r.Traps.Count},
		{"near miss: ends short of a road", missColour, circle, r.NearMisses.Count},
	} {
		x, y := cell(len(kinds) + i)
		c.mark(geo.Point{E: float64(x + 17), N: float64(y - 6)}, mk.colour, mk.shape)
		text := fmt.Sprintf("%s (%d", mk.label, mk.n)
		if mk.n > mostListed {
			text += fmt.Sprintf(", %d shown", mostListed)
		}
		c.text(x+46, y, text+")", regular, 17, inkColour)
	}
	x, y := cell(len(kinds) + 2)
	c.polygon(arrow(geo.Point{E: float64(x + 17), N: float64(y - 6)}, geo.Point{E: 1}))
	c.paint(inkColour)
	c.text(x+46, y, "one way, as it points ("+plural(oneWays, "road")+")", regular, 17, inkColour)
	c.scaleBar(margin, top+124)
	licence := "licence: " + strings.Join(strings.Fields(orUnstated(r.Licence)), " ")
	const most = 120 // characters that fit beside the scale bar
	if rest := []rune(licence); len(rest) > most {
		licence = string(rest[:most]) + "…"
	}
	c.text(margin+column, top+130, licence, regular, 15, faintColour)
}

// scaleBar draws a bar of 1, 2 or 5 times a power of ten metres, at most
// 340 pixels long.
func (c *canvas) scaleBar(x, y int) {
	const longest = 340 // pixels
	metres := 1.0
	for metres*c.perM > longest {
		metres /= 10
	}
	for 10*metres*c.perM <= longest {
		metres *= 10
	}
	for _, k := range []float64{5, 2} {
		if metres*k*c.perM <= longest {
			metres *= k
			break
		}
	}
	length := int(math.Round(metres * c.perM))
	bar := image.NewUniform(inkColour)
	draw.Draw(c.img, image.Rect(x, y, x+length, y+3), bar, image.Point{}, draw.Src)
	for _, end := range []int{x, x + length/2, x + length - 2} {
		draw.Draw(c.img, image.Rect(end, y-6, end+2, y+3), bar, image.Point{}, draw.Src)
	}
	label := fmt.Sprintf("%g m", metres)
	if metres >= 1000 {
		label = fmt.Sprintf("%g km", metres/1000)
	}
	c.text(x, y+24, "0", regular, 15, inkColour)
	c.text(x+length-c.textWidth(label, regular, 15), y+24, label, regular, 15, inkColour)
}

func plural(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}
