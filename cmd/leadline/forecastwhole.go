package main

import (
	"fmt"
	"io"
	"math"
	"strings"

	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/study/forecast"
	"leadline/terrain"
	"leadline/terrain/heightfile"
)

// mostWhole bounds the places of a height map that are compared, each with each.
const mostWhole = 10_000

// whole writes what a whole map tells: GeoJSON of a road map's edges, two rasters of
// a height map.
func (o *forecastOptions) wholeMap(w io.Writer, m *mapFile, suite *sensor.Suite, rates map[string]float64) error {
	with := forecast.WholeOptions{SpeedMPS: o.speed, StretchM: o.StretchM, LimitM: o.LimitM, Rates: rates, Stop: o.Stop}
	if m.Roads != nil {
		spots, err := forecast.Roads(m.Roads, suite, with)
		if err != nil {
			return err
		}
		edges := make([]forecast.Edge, len(spots))
		for i := range edges {
			e, n := m.Roads.Polyline(int32(i))
			edges[i] = forecast.Edge{Name: m.Roads.Name(int32(i))}
			for k := range e {
				edges[i].Line = append(edges[i].Line, m.Roads.Frame().Inverse(geo.Point{E: e[k], N: n[k]}))
			}
		}
		if err := writeFile(o.whole, func(w io.Writer) error { return forecast.WriteEdges(w, spots, edges) }); err != nil {
			return err
		}
		return o.said(w, spots, o.whole)
	}
	g := m.Heights.Grid()
	k := max(1, int(math.Ceil(math.Sqrt(float64(g.Cols)*float64(g.Rows)/mostWhole))))
	thin := terrain.Grid{
		CRS: g.CRS, Cols: (g.Cols + k - 1) / k, Rows: (g.Rows + k - 1) / k,
		FirstX: g.FirstX, FirstY: g.FirstY, StepX: float64(k) * g.StepX, StepY: float64(k) * g.StepY,
	}
	points := make([]geo.Point, thin.Cols*thin.Rows)
	for i := range points {
		points[i] = m.Heights.Frame().Forward(thin.Position(float64(i%thin.Cols), float64(i/thin.Cols)))
	}
	spots, err := forecast.Heights(m.Space.(*plane.Plane), suite, points, with)
	if err != nil {
		return err
	}
	base, ok := strings.CutSuffix(o.whole, ".tif")
	if !ok {
		return fmt.Errorf("--whole is %q: of a height map rasters are written, give a name that ends in .tif", o.whole)
	}
	for _, layer := range []struct {
		name, what string
		of         func(forecast.Spot) float64
	}{
		{"-rms.tif", "metres rms that a stretch alone leaves of the place", func(s forecast.Spot) float64 { return s.RMSM }},
		{"-ambiguity.tif", "probability of alike places elsewhere", func(s forecast.Spot) float64 { return s.Ambiguity }},
	} {
		values := make([]float32, len(spots))
		for i, s := range spots {
			if values[i] = float32(layer.of(s)); math.IsInf(float64(values[i]), 0) {
				values[i] = float32(math.NaN())
			}
		}
		r, err := terrain.New(thin, values, terrain.Meta{Source: "forecast over " + mapName(m.Path) + ": " + layer.what, Licence: m.Heights.Meta().Licence})
		if err != nil {
			return fmt.Errorf("%s: %w", base+layer.name, err)
		}
		if err := heightfile.Write(base+layer.name, r); err != nil {
			return err
		}
	}
	return o.said(w, spots, base+"-rms.tif and "+base+"-ambiguity.tif")
}

// said sums up what was written.
func (o *forecastOptions) said(w io.Writer, spots []forecast.Spot, files string) error {
	s := forecast.SumUp(spots)
	if o.asJSON {
		return printJSON(w, s)
	}
	text := "nothing told the place anywhere"
	if s.RMSM != nil {
		text = fmt.Sprintf("a stretch alone leaves %.1f m rms (median)", *s.RMSM)
	}
	_, err := fmt.Fprintf(w, "%d places, %d without figures: %s, ambiguity %.2g (median), above a half at %.1f %%; written to %s\n",
		s.Places, s.Unknown, text, s.Ambiguity, 100*s.Ambiguous, files)
	return err
}
