package heightfile

import (
	"encoding/binary"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"leadline/fixtures/outside"
	"leadline/terrain"
)

func run(t *testing.T, tool string, args ...string) []byte {
	t.Helper()
	out, err := exec.Command(tool, args...).CombinedOutput()
	if err != nil {
		t.Fatalf("%s %s: %v\n%s", tool, strings.Join(args, " "), err, out)
	}
	return out
}

// gdalSource writes a compiled map whose heights fit every sample type, 77
// columns and 53 rows so that nothing divides evenly into strips or tiles.
func gdalSource(t *testing.T, dir string, c terrain.CRS) (string, *terrain.Raster) {
	t.Helper()
	g := terrain.Grid{CRS: c, Cols: 77, Rows: 53, FirstX: 10.1, FirstY: 50.3, StepX: 1. / 3600, StepY: -1. / 1800}
	if !c.Geographic() {
		g.FirstX, g.FirstY, g.StepX, g.StepY = 440000.25, 5500000.5, 30.5, -29.5
	}
	h := make([]float32, g.Cols*g.Rows)
	for i := range h {
		h[i] = float32(120 + 100*math.Sin(float64(i%g.Cols)/17)*math.Cos(float64(i/g.Cols)/13))
		if i%97 == 5 {
			h[i] = 7 // the value that the test calls NODATA; no other height is below 20
		}
	}
	r, err := terrain.New(g, h, terrain.Meta{VerticalDatum: "EGM96", SigmaM: 2, Source: "invented", Licence: "Apache-2.0"})
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(dir, "source"+Suffix)
	if err := Write(path, r); err != nil {
		t.Fatal(err)
	}
	return path, r
}

// gdalValues reads a raster through GDAL, as raw float64.
func gdalValues(t *testing.T, tool, path string) []float64 {
	t.Helper()
	raw := path + ".raw"
	run(t, tool, "-q", "-of", "ENVI", "-ot", "Float64", path, raw)
	b, err := os.ReadFile(raw)
	if err != nil {
		t.Fatal(err)
	}
	out := make([]float64, len(b)/8)
	for i := range out {
		out[i] = math.Float64frombits(binary.LittleEndian.Uint64(b[8*i:]))
	}
	return out
}

func compareValues(t *testing.T, what string, got []float32, want []float64, nodata float64) {
	t.Helper()
	if len(got) != len(want) {
		t.Fatalf("%s: %d heights, GDAL has %d", what, len(got), len(want))
	}
	voids := 0
	for i, w := range want {
		if w == nodata {
			w = math.NaN()
			voids++
		}
		if g := got[i]; g != float32(w) && (g == g || w == w) {
			t.Fatalf("%s: sample %d is %v, GDAL reads %v", what, i, g, w)
		}
	}
	if voids == 0 {
		t.Fatalf("%s: the check has no voids", what)
	}
}

// TestEveryGeoTIFF compares this reader with GDAL's on every sample type with
// every compression and predictor, in turn in little-endian strips of a
// classic TIFF and in big-endian tiles of a BigTIFF, so that each compression
// and predictor meets both.
func TestEveryGeoTIFF(t *testing.T) {
	tool := outside.Tool(t, "gdal_translate", "gdal-bin")
	dir := t.TempDir()
	source, _ := gdalSource(t, dir, terrain.LonLat())
	layouts := [][]string{
		{"-co", "BLOCKYSIZE=9", "-co", "ENDIANNESS=LITTLE"},
		{"-co", "TILED=YES", "-co", "BLOCKXSIZE=32", "-co", "BLOCKYSIZE=16", "-co", "ENDIANNESS=BIG", "-co", "BIGTIFF=YES"},
	}
	n := 0
	for k, kind := range []string{"Byte", "UInt16", "Int16", "UInt32", "Int32", "Float32", "Float64"} {
		plain := filepath.Join(dir, kind+".tif")
		run(t, tool, "-q", "-ot", kind, "-a_nodata", "7", source, plain)
		want := gdalValues(t, tool, plain)
		for j, pack := range []string{"NONE", "LZW 1", "LZW 2", "LZW 3", "DEFLATE 1", "DEFLATE 2", "DEFLATE 3"} {
			name, predictor, _ := strings.Cut(pack, " ")
			if predictor == "3" && !strings.HasPrefix(kind, "Float") {
				continue
			}
			i := (k + j) % 2
			layout := layouts[i]
			what := fmt.Sprintf("%s %s layout %d", kind, pack, i)
			out := filepath.Join(dir, "out.tif")
			args := append([]string{"-q", "-co", "COMPRESS=" + name}, layout...)
			if predictor != "" {
				args = append(args, "-co", "PREDICTOR="+predictor)
			}
			if predictor == "3" { // GDAL 3.6 writes garbage for it in big-endian files, to its own eyes too
				if i := slices.Index(args, "ENDIANNESS=BIG"); i >= 0 {
					args[i] = "ENDIANNESS=LITTLE"
				}
			}
			run(t, tool, append(args, plain, out)...)
			res, err := Read(out, Options{})
			if err != nil {
				t.Fatalf("%s: %v", what, err)
			}
			compareValues(t, what, res.Raster.Samples(), want, 7)
			n++
		}
	}
	t.Logf("%d files agree with GDAL", n)
}

