package report

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"leadline/engine/geo"
	"leadline/engine/study/track"
)

// overMap draws truth, estimate and weak stretches over the ground, nil without
// positions.
func (x *Run) overMap(g *track.Ground) *picture {
	s := x.series
	if len(s.points) == 0 {
		return nil
	}
	if g == nil {
		g = &track.Ground{Frame: geo.NewFrame(s.points[0].at)}
	}
	box := geo.EmptyBox()
	at, truths := make([]geo.Point, len(s.points)), make([]geo.Point, len(s.points))
	found := false
	for i, q := range s.points {
		at[i] = g.Frame.Forward(q.at)
		if q.known {
			truths[i] = g.Frame.Forward(q.truth)
			box, found = box.Extend(truths[i]), true
		}
		if q.located {
			box, found = box.Extend(at[i]), true
		}
	}
	for i := range at {
		if !found {
			box = box.Extend(at[i])
		}
	}
	box = around(box)
	wide, high := (box.Max.E-box.Min.E)/1000, (box.Max.N-box.Min.N)/1000
	km := func(q geo.Point) plotter.XY {
		return plotter.XY{X: (q.E - box.Min.E) / 1000, Y: (q.N - box.Min.N) / 1000}
	}
	lon, lat := g.Frame.Inverse(box.Min).Degrees()
	p := newPlot(fmt.Sprintf("kilometres east of longitude %.4f°, latitude %.4f°", lon, lat), "kilometres north")
	cells := max(80, min(240, s.most/2))
	if g.Relief != nil {
		p.Add(plotter.NewImage(track.Relief(g.Relief, box, cells), 0, 0, wide, high))
	}
	if roads := thin(g.Roads, box, 4*s.most); len(roads) > 0 {
		l := lines{style: draw.LineStyle{Color: road, Width: vg.Points(0.8)}}
		for _, r := range roads {
			xys := make(plotter.XYs, len(r))
			for i, q := range r {
				xys[i] = km(q)
			}
			l.xys = append(l.xys, xys)
		}
		p.Add(l)
		p.name("roads", l)
	}
	stroke := func(name string, style draw.LineStyle, from []geo.Point, is func(point) bool) {
		l := lines{style: style}
		open := false
		for i, q := range s.points {
			if !is(q) {
				open = false
				continue
			}
			if !open {
				l.xys, open = append(l.xys, nil), true
			}
			l.xys[len(l.xys)-1] = append(l.xys[len(l.xys)-1], km(from[i]))
		}
		for i, xys := range l.xys { // what is alone is a point, and would not be seen
			if len(xys) == 1 {
				l.xys[i] = append(xys, plotter.XY{X: xys[0].X + 0.002*wide, Y: xys[0].Y})
			}
		}
		if len(l.xys) > 0 {
			p.Add(l)
			p.name(name, l)
		}
	}
	stroke("weak: "+Wide.String(), draw.LineStyle{Color: wideInk, Width: vg.Points(6)}, at, func(q point) bool { return q.class == Wide })
	stroke("weak: "+Wrong.String(), draw.LineStyle{Color: wrongInk, Width: vg.Points(8)}, at, func(q point) bool { return q.class == Wrong && q.located })
	stroke("truth", draw.LineStyle{Color: truth, Width: vg.Points(2.4)}, truths, func(q point) bool { return q.known })
	stroke("estimate, located", draw.LineStyle{Color: estimate, Width: vg.Points(1.2), Dashes: []vg.Length{vg.Points(4), vg.Points(1.5)}}, at, func(q point) bool { return q.located })
	lost := dots{side: vg.Points(3.6), ink: ink, cross: true}
	for i, q := range s.points {
		if !q.located && box.Contains(at[i]) {
			lost.xys = append(lost.xys, km(at[i]))
		}
	}
	if lost.xys = evenly(lost.xys, 200); len(lost.xys) > 0 {
		p.Add(lost)
		p.name("weak: most probable, not located", lost)
	}
	places(p, g, box, km)
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = 0, wide, 0, high
	return mapPicture(p, wide, high)
}

// places marks posts and beacons.
func places(p *chart, g *track.Ground, box geo.Box, km func(geo.Point) plotter.XY) {
	marks := dots{side: vg.Points(6), ink: protection}
	for _, at := range g.Places {
		if q := g.Frame.Forward(at.At); box.Contains(q) {
			marks.xys = append(marks.xys, km(q))
		}
	}
	if len(marks.xys) > 0 {
		p.Add(marks)
		p.name("post or beacon", marks)
	}
}

// mapPicture gives the map its shape.
func mapPicture(p *chart, wide, high float64) *picture {
	const axis = 0.6 * vg.Inch
	w := pageW - p.keyW() - axis
	h := w * vg.Length(high/wide)
	if most := 6.2 * vg.Inch; h > most {
		w, h = w*most/h, most
	}
	return &picture{file: "map", alt: "map with truth, estimate and weak stretches", chart: p, w: w + axis + p.keyW(), h: h + axis, wide: true}
}

// around widens a box so that it has a shape that can be looked at.
func around(b geo.Box) geo.Box {
	side := math.Max(math.Max(b.Max.E-b.Min.E, b.Max.N-b.Min.N), 100)
	grow := func(lo, hi *float64) {
		extra := math.Max(0.06*side, (0.45*side-(*hi-*lo))/2)
		*lo, *hi = *lo-extra, *hi+extra
	}
	grow(&b.Min.E, &b.Max.E)
	grow(&b.Min.N, &b.Max.N)
	return b
}

// thin keeps of roads what is in a box, and of that what can be seen: vertices at
// least so far apart that no more than about most are left, the longest roads
// first.
func thin(roads [][]geo.Point, b geo.Box, most int) [][]geo.Point {
	apart := math.Max(b.Max.E-b.Min.E, b.Max.N-b.Min.N) / 500
	type kept struct {
		points  []geo.Point
		lengthM float64
	}
	var all []kept
	for _, r := range roads {
		var k kept
		of := geo.EmptyBox()
		for i, q := range r {
			of = of.Extend(q)
			if n := len(k.points); n == 0 || i == len(r)-1 || q.Sub(k.points[n-1]).Norm() > apart {
				if n > 0 {
					k.lengthM += q.Sub(k.points[n-1]).Norm()
				}
				k.points = append(k.points, q)
			}
		}
		if of.Min.E > b.Max.E || of.Max.E < b.Min.E || of.Min.N > b.Max.N || of.Max.N < b.Min.N || len(k.points) < 2 {
			continue
		}
		all = append(all, k)
	}
	slices.SortStableFunc(all, func(x, y kept) int {
		switch {
		case x.lengthM > y.lengthM:
			return -1
		case x.lengthM < y.lengthM:
			return 1
		}
		return 0
	})
	var out [][]geo.Point
	for _, k := range all {
		if most -= len(k.points); most < 0 {
			break
		}
		out = append(out, k.points)
	}
	return out
}

// evenly keeps at most so many.
func evenly(xys plotter.XYs, most int) plotter.XYs {
	every := (len(xys) + most - 1) / most
	if every < 2 {
		return xys
	}
	var out plotter.XYs
	for i := 0; i < len(xys); i += every {
		out = append(out, xys[i])
	}
	return out
}
