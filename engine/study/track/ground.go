package track

import (
	"image"
	"image/color"
	"math"

	"gonum.org/v1/plot/plotter"

	"leadline/engine/geo"
)

// Ground is what lies under a track in a picture: roads as lines of the frame,
// or heights; either may be nil. Places are drawn where they are in the
// picture.
type Ground struct {
	Frame  geo.Frame
	Roads  [][]geo.Point
	Relief geo.Field
	Places []Place
}

// Place is a post or a beacon.
type Place struct {
	Name string
	At   geo.LonLat
}

// reliefCells is how many cells the relief of a track's picture has.
const reliefCells = 500

// places returns those inside a box.
func (g *Ground) places(b geo.Box) (at plotter.XYs, names []string) {
	for _, p := range g.Places {
		if q := g.Frame.Forward(p.At); b.Contains(q) {
			at = append(at, plotter.XY{X: q.E, Y: q.N})
			names = append(names, p.Name)
		}
	}
	return at, names
}

// margin widens a box by a tenth, to at least 200 m and six tenths of its longer
// side, so that there is room for the texts.
func margin(b geo.Box) geo.Box {
	wide, high := b.Max.E-b.Min.E, b.Max.N-b.Min.N
	least := math.Max(200, 0.6*math.Max(wide, high))
	grow := func(lo, hi float64) (float64, float64) {
		extra := math.Max(0.1*(hi-lo), (least-(hi-lo))/2)
		return lo - extra, hi + extra
	}
	b.Min.E, b.Max.E = grow(b.Min.E, b.Max.E)
	b.Min.N, b.Max.N = grow(b.Min.N, b.Max.N)
	return b
}

// clip returns a road's points if any part of it may be in the box.
func clip(road []geo.Point, b geo.Box) plotter.XYs {
	of := geo.EmptyBox()
	for _, p := range road {
		of = of.Extend(p)
	}
	if of.Min.E > b.Max.E || of.Max.E < b.Min.E || of.Min.N > b.Max.N || of.Max.N < b.Min.N {
		return nil
	}
	xys := make(plotter.XYs, len(road))
	for i, p := range road {
		xys[i] = plotter.XY{X: p.E, Y: p.N}
	}
	return xys
}

// within keeps the points in a box.
func within(xys plotter.XYs, b geo.Box) plotter.XYs {
	var in plotter.XYs
	for _, xy := range xys {
		if b.Contains(geo.Point{E: xy.X, N: xy.Y}) {
			in = append(in, xy)
		}
	}
	return in
}

// Relief paints the heights in a box in light greys, high is light, shaded from the
// north-west; voids stay white. Its longer side has so many cells.
func Relief(f geo.Field, b geo.Box, cells int) *image.Gray {
	wide, high := b.Max.E-b.Min.E, b.Max.N-b.Min.N
	cell := math.Max(wide, high) / float64(cells)
	w, h := max(1, int(wide/cell)), max(1, int(high/cell))
	rows := make([]geo.Heights, h)
	e, n := make([]float64, w), make([]float64, w)
	lo, hi, steep := math.Inf(1), math.Inf(-1), 0.0
	for y := range rows {
		for x := range w {
			e[x] = b.Min.E + (float64(x)+0.5)*wide/float64(w)
			n[x] = b.Max.N - (float64(y)+0.5)*high/float64(h)
		}
		rows[y] = geo.Heights{HeightM: make([]float64, w), SlopeE: make([]float64, w), SlopeN: make([]float64, w)}
		f.Sample(rows[y], e, n)
		for x, m := range rows[y].HeightM {
			if m == m {
				lo, hi = math.Min(lo, m), math.Max(hi, m)
				steep = math.Max(steep, math.Max(math.Abs(rows[y].SlopeE[x]), math.Abs(rows[y].SlopeN[x])))
			}
		}
	}
	img := image.NewGray(image.Rect(0, 0, w, h))
	for y := range rows {
		for x, m := range rows[y].HeightM {
			v := 255.0
			if m == m {
				tone, shade := 0.5, 0.0
				if hi > lo {
					tone = (m - lo) / (hi - lo)
				}
				if steep > 0 {
					shade = (rows[y].SlopeE[x] - rows[y].SlopeN[x]) / (2 * steep)
				}
				v = 170 + 55*tone + 25*shade
			}
			img.SetGray(x, y, color.Gray{Y: uint8(math.Max(0, math.Min(255, v)))})
		}
	}
	return img
}
