package heightfile

import (
	"bytes"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"

	"leadline/terrain"
)

// raw is what a reader found in a file: numbers as they are there, in rows
// from the north, NaN where the file has none.
type raw struct {
	grid     terrain.Grid // CRS zero where the file names none
	values   []float32
	unit     Unit
	vertical Vertical
	meta     terrain.Meta
	warnings []string
}

func (r *raw) warn(format string, args ...any) {
	r.warnings = append(r.warnings, fmt.Sprintf(format, args...))
}

// Result is a raster with what was noticed on the way.
type Result struct {
	Raster   *terrain.Raster
	Format   string   // of the file, in words
	Warnings []string // one line each
}

// Read reads a height file of any supported format, told apart by content.
// Errors are one line: the file, the place in it, and what to do.
func Read(path string, opt Options) (Result, error) {
	f, err := os.Open(path)
	if err != nil {
		return Result{}, fmt.Errorf("reading heights: %w", err)
	}
	defer f.Close()
	st, err := f.Stat()
	if err != nil {
		return Result{}, fmt.Errorf("reading heights: %w", err)
	}
	if !st.Mode().IsRegular() {
		return Result{}, fmt.Errorf("reading heights from %s: not a regular file", path)
	}
	return Decode(f, st.Size(), path, opt)
}

// Decode is Read for size bytes of r; name tells an SRTM tile's place and
// appears in errors.
func Decode(r io.ReaderAt, size int64, name string, opt Options) (Result, error) {
	fail := func(err error) (Result, error) {
		return Result{}, fmt.Errorf("reading heights from %s: %s", name, oneLine(err))
	}
	if err := opt.Validate(); err != nil {
		return fail(err)
	}
	head := make([]byte, min(size, 512))
	if _, err := r.ReadAt(head, 0); err != nil && err != io.EOF {
		return fail(err)
	}
	format, read, err := detect(head, name)
	if err != nil {
		return fail(err)
	}
	f, err := read(r, size, name, opt)
	if err != nil {
		return fail(err)
	}
	raster, err := f.finish(opt)
	if err != nil {
		return fail(err)
	}
	return Result{raster, format, f.warnings}, nil
}

type reader func(r io.ReaderAt, size int64, name string, opt Options) (*raw, error)

func detect(head []byte, name string) (format string, read reader, err error) {
	starts := func(s string) bool { return bytes.HasPrefix(head, []byte(s)) }
	switch {
	case strings.EqualFold(filepath.Ext(name), ".hgt"):
		return "SRTM tile", readHGT, nil
	case starts("II*\x00"), starts("MM\x00*"), starts("II+\x00"), starts("MM\x00+"):
		return "GeoTIFF", readTIFF, nil
	case starts("CDF\x01"), starts("CDF\x02"), starts("CDF\x05"):
		return "netCDF classic", readNetCDF, nil
	case starts("\x89HDF"):
		return "", nil, fmt.Errorf("it is a netCDF-4 or HDF5 file, which is not supported: convert it with nccopy -k classic, or to GeoTIFF with gdal_translate")
	case starts("\x1f\x8b"), starts("PK\x03\x04"):
		return "", nil, fmt.Errorf("it is compressed as a whole: unpack it first")
	}
	text := strings.ToLower(strings.TrimLeft(string(head), " \t\r\n\ufeff"))
	for _, k := range []string{"ncols", "nrows", "xll", "yll", "cellsize", "nodata", "dx", "dy"} {
		if strings.HasPrefix(text, k) {
			return "ESRI ASCII grid", readASCII, nil
		}
	}
	return "", nil, fmt.Errorf("the content is none of ESRI ASCII grid, SRTM .hgt, GeoTIFF or netCDF classic: convert it, for example with gdal_translate -of GTiff")
}

