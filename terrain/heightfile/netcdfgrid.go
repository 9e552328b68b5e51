package heightfile

import (
	"fmt"
	"io"
	"math"
	"slices"
	"strings"

	"leadline/terrain"
)

// readNetCDF reads a variable over one-dimensional latitudes and longitudes,
// which may each ascend or descend, or over projected y and x where a CRS is
// told. Voids are _FillValue, missing_value, the type's default fill value,
// NaN, and what lies outside valid_min, valid_max or valid_range; scale_factor
// and add_offset are applied.
//
// Source: CF Conventions 1.8, chapters 2.5, 4.1, 4.2 and 8.1.
func readNetCDF(r io.ReaderAt, size int64, _ string, opt Options) (*raw, error) {
	f, err := openNetCDF(r, size)
	if err != nil {
		return nil, err
	}
	v, axes, err := f.pick(opt)
	if err != nil {
		return nil, err
	}
	in := func(err error) error { return fmt.Errorf("variable %s: %w", quote(v.name), err) }
	out := &raw{}
	// The two dimensions that are axes, in the file's order.
	outer, inner := -1, -1
	for _, d := range v.dims {
		if _, ok := axes[d]; ok {
			outer, inner = inner, d
		}
	}
	north, east := outer, inner
	if !axes[north].north {
		north, east = inner, outer
	}
	rows, cols := f.length(north), f.length(east)
	if err := opt.room(cols, rows); err != nil {
		return nil, in(err)
	}
	y, err := f.axis(axes[north], rows)
	if err != nil {
		return nil, err
	}
	x, err := f.axis(axes[east], cols)
	if err != nil {
		return nil, err
	}
	out.grid = terrain.Grid{
		Cols: int(cols), Rows: int(rows), FirstX: min(x.first, x.last), FirstY: max(y.first, y.last),
		StepX: math.Abs(x.last-x.first) / float64(cols-1), StepY: -math.Abs(y.last-y.first) / float64(rows-1),
	}
	if axes[north].degrees {
		out.grid.CRS = terrain.LonLat()
		if opt.CRS.IsZero() {
			out.warn("the horizontal datum of netCDF longitudes and latitudes is taken as WGS 84")
		}
	}
	for _, a := range []ncLine{y, x} {
		if a.uneven > 0.01 {
			out.warn("%s departs from even steps by up to %.2g of a step", a.name, a.uneven)
		}
	}
	if err := f.units(v, out, opt); err != nil {
		return nil, in(err)
	}
	no, ni := f.length(outer), f.length(inner)
	stride := ni * ncSizes[v.kind]
	if f.dims[outer].length == 0 {
		stride = f.recSize
	}
	if end := v.begin + (no-1)*stride + ni*ncSizes[v.kind]; v.begin < 0 || stride > size || end > size || end < 0 {
		return nil, in(fmt.Errorf("its values end at byte %d, but the file at %d: is it cut short?", end, size))
	}
	out.values = make([]float32, cols*rows)
	line, buf := make([]float64, ni), make([]byte, ni*ncSizes[v.kind])
	fix := v.unpack()
	for i := range int(no) {
		if err := f.read(line, v.begin+int64(i)*stride, v.kind, buf); err != nil {
			return nil, in(err)
		}
		for k, val := range line {
			row, col := i, k
			if outer != north {
				row, col = k, i
			}
			if y.first < y.last {
				row = int(rows) - 1 - row
			}
			if x.first > x.last {
				col = int(cols) - 1 - col
			}
			out.values[row*int(cols)+col] = float32(fix(val))
		}
	}
	return out, nil
}

// heightNames are names of variables and CF standard names that hold heights,
// for files with several variables over the same axes.
var heightNames = []string{
	"z", "elevation", "height", "altitude", "topo", "topography", "dem", "orog", "bathymetry", "depth", "data", "band1",
	"surface_altitude", "height_above_reference_ellipsoid", "height_above_mean_sea_level", "bedrock_altitude",
	"sea_floor_depth_below_geoid", "sea_floor_depth_below_mean_sea_level", "sea_floor_depth_below_reference_ellipsoid",
}

