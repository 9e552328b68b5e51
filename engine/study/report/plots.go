package report

import (
	"fmt"
	"image/color"
	"math"
	"strconv"

	"gonum.org/v1/gonum/stat/distuv"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"leadline/engine/study/score"
)

// Sizes of pictures: the page's width, and half of it.
const (
	pageW = 10 * vg.Inch
	halfW = 4.85 * vg.Inch
	rowH  = 3.4 * vg.Inch
)

// overTime draws errors and radii over time.
func (x *Run) overTime() *picture {
	s := x.series
	unit, per := "seconds", 1.0
	span := 0.0
	if n := len(s.points); n > 0 {
		span = float64(s.points[n-1].ns-s.startNS) / 1e9
	}
	switch {
	case span > 3*3600:
		unit, per = "hours", 3600
	case span > 300:
		unit, per = "minutes", 60
	}
	p := newPlot(unit+" after the first posterior", "metres, logarithmic")
	at := func(q point) float64 { return float64(q.ns-s.startNS) / 1e9 / per }
	least, most := s.limitM, s.limitM
	line := func(name string, points []point, c color.Color, width vg.Length, of func(point) float64, dashes ...vg.Length) {
		l := lines{style: draw.LineStyle{Color: c, Width: width, Dashes: dashes}}
		open := false
		for _, q := range points {
			y := of(q)
			if math.IsNaN(y) {
				open = false
				continue
			}
			y = math.Max(y, gridLeastM)
			least, most = math.Min(least, y), math.Max(most, y)
			if !open {
				l.xys, open = append(l.xys, nil), true
			}
			l.xys[len(l.xys)-1] = append(l.xys[len(l.xys)-1], plotter.XY{X: at(q), Y: y})
		}
		if len(l.xys) > 0 {
			p.Add(l)
			p.name(name, l)
		}
	}
	line("protection radius, where bounded", s.points, protection, vg.Points(1.8), func(q point) float64 { return q.protectionM })
	line("95 % radius", s.points, truth, vg.Points(1.2), func(q point) float64 { return q.radiusM }, vg.Points(5), vg.Points(2))
	errorOf := func(q point) float64 {
		if !q.known {
			return math.NaN()
		}
		return q.errM
	}
	line("error", s.points, estimate, vg.Points(1.2), errorOf)
	if x.later != nil {
		line("error, looking back", x.later.points, wideInk, vg.Points(1.2), errorOf, vg.Points(3), vg.Points(1.5))
	}
	last := math.Max(span/per, 1e-3)
	l := lines{xys: []plotter.XYs{{{X: 0, Y: s.limitM}, {X: last, Y: s.limitM}}}, style: draw.LineStyle{Color: limit, Width: vg.Points(1), Dashes: []vg.Length{vg.Points(2), vg.Points(2)}}}
	p.Add(l)
	p.name(fmt.Sprintf("alert limit, %s m", number(s.limitM)), l)
	p.X.Min, p.X.Max = 0, last
	logAxis(&p.Y, least, most)
	// Along the bottom, where it is not located.
	bar := lines{style: draw.LineStyle{Color: ink, Width: vg.Points(5)}}
	for i, q := range s.points {
		if q.located {
			continue
		}
		until := last
		if i+1 < len(s.points) {
			until = at(s.points[i+1])
		}
		if n := len(bar.xys); n > 0 && bar.xys[n-1][1].X == at(q) {
			bar.xys[n-1][1].X = until
			continue
		}
		bar.xys = append(bar.xys, plotter.XYs{{X: at(q), Y: p.Y.Min}, {X: until, Y: p.Y.Min}})
	}
	if len(bar.xys) > 0 {
		p.Add(bar)
		p.name("not located", bar)
	}
	return &picture{file: "over-time", alt: "error, 95 % radius and protection radius over time", chart: p, w: pageW, h: rowH, wide: true}
}

// scatter draws errors against protection radii, nil without any.
func (x *Run) scatter() *picture {
	s := x.series
	if len(s.grid) == 0 {
		return nil
	}
	p := newPlot("protection radius, metres, logarithmic", "error, metres, logarithmic")
	var of [3][3]plotter.XYs // by region and count
	least, most := s.limitM, s.limitM
	for cell, n := range s.grid {
		q := plotter.XY{X: gridM(cell[0]), Y: gridM(cell[1])}
		least, most = math.Min(least, math.Min(q.X, q.Y)), math.Max(most, math.Max(q.X, q.Y))
		region := 0
		switch {
		case q.Y > q.X:
			region = 2
		case q.X > s.limitM:
			region = 1
		}
		size := min(int(math.Log10(float64(n))), 2)
		of[region][size] = append(of[region][size], q)
	}
	dash := draw.LineStyle{Color: limit, Width: vg.Points(1), Dashes: []vg.Length{vg.Points(2), vg.Points(2)}}
	logAxis(&p.X, least/1.5, most*1.5)
	logAxis(&p.Y, least/1.5, most*1.5)
	lo, hi := math.Min(p.X.Min, p.Y.Min), math.Max(p.X.Max, p.Y.Max)
	even := lines{xys: []plotter.XYs{{{X: lo, Y: lo}, {X: hi, Y: hi}}}, style: draw.LineStyle{Color: limit, Width: vg.Points(1)}}
	alert := lines{xys: []plotter.XYs{{{X: s.limitM, Y: lo}, {X: s.limitM, Y: hi}}, {{X: lo, Y: s.limitM}, {X: hi, Y: s.limitM}}}, style: dash}
	p.Add(even, alert)
	for region, name := range []string{"as promised", "radius beyond the alert limit", "error beyond the radius"} {
		c := []color.Color{protection, wideInk, wrongInk}[region]
		shown := false
		for size, xys := range of[region] {
			if len(xys) == 0 {
				continue
			}
			sortXYs(xys)
			d := dots{xys: xys, side: vg.Points(2.2 + 1.3*float64(size)), ink: c}
			p.Add(d)
			if !shown {
				p.name(name, dots{side: vg.Points(5), ink: c})
				shown = true
			}
		}
	}
	p.name("error and radius are the same", even)
	p.name(fmt.Sprintf("alert limit, %s m", number(s.limitM)), alert)
	pic := &picture{file: "error-against-protection", alt: "error against protection radius, with the alert limit", chart: p, w: halfW, h: halfW * 0.92}
	if s.noBound > 0 {
		pic.note = fmt.Sprintf("Not shown: %d posteriors without a bounded protection radius.", s.noBound)
	}
	return pic
}