// finish applies the options and makes the raster.
func (f *raw) finish(opt Options) (*terrain.Raster, error) {
	switch {
	case !opt.CRS.IsZero():
		if !f.grid.CRS.IsZero() && f.grid.CRS.String() != opt.CRS.String() {
			f.warn("the file says %v; taken as %v, as told", f.grid.CRS, opt.CRS)
		}
		f.grid.CRS = opt.CRS
	case f.grid.CRS.IsZero():
		return nil, fmt.Errorf("it names no coordinate system: say which with --crs, for example --crs EPSG:4326 or --crs utm:33N")
	}
	if f.grid.CRS.Shifted() {
		f.warn("%v is taken as WGS 84, which is right to about 2 m", f.grid.CRS)
	}
	unit, vertical := f.unit, f.vertical
	if opt.Unit != UnitUnset {
		if unit != UnitUnset && unit != opt.Unit {
			f.warn("the file says heights are in %s; taken as %s, as told", unit, opt.Unit)
		}
		unit = opt.Unit
	}
	if unit == UnitUnset {
		f.warn("the unit of height is unstated: taken as metres")
	}
	if opt.Vertical != VerticalUnset {
		if vertical != VerticalUnset && vertical != opt.Vertical {
			f.warn("the file says numbers grow %s; taken as %s, as told", vertical, opt.Vertical)
		}
		vertical = opt.Vertical
	}
	scale := unit.metres()
	if vertical == Down {
		scale = -scale
	}
	if scale != 1 {
		for i, x := range f.values {
			f.values[i] = float32(float64(x) * scale)
		}
	}
	infinite := 0
	for i, x := range f.values {
		if x-x != 0 && x == x {
			infinite++
			f.values[i] = float32(nan)
		}
	}
	if infinite > 0 {
		f.warn("%d infinite heights are taken as voids", infinite)
	}
	m := f.meta
	switch {
	case opt.SigmaM > 0:
		m.SigmaM = opt.SigmaM
	case opt.LE90M > 0:
		m.SigmaM = terrain.SigmaFromLE90(opt.LE90M)
	}
	for _, s := range []struct {
		dst  *string
		told string
	}{{&m.VerticalDatum, opt.VerticalDatum}, {&m.Source, opt.Source}, {&m.Licence, opt.Licence}} {
		if s.told != "" {
			*s.dst = s.told
		}
		*s.dst = clean(*s.dst)
	}
	r, err := terrain.New(f.grid, f.values, m)
	if err != nil {
		return nil, err
	}
	// The lowest ground, the Challenger Deep, is near -10 900 m, the highest
	// 8 849 m.
	if lo, hi := r.HeightRange(); lo < -11000 || hi > 8900 {
		f.warn("heights range from %.6g to %.6g m, which no place on Earth does: check unit and NODATA", lo, hi)
	}
	f.warnings = append(f.warnings, metaWarnings(r.Meta())...)
	return r, nil
}

// metaWarnings says out loud what is unstated.
func metaWarnings(m terrain.Meta) (w []string) {
	if m.VerticalDatum == terrain.Unstated {
		w = append(w, "the vertical datum is unstated, and heights of another datum may differ by tens of metres: give it if you know it")
	}
	if m.SigmaM == 0 {
		w = append(w, "the vertical error is unstated: measurements will be weighed as if the map were exact; give its sigma or LE90")
	}
	if m.Licence == terrain.Unstated {
		w = append(w, "the licence is unstated")
	}
	return w
}

// clean makes a text valid UTF-8 without control characters other than
// newline and tab, as every container can hold it.
func clean(s string) string {
	s = strings.ReplaceAll(strings.ToValidUTF8(s, "?"), "\r\n", "\n")
	return strings.TrimSpace(strings.Map(func(r rune) rune {
		if r < ' ' && r != '\n' && r != '\t' || r == 0x7f || r == 0xfffe || r == 0xffff {
			return '?'
		}
		return r
	}, s))
}

// oneLine joins what would take several lines.
func oneLine(err error) string {
	return strings.Join(strings.Split(err.Error(), "\n"), "; ")
}