// pick finds the variable with heights, and its axes by dimension.
func (f *netCDF) pick(opt Options) (*ncVar, map[int]ncAxis, error) {
	axes := map[int]ncAxis{}
	for i := range f.vars {
		v := &f.vars[i]
		if len(v.dims) != 1 || v.kind == ncChar {
			continue
		}
		d := v.dims[0]
		if a, ok := axisOf(v); ok && (axes[d].v == nil || f.dims[d].name == v.name) {
			axes[d] = a
		}
	}
	var found []*ncVar
	why := map[string]string{}
	for i := range f.vars {
		v := &f.vars[i]
		north, east, deg, more := 0, 0, 0, 0
		for _, d := range v.dims {
			a, ok := axes[d]
			switch {
			case ok && a.north:
				north++
			case ok:
				east++
			case f.length(d) != 1:
				more++
			}
			if ok && a.degrees {
				deg++
			}
		}
		switch {
		case v.kind == ncChar || len(v.dims) < 2:
			why[v.name] = "it is no grid of numbers"
		case north != 1 || east != 1 || deg == 1:
			why[v.name] = "it does not lie over one-dimensional latitudes and longitudes"
		case more > 0:
			why[v.name] = "it has further dimensions: cut out one level or time, for example with gdal_translate -b 1"
		default:
			found = append(found, v)
		}
	}
	if opt.Variable != "" {
		for _, v := range found {
			if v.name == opt.Variable {
				return v, axes, nil
			}
		}
		if w, ok := why[opt.Variable]; ok {
			return nil, nil, fmt.Errorf("variable %s: %s", quote(opt.Variable), w)
		}
		return nil, nil, fmt.Errorf("there is no variable %s; over latitudes and longitudes it has %s", quote(opt.Variable), ncNames(found))
	}
	if len(found) > 1 {
		var likely []*ncVar
		for _, v := range found {
			if slices.Contains(heightNames, strings.ToLower(v.name)) || slices.Contains(heightNames, attText(v.atts, "standard_name")) {
				likely = append(likely, v)
			}
		}
		if len(likely) != 1 {
			return nil, nil, fmt.Errorf("several variables may be heights: say which with --variable: %s", ncNames(found))
		}
		found = likely
	}
	if len(found) == 0 {
		return nil, nil, fmt.Errorf("no variable lies over one-dimensional latitudes and longitudes: rewrite the file as GeoTIFF, for example with gdalwarp")
	}
	return found[0], axes, nil
}

func ncNames(vars []*ncVar) string {
	if len(vars) == 0 {
		return "none"
	}
	var names []string
	for _, v := range vars[:min(len(vars), 8)] {
		names = append(names, quote(v.name))
	}
	if len(vars) > 8 {
		names = append(names, "…")
	}
	return strings.Join(names, ", ")
}

// units takes over unit, direction and texts.
func (f *netCDF) units(v *ncVar, out *raw, opt Options) error {
	if u := attText(v.atts, "units"); u != "" {
		out.unit = unitByName(u, UnitUnset)
		if out.unit == UnitUnset && opt.Unit == UnitUnset {
			return fmt.Errorf("its unit %s is no known unit of height: if it is, say which with --unit m or ft", quote(u))
		}
	}
	standard := attText(v.atts, "standard_name")
	if strings.EqualFold(attText(v.atts, "positive"), "down") || strings.HasPrefix(standard, "sea_floor_depth") {
		out.vertical = Down
	}
	for _, s := range []string{"title", "source", "institution"} {
		if out.meta.Source == "" {
			out.meta.Source = clip(attText(f.atts, s))
		}
	}
	for _, s := range []string{"license", "licence"} {
		if out.meta.Licence == "" {
			out.meta.Licence = clip(attText(f.atts, s))
		}
	}
	return nil
}

// clip bounds a text and makes it valid UTF-8.
func clip(s string) string { return strings.ToValidUTF8(s[:min(len(s), maxText)], "?") }

// unpack returns what turns a stored number into a height.
func (v *ncVar) unpack() func(float64) float64 {
	stored := func(x float64) float64 {
		if v.kind == ncFloat {
			return float64(float32(x))
		}
		return x
	}
	var voids []float64
	for _, name := range []string{"_FillValue", "missing_value"} {
		for _, x := range attNums(v.atts, name) {
			voids = append(voids, stored(x))
		}
	}
	if attNums(v.atts, "_FillValue") == nil {
		switch v.kind { // default fill values of the format
		case ncShort:
			voids = append(voids, -32767)
		case ncInt:
			voids = append(voids, -2147483647)
		case ncFloat, ncDouble:
			voids = append(voids, stored(9.9692099683868690e+36))
		}
	}
	lo, hi := math.Inf(-1), math.Inf(1)
	if x := attNums(v.atts, "valid_range"); len(x) == 2 {
		lo, hi = stored(x[0]), stored(x[1])
	}
	if x := attNums(v.atts, "valid_min"); len(x) == 1 {
		lo = stored(x[0])
	}
	if x := attNums(v.atts, "valid_max"); len(x) == 1 {
		hi = stored(x[0])
	}
	scale, offset := 1.0, 0.0
	if x := attNums(v.atts, "scale_factor"); len(x) == 1 {
		scale = x[0]
	}
	if x := attNums(v.atts, "add_offset"); len(x) == 1 {
		offset = x[0]
	}
	return func(x float64) float64 {
		if slices.Contains(voids, x) || !(x >= lo && x <= hi) {
			return nan
		}
		return float64(x*scale) + offset
	}
}