// TestGDALReadsFixtures: GDAL finds in the committed GeoTIFFs what this
// package finds.
func TestGDALReadsFixtures(t *testing.T) {
	tool := outside.Tool(t, "gdal_translate", "gdal-bin")
	for _, name := range []string{"lonlat-lzw.tif", "utm-deflate.tif", "utm-deflate-be.tif", "nocrs.tif"} {
		path := filepath.Join(t.TempDir(), name)
		if err := os.WriteFile(path, fixture(t, name), 0o644); err != nil {
			t.Fatal(err)
		}
		res, err := Read(path, Options{CRS: crs(t, "utm:33N")})
		if strings.HasPrefix(name, "lonlat") {
			res, err = Read(path, Options{})
		}
		if err != nil {
			t.Fatal(err)
		}
		want := gdalValues(t, tool, path)
		for i, w := range want {
			if math.IsNaN(w) { // one spelling for compareValues
				want[i] = -32768
			}
		}
		nodata := -32768.0
		if name == "nocrs.tif" {
			nodata = 1e30
		}
		compareValues(t, name, res.Raster.Samples(), want, nodata)
	}
}

// TestGDALPlaces: GDAL's other writers put samples where this package reads
// them, whatever the file counts as a pixel's place.
func TestGDALPlaces(t *testing.T) {
	tool := outside.Tool(t, "gdal_translate", "gdal-bin")
	for _, name := range []string{"EPSG:4326", "utm:32N", "tm:9.5,49.6,0.9999,440000,5500000"} {
		c := crs(t, name)
		for _, f := range []struct {
			ext  string
			args []string
			opt  Options
			geo  bool // only for longitude and latitude
		}{
			{"tif", []string{"-of", "GTiff", "-mo", "AREA_OR_POINT=Area"}, Options{}, false},
			{"tif", []string{"-of", "GTiff", "-co", "PROFILE=BASELINE", "-co", "TFW=YES"}, Options{CRS: c}, false},
			{"asc", []string{"-of", "AAIGrid", "-co", "SIGNIFICANT_DIGITS=9"}, Options{CRS: c}, false},
			{"nc", []string{"-of", "netCDF", "-co", "FORMAT=NC", "-co", "WRITE_BOTTOMUP=YES"}, Options{CRS: c, Unit: Metre}, false},
			{"nc", []string{"-of", "netCDF", "-co", "FORMAT=NC2", "-co", "WRITE_BOTTOMUP=NO"}, Options{Unit: Metre}, true},
		} {
			if f.geo && !c.Geographic() {
				continue
			}
			dir := t.TempDir()
			source, want := gdalSource(t, dir, c)
			out := filepath.Join(dir, "out."+f.ext)
			run(t, tool, append(append([]string{"-q", "-a_nodata", "7"}, f.args...), source, out)...)
			what := fmt.Sprintf("%s %v", name, f.args)
			res, err := Read(out, f.opt)
			if strings.Contains(what, "BASELINE") {
				// A baseline TIFF carries no place of its own.
				if err == nil || !strings.Contains(err.Error(), "where it lies") {
					t.Errorf("%s: %v, want an error about its place", what, err)
				}
				continue
			}
			if err != nil {
				t.Errorf("%s: %v", what, err)
				continue
			}
			g, w := res.Raster.Grid(), want.Grid()
			if g.CRS.String() != w.CRS.String() {
				t.Errorf("%s: CRS %v", what, g.CRS)
			}
			for i, d := range []float64{
				(g.FirstX - w.FirstX) / w.StepX, (g.FirstY - w.FirstY) / w.StepY,
				(g.StepX/w.StepX - 1) * float64(w.Cols), (g.StepY/w.StepY - 1) * float64(w.Rows),
			} {
				// ASCII grids print the corner with 12 digits.
				if math.Abs(d) > 1e-6 {
					t.Errorf("%s: figure %d of the grid is off by %g steps: %+v", what, i, d, g)
				}
			}
			values := make([]float64, len(want.Samples()))
			for i, h := range want.Samples() {
				values[i] = float64(h)
			}
			compareValues(t, what, res.Raster.Samples(), values, 7)
		}
	}
}