// ranks draws where the truth fell in its posteriors, nil if that is not known.
func (x *Run) ranks() *picture {
	d := x.Score.Details
	if len(d.RankAlong) == 0 || len(d.RankAcross) == 0 {
		return nil
	}
	p := newPlot("per cent of the posterior that lies below the truth", "per cent of posteriors")
	bins := len(d.RankAlong)
	most := 0.0
	for _, side := range []struct {
		name   string
		counts []int
		style  draw.LineStyle
	}{
		{"along the way", d.RankAlong, draw.LineStyle{Color: estimate, Width: vg.Points(2)}},
		{"across it", d.RankAcross, draw.LineStyle{Color: truth, Width: vg.Points(1.3), Dashes: []vg.Length{vg.Points(5), vg.Points(2)}}},
	} {
		total := sum(side.counts)
		if total == 0 {
			continue
		}
		l := lines{style: side.style, xys: []plotter.XYs{{}}}
		for i, n := range side.counts {
			y := 100 * float64(n) / float64(total)
			most = math.Max(most, y)
			for _, at := range []int{i, i + 1} {
				l.xys[0] = append(l.xys[0], plotter.XY{X: 100 * float64(at) / float64(bins), Y: y})
			}
		}
		p.Add(l)
		p.name(side.name, l)
	}
	even := 100 / float64(bins)
	flat := lines{xys: []plotter.XYs{{{X: 0, Y: even}, {X: 100, Y: even}}}, style: draw.LineStyle{Color: ink, Width: vg.Points(1)}}
	p.Add(flat)
	p.name("right posteriors in the mean", flat)
	if d.Independent != nil && *d.Independent >= 2 {
		n := int(*d.Independent)
		low, high := binomialBand(n, 1/float64(bins))
		low, high = 100*low/float64(n), 100*high/float64(n)
		band := lines{xys: []plotter.XYs{{{X: 0, Y: low}, {X: 100, Y: low}}, {{X: 0, Y: high}, {X: 100, Y: high}}}, style: draw.LineStyle{Color: limit, Width: vg.Points(1), Dashes: []vg.Length{vg.Points(2), vg.Points(2)}}}
		p.Add(band)
		p.name(fmt.Sprintf("99 %% of bars are between these, of %d independent errors", n), band)
		most = math.Max(most, high)
	}
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = 0, 100, 0, 1.1*math.Max(most, even)
	return &picture{file: "ranks", alt: "rank histograms of the truth in its posteriors, along and across the way", chart: p, w: halfW, h: halfW * 0.92}
}

// binomialBand are counts between which 99 % of binomial ones are.
func binomialBand(n int, p float64) (low, high float64) {
	b := distuv.Binomial{N: float64(n), P: p}
	for low < float64(n) && b.CDF(low) < 0.005 {
		low++
	}
	for high < float64(n) && b.CDF(high) < 0.995 {
		high++
	}
	return low, high
}

// innovation draws how measurements of a sensor fell in what was expected.
func innovation(i int, s score.Innovation) *picture {
	if s.Scores == 0 {
		return nil
	}
	p := newPlot("normal score", "per cent of measurements")
	l := lines{style: draw.LineStyle{Color: estimate, Width: vg.Points(1.8)}, xys: []plotter.XYs{{}}}
	bins := len(s.Histogram)
	total := sum(s.Histogram)
	most := 20.0
	for k, n := range s.Histogram {
		y := 100 * float64(n) / float64(max(1, total))
		most = math.Max(most, y)
		for _, at := range []int{k, k + 1} {
			l.xys[0] = append(l.xys[0], plotter.XY{X: 8*float64(at)/float64(bins) - 4, Y: y})
		}
	}
	normal := lines{style: draw.LineStyle{Color: ink, Width: vg.Points(1), Dashes: []vg.Length{vg.Points(4), vg.Points(2)}}, xys: []plotter.XYs{{}}}
	for k := range 81 {
		z := -4 + 0.1*float64(k)
		normal.xys[0] = append(normal.xys[0], plotter.XY{X: z, Y: 100 * 8 / float64(bins) * distuv.UnitNormal.Prob(z)})
	}
	p.Add(l, normal)
	p.name("measured", l)
	p.name("if all is right", normal)
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = -4, 4, 0, 1.1*most
	name := fmt.Sprintf("%s, %s", s.Sensor, s.Kind)
	if s.Component > 1 {
		name += ", second component"
	}
	return &picture{file: "innovations-" + strconv.Itoa(i+1), alt: "normal scores of " + name, chart: p, w: pageW * 0.32, h: halfW * 0.58}
}

func sum(counts []int) (n int) {
	for _, c := range counts {
		n += c
	}
	return n
}
