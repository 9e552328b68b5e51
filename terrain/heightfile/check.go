package heightfile

import (
	"fmt"
	"io"
	"math"
	"strings"

	"leadline/engine/geo"
	"leadline/terrain"
)

// Report is what a check of a height map finds. Its JSON has a unit last in
// the name where there is one.
type Report struct {
	CRS              string      `json:"crs"`
	Columns          int         `json:"columns"`
	Rows             int         `json:"rows"`
	WestDeg          float64     `json:"west_deg"` // extent of the samples, WGS 84
	SouthDeg         float64     `json:"south_deg"`
	EastDeg          float64     `json:"east_deg"`
	NorthDeg         float64     `json:"north_deg"`
	StepX            float64     `json:"step_x"` // in the CRS's own unit
	StepY            float64     `json:"step_y"`
	StepUnit         string      `json:"step_unit"`       // "deg" or "m"
	ResolutionEastM  float64     `json:"resolution_e_m"`  // on the ground, at the middle
	ResolutionNorthM float64     `json:"resolution_n_m"`  //
	SizeEastM        float64     `json:"size_e_m"`        // through the middle
	SizeNorthM       float64     `json:"size_n_m"`        //
	FrameScaleError  float64     `json:"frame_scale_max"` // largest relative error of lengths in the local frame
	LowestM          float64     `json:"lowest_m"`
	HighestM         float64     `json:"highest_m"`
	Voids            VoidReport  `json:"voids"`
	Slope            SlopeReport `json:"slope"`
	VerticalDatum    string      `json:"vertical_datum"`
	SigmaM           *float64    `json:"vertical_sigma_m"` // null: unstated
	Source           string      `json:"source"`
	Licence          string      `json:"licence"`
	Fingerprint      string      `json:"fingerprint_sha256"`
	Warnings         []string    `json:"warnings"`
}

// VoidReport is about samples without a height.
type VoidReport struct {
	Samples        int     `json:"samples"`
	Share          float64 `json:"share"`
	Areas          int     `json:"areas"`
	LargestSamples int     `json:"largest_samples"`
	LargestKm2     float64 `json:"largest_km2"`
	LargestLonDeg  float64 `json:"largest_lon_deg"` // a place in the largest; 0 where there is none
	LargestLatDeg  float64 `json:"largest_lat_deg"`
}

// SlopeReport is about slopes at the middles of known cells, in metres per
// metre.
type SlopeReport struct {
	Cells   int          `json:"cells"`
	RMS     float64      `json:"rms"`
	Max     float64      `json:"max"`
	Classes []SlopeClass `json:"classes"`
}

// SlopeClass is the share of cells with slopes from From up.
type SlopeClass struct {
	Name  string  `json:"name"`
	From  float64 `json:"from"`
	Share float64 `json:"share"`
}

// Check reads a whole raster and reports on it.
func Check(r *terrain.Raster) Report {
	g, m, s := r.Grid(), r.Meta(), r.Scan()
	out := Report{
		CRS: g.CRS.String(), Columns: g.Cols, Rows: g.Rows, StepX: g.StepX, StepY: -g.StepY, StepUnit: "m",
		LowestM: s.MinM, HighestM: s.MaxM, VerticalDatum: m.VerticalDatum, Source: m.Source, Licence: m.Licence,
		Fingerprint: r.Fingerprint(), Warnings: metaWarnings(m),
	}
	if g.CRS.Geographic() {
		out.StepUnit = "deg"
	}
	if m.SigmaM > 0 {
		out.SigmaM = &m.SigmaM
	}
	out.extent(r)
	out.ResolutionEastM, out.ResolutionNorthM = r.StepM()
	out.SizeEastM = out.ResolutionEastM * float64(g.Cols-1)
	out.SizeNorthM = out.ResolutionNorthM * float64(g.Rows-1)
	v := r.Voids()
	out.Voids = VoidReport{Samples: v.Samples, Share: float64(v.Samples) / float64(g.Cols*g.Rows), Areas: v.Areas, LargestSamples: v.LargestSamples}
	if v.Samples > 0 {
		at := g.Position(float64(v.LargestCol), float64(v.LargestRow))
		out.Voids.LargestLonDeg, out.Voids.LargestLatDeg = at.Degrees()
		out.Voids.LargestKm2 = float64(v.LargestSamples) * out.ResolutionEastM * out.ResolutionNorthM / 1e6
	}
	sl := r.Slopes()
	out.Slope = SlopeReport{Cells: sl.Cells, RMS: sl.RMS, Max: sl.Max}
	from := 0.0
	for i, share := range sl.Share {
		c := terrain.Roughness(i)
		out.Slope.Classes = append(out.Slope.Classes, SlopeClass{c.String(), from, share})
		from = c.Below()
	}
	out.warn(r, sl)
	return out
}