// TestGDALOpensCompiled: a compiled map is an ordinary GeoTIFF to GDAL: size,
// place, CRS, voids, metadata and every height.
func TestGDALOpensCompiled(t *testing.T) {
	info := outside.Tool(t, "gdalinfo", "gdal-bin")
	tool := outside.Tool(t, "gdal_translate", "gdal-bin")
	for _, c := range []struct{ crs, wkt string }{
		{"EPSG:4326", `ID["EPSG",4326]`},
		{"utm:32N", `UTM zone 32N`},
		{"tm:9.5,49.6,0.9999,440000,5500000", `"Scale factor at natural origin",0.9999`},
		{"EPSG:25832", `ETRS89 / UTM zone 32N`},
	} {
		dir := t.TempDir()
		path := filepath.Join(dir, "a"+Suffix)
		r := wavy(t, crs(t, c.crs), 301, 503)
		if err := Write(path, r); err != nil {
			t.Fatal(err)
		}
		var got struct {
			Size             []int
			CoordinateSystem struct{ WKT string }
			GeoTransform     []float64
			Metadata         map[string]map[string]string
			Bands            []struct {
				Type        string
				NoDataValue any
				Unit        string
			}
		}
		if err := json.Unmarshal(run(t, info, "-json", path), &got); err != nil {
			t.Fatal(err)
		}
		g := r.Grid()
		want := []float64{g.FirstX - g.StepX/2, g.StepX, 0, g.FirstY - g.StepY/2, 0, g.StepY}
		for i, x := range want {
			if math.Abs(got.GeoTransform[i]-x) > 1e-9*math.Max(1, math.Abs(x)) {
				t.Errorf("%s: transform %v, want %v", c.crs, got.GeoTransform, want)
			}
		}
		items := got.Metadata[""]
		if got.Size[0] != 301 || got.Size[1] != 503 || !strings.Contains(got.CoordinateSystem.WKT, c.wkt) ||
			got.Bands[0].Type != "Float32" || got.Bands[0].NoDataValue != "NaN" || got.Bands[0].Unit != "m" && got.Bands[0].Unit != "metre" {
			t.Errorf("%s: gdalinfo says %+v", c.crs, got)
		}
		if !strings.Contains(got.CoordinateSystem.WKT, "EGM96") {
			t.Errorf("%s: the vertical datum is not in %s", c.crs, got.CoordinateSystem.WKT)
		}
		if m := r.Meta(); items["VERTICAL_DATUM"] != "EGM96" || items["LICENCE"] != m.Licence || items["SOURCE"] != m.Source || items[itemFingerprint] != r.Fingerprint() {
			t.Errorf("%s: metadata %v", c.crs, items)
		}
		values := gdalValues(t, tool, path)
		for i, h := range r.Samples() {
			if float32(values[i]) != h && (h == h || values[i] == values[i]) {
				t.Fatalf("%s: sample %d is %v to GDAL, %v here", c.crs, i, values[i], h)
			}
		}
	}
}