// extent follows the outline of the raster.
func (out *Report) extent(r *terrain.Raster) {
	g := r.Grid()
	mid := g.Middle()
	west, east := math.Inf(1), math.Inf(-1)
	south, north := west, east
	lastC, lastR := float64(g.Cols-1), float64(g.Rows-1)
	add := func(c, w float64) {
		p := g.Position(c, w)
		d := geo.Deg(geo.WrapPi(p.Lon - mid.Lon))
		west, east = math.Min(west, d), math.Max(east, d)
		_, lat := p.Degrees()
		south, north = math.Min(south, lat), math.Max(north, lat)
		_, k := r.Frame().Convergence(r.Frame().Forward(p))
		out.FrameScaleError = math.Max(out.FrameScaleError, math.Abs(k-1))
	}
	const n = 32
	for i := range n + 1 {
		f := float64(i) / n
		add(f*lastC, 0)
		add(f*lastC, lastR)
		add(0, f*lastR)
		add(lastC, f*lastR)
	}
	lon, _ := mid.Degrees()
	out.WestDeg, out.EastDeg, out.SouthDeg, out.NorthDeg = lon+west, lon+east, south, north
}

// warn adds what is worth a look.
func (out *Report) warn(r *terrain.Raster, sl terrain.Slopes) {
	add := func(format string, args ...any) { out.Warnings = append(out.Warnings, fmt.Sprintf(format, args...)) }
	if got := terrain.Fingerprint(r.Grid(), r.Samples(), r.Meta()); got != out.Fingerprint {
		add("the content has fingerprint %s, not the one it states: compile it again", got)
	}
	if out.Voids.Share > 0.2 {
		add("%.0f %% of the samples are void", 100*out.Voids.Share)
	}
	if out.FrameScaleError > 1e-3 {
		add("lengths in the local frame are wrong by up to %.2g: cut the map to the region needed", out.FrameScaleError)
	}
	if x := out.ResolutionEastM / out.ResolutionNorthM; x > 3 || x < 1./3 {
		add("a column is %.4g m wide and a row %.4g m high: is the coordinate system right?", out.ResolutionEastM, out.ResolutionNorthM)
	}
	if sl.Cells == 0 {
		add("no cell has four known corners: no height between samples is known")
	}
	// A slope of 10 over more than one sample is no ground but a step
	// between wrong heights; overhanging rock is not in rasters.
	if sl.Max > 10 {
		add("the steepest cell has slope %.3g: are there unmarked voids or heights in another unit?", sl.Max)
	}
	if sl.RMS > 0 && !sl.Unrounded && sl.RMS*math.Min(out.ResolutionEastM, out.ResolutionNorthM) < 1 {
		add("heights are whole metres and change by less than that from sample to sample: the ground shows as terraces")
	}
	if out.LowestM < -11000 || out.HighestM > 8900 {
		add("heights range from %.6g to %.6g m, which no place on Earth does: check unit and NODATA", out.LowestM, out.HighestM)
	}
}

// WriteText prints the report for people.
func (out Report) WriteText(w io.Writer) error {
	var b strings.Builder
	line := func(name, format string, args ...any) {
		fmt.Fprintf(&b, "%-15s %s\n", name, fmt.Sprintf(format, args...))
	}
	line("samples", "%d columns × %d rows, %s", out.Columns, out.Rows, out.CRS)
	unit := " m"
	if out.StepUnit == "deg" {
		unit = "°"
	}
	line("step", "%.9g%s × %.9g%s, on the ground %.4g m × %.4g m", out.StepX, unit, out.StepY, unit, out.ResolutionEastM, out.ResolutionNorthM)
	line("size", "%.2f km × %.2f km", out.SizeEastM/1000, out.SizeNorthM/1000)
	line("extent", "longitude %.6f° to %.6f°, latitude %.6f° to %.6f°", out.WestDeg, out.EastDeg, out.SouthDeg, out.NorthDeg)
	line("frame", "lengths right to %.2g", out.FrameScaleError)
	line("heights", "%.2f m to %.2f m", out.LowestM, out.HighestM)
	line("vertical datum", "%s", out.VerticalDatum)
	if out.SigmaM != nil {
		line("vertical error", "sigma %.2f m", *out.SigmaM)
	} else {
		line("vertical error", "%s", terrain.Unstated)
	}
	if v := out.Voids; v.Samples == 0 {
		line("voids", "none")
	} else {
		line("voids", "%d samples (%.3g %%) in %d areas; the largest %d samples, %.3g km², at %.5f°, %.5f°",
			v.Samples, 100*v.Share, v.Areas, v.LargestSamples, v.LargestKm2, v.LargestLonDeg, v.LargestLatDeg)
	}
	line("slope", "rms %.3g, largest %.3g, over %d cells", out.Slope.RMS, out.Slope.Max, out.Slope.Cells)
	for i, c := range out.Slope.Classes {
		to := "and more"
		if i+1 < len(out.Slope.Classes) {
			to = fmt.Sprintf("to %g", out.Slope.Classes[i+1].From)
		}
		line("", "%-8s %5.1f %%  (%g %s)", c.Name, 100*c.Share, c.From, to)
	}
	line("source", "%s", indent(out.Source))
	line("licence", "%s", indent(out.Licence))
	line("fingerprint", "%s", out.Fingerprint)
	for _, s := range out.Warnings {
		line("warning", "%s", s)
	}
	_, err := io.WriteString(w, b.String())
	return err
}

// indent keeps the lines of a text in its column.
func indent(s string) string { return strings.ReplaceAll(s, "\n", "\n"+strings.Repeat(" ", 16)) }
