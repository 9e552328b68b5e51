package heightfile

import (
	"bytes"
	"compress/gzip"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/fixtures/heights"
	"leadline/terrain"
)

const fixtureDir = "../../fixtures/heights/"

func fixture(tb testing.TB, name string) []byte {
	tb.Helper()
	b, err := os.ReadFile(fixtureDir + name)
	if err != nil {
		tb.Fatal(err)
	}
	return b
}

func decode(name string, b []byte, opt Options) (Result, error) {
	return Decode(bytes.NewReader(b), int64(len(b)), name, opt)
}

func crs(tb testing.TB, s string) terrain.CRS {
	tb.Helper()
	c, err := terrain.ParseCRS(s)
	if err != nil {
		tb.Fatal(err)
	}
	return c
}

// TestFixtures reads the same invented ground from every format: grid and
// every height, voids included. First samples lie half a cell inside corners
// (ESRI ASCII grid: xllcorner against xllcenter; GeoTIFF 1.1 key 1025: pixel
// is area against point).
func TestFixtures(t *testing.T) {
	utm := crs(t, "utm:33N")
	for _, c := range []struct {
		name         string
		opt          Options
		crs          string
		x, y, dx, dy float64
		tolSteps     float64 // of the place, in steps
		tolM         float64 // of heights
		source       string
	}{
		{name: "utm.asc", opt: Options{CRS: utm}, crs: "EPSG:32633", x: 500012.5, y: 5500437.5, dx: 25, dy: -25},
		{name: "utm-center.asc", opt: Options{CRS: utm}, crs: "EPSG:32633", x: 500012.5, y: 5500437.5, dx: 25, dy: -25},
		{name: "lonlat-lzw.tif", crs: "EPSG:4326", x: 10.0005, y: 49.99975, dx: 0.001, dy: -0.0005, tolSteps: 1e-9},
		{name: "utm-deflate.tif", crs: "EPSG:32633", x: 500012.5, y: 5500437.5, dx: 25, dy: -25},
		{name: "utm-deflate-be.tif", crs: "EPSG:32633", x: 500012.5, y: 5500437.5, dx: 25, dy: -25},
		{name: "nocrs.tif", opt: Options{CRS: utm}, crs: "EPSG:32633", x: 500012.5, y: 5500437.5, dx: 25, dy: -25},
		{name: "depths.nc", crs: "EPSG:4326", x: 10.0005, y: 49.99975, dx: 0.001, dy: -0.0005, tolSteps: 1e-9, source: "Invented ground"},
		// 298° rounds to 1.5e-5° as float32, 1.5 % of a step.
		{name: "feet.nc", crs: "EPSG:4326", x: 298, y: 10.017, dx: 0.001, dy: -0.001, tolSteps: 0.016, tolM: 1e-4},
	} {
		t.Run(c.name, func(t *testing.T) {
			res, err := Read(fixtureDir+c.name, c.opt)
			if err != nil {
				t.Fatal(err)
			}
			r, g := res.Raster, res.Raster.Grid()
			if g.Cols != heights.Cols || g.Rows != heights.Rows || g.CRS.String() != c.crs {
				t.Fatalf("grid %+v", g)
			}
			lastX, lastY := c.x+c.dx*(heights.Cols-1), c.y+c.dy*(heights.Rows-1)
			gx, gy := g.FirstX+g.StepX*(heights.Cols-1), g.FirstY+g.StepY*(heights.Rows-1)
			for i, d := range []float64{(g.FirstX - c.x) / c.dx, (g.FirstY - c.y) / c.dy, (gx - lastX) / c.dx, (gy - lastY) / c.dy} {
				if math.Abs(d) > c.tolSteps {
					t.Errorf("corner coordinate %d is %g steps off: %+v", i, d, g)
				}
			}
			for row := range heights.Rows {
				for col := range heights.Cols {
					got := float64(r.Samples()[row*heights.Cols+col])
					want, ok := heights.Height(col, row)
					if math.IsNaN(got) == ok || ok && math.Abs(got-want) > c.tolM {
						t.Fatalf("column %d, row %d: %v, want %v (known %v)", col, row, got, want, ok)
					}
				}
			}
			m := r.Meta()
			if c.source == "" {
				c.source = terrain.Unstated
			}
			if m.VerticalDatum != terrain.Unstated || m.SigmaM != 0 || m.Source != c.source {
				t.Errorf("meta %+v", m)
			}
			if all := strings.Join(res.Warnings, "\n"); !strings.Contains(all, "vertical datum is unstated") || !strings.Contains(all, "vertical error is unstated") {
				t.Errorf("what is unstated is not said: %q", res.Warnings)
			}
		})
	}
}

func hgtFixture(tb testing.TB) []byte {
	tb.Helper()
	z, err := gzip.NewReader(bytes.NewReader(fixture(tb, "N10W062.hgt.gz")))
	if err != nil {
		tb.Fatal(err)
	}
	b, err := io.ReadAll(z)
	if err != nil {
		tb.Fatal(err)
	}
	return b
}

// TestHGT: samples lie on the corners of the degree square that the name
// tells; error and datum are the product's (16 m LE90, EGM96).
func TestHGT(t *testing.T) {
	res, err := decode("dir/N10W062.hgt", hgtFixture(t), Options{})
	if err != nil {
		t.Fatal(err)
	}
	r := res.Raster
	if g := r.Grid(); g.FirstX != -62 || g.FirstY != 11 || g.StepX != 1./1200 || g.StepY != -1./1200 || g.Cols != 1201 || g.Rows != 1201 {
		t.Errorf("grid %+v", g)
	}
	voids := 0
	for i, got := range r.Samples() {
		want, ok := heights.TileHeight(i%1201, i/1201)
		if ok != (got == got) || ok && float64(got) != want {
			t.Fatalf("sample %d is %v, want %v (known %v)", i, got, want, ok)
		}
		if !ok {
			voids++
		}
	}
	if voids != 3*50*70 || r.Scan().Voids != voids {
		t.Errorf("%d voids, counted %d", voids, r.Scan().Voids)
	}
	if m := r.Meta(); m.VerticalDatum != "EGM96" || math.Abs(m.SigmaM-9.73) > 0.005 {
		t.Errorf("meta %+v, want EGM96 and 9.73 m", m)
	}
}

// TestOptions: what is told prevails, and a contradiction is said.
func TestOptions(t *testing.T) {
	res, err := Read(fixtureDir+"depths.nc", Options{Unit: Foot, Vertical: Up, LE90M: 30, VerticalDatum: "chart", Source: "s", Licence: "l", CRS: crs(t, "EPSG:4258"), Variable: "bottom"})
	if err != nil {
		t.Fatal(err)
	}
	h, _ := heights.Height(0, 0)
	if got, want := float64(res.Raster.Samples()[0]), -h*0.3048; math.Abs(got-want) > 1e-5 {
		t.Errorf("height %v, want %v", got, want)
	}
	m := res.Raster.Meta()
	if m.VerticalDatum != "chart" || m.Source != "s" || m.Licence != "l" || math.Abs(m.SigmaM-18.2) > 0.05 {
		t.Errorf("meta %+v", m)
	}
	all := strings.Join(res.Warnings, "\n")
	for _, want := range []string{"the file says EPSG:4326; taken as EPSG:4258", "right to about 2 m", "heights are in m; taken as ft", "grow down; taken as up"} {
		if !strings.Contains(all, want) {
			t.Errorf("warnings %q lack %q", res.Warnings, want)
		}
	}
	err = Options{Unit: "yd", Vertical: "left", SigmaM: -1, LE90M: math.NaN(), MaxSamples: -1}.Validate()
	for _, want := range []string{`unit "yd"`, `vertical "left"`, "sigma is -1", "LE90 is NaN", "limit of samples"} {
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("Validate: %v lacks %q", err, want)
		}
	}
}

// TestRefused: bad files get one line with the file, the place and what to do.
func TestRefused(t *testing.T) {
	utm := Options{CRS: crs(t, "utm:33N")}
	asc := string(fixture(t, "utm.asc"))
	tif := fixture(t, "lonlat-lzw.tif")
	nc := fixture(t, "depths.nc")
	replace := func(from, to string) []byte {
		out := strings.Replace(asc, from, to, 1)
		if out == asc {
			t.Fatalf("%q is not in the fixture", from)
		}
		return []byte(out)
	}
	// patch sets the value of a short tag in the big-endian fixture.
	patch := func(tag, value byte, hi ...byte) []byte {
		b := bytes.Clone(tif)
		at := int(uint32(b[4])<<24|uint32(b[5])<<16|uint32(b[6])<<8|uint32(b[7])) + 2
		for ; at+12 <= len(b); at += 12 {
			if b[at] == 1 && b[at+1] == tag-0 {
				b[at+9] = value
				if len(hi) > 0 {
					b[at+8] = hi[0]
				}
				return b
			}
		}
		t.Fatalf("tag %d is not in the fixture", tag)
		return nil
	}
	const low = 256 // tags below are 256 + this
	for _, c := range []struct {
		about, name string
		data        []byte
		opt         Options
		want        string
	}{
		{"no crs", "a.asc", []byte(asc), Options{}, "--crs"},
		{"no crs tif", "a.tif", fixture(t, "nocrs.tif"), Options{}, "--crs"},
		{"word", "a.asc", replace("106", "1o6"), utm, `line 7: "1o6" is no number`},
		{"comma", "a.asc", replace("106", "1,5"), utm, "a point, not a comma"},
		{"cut", "a.asc", []byte(asc[:len(asc)-20]), utm, "the file ends after"},
		{"more", "a.asc", []byte(asc + " 5"), utm, `"5" after the last`},
		{"keyword", "a.asc", replace("CellSize", "CellSizes"), utm, `line 5: unknown keyword "CellSizes"`},
		{"twice", "a.asc", replace("CellSize", "ncols"), utm, "ncols is given twice"},
		{"lacks", "a.asc", replace("CellSize 25\n", ""), utm, "lacks cellsize"},
		{"both", "a.asc", replace("CellSize", "xllcenter 1\nCellSize"), utm, "both xllcorner and xllcenter"},
		{"zero cell", "a.asc", replace("CellSize 25", "CellSize 0"), utm, "cell size"},
		{"promise", "a.asc", replace("NCOLS 24", "NCOLS 24000"), utm, "more than"},
		{"bomb", "a.asc", replace("NCOLS 24", "NCOLS 900000000"), utm, "over the limit"},
		{"fraction", "a.asc", replace("NCOLS 24", "NCOLS 24.5"), utm, "whole numbers"},
		{"long word", "a.asc", replace("106", strings.Repeat("1", 100)), utm, "longer than 64"},
		{"limit", "a.asc", []byte(asc), Options{CRS: utm.CRS, MaxSamples: 100}, "over the limit of 100"},
		{"degrees?", "a.asc", []byte(asc), Options{CRS: crs(t, "lonlat")}, "in metres?"},
		{"tile name", "tile.hgt", hgtFixture(t), Options{}, "N10W062.hgt"},
		{"tile size", "N10W062.hgt", hgtFixture(t)[:1000], Options{}, "1201²"},
		{"empty", "a.tif", nil, Options{}, "none of"},
		{"text", "a.txt", []byte("hello"), Options{}, "none of"},
		{"gzip", "a.tif", fixture(t, "N10W062.hgt.gz"), Options{}, "unpack it first"},
		{"hdf", "a.nc", []byte("\x89HDF\r\n\x1a\n"), Options{}, "nccopy"},
		{"tif cut", "a.tif", tif[:len(tif)-30], Options{}, "cut short"},
		{"tif head", "a.tif", tif[:9], Options{}, "cut short"},
		{"jpeg", "a.tif", patch(259-low, 7), Options{}, "tag 259: compression 7 (JPEG)"},
		{"zstd", "a.tif", patch(259-low, 0x50, 0xc3), Options{}, "(ZSTD)"},
		{"predictor", "a.tif", patch(317-low, 3), Options{}, "tag 317"},
		{"bands", "a.tif", patch(277-low, 3), Options{}, "tag 277: it has 3 bands"},
		{"colour", "a.tif", patch(262-low, 2), Options{}, "tag 262"},
		{"half float", "a.tif", patch(339-low, 3), Options{}, "16-bit samples of format 3"},
		{"nc cut", "a.nc", nc[:len(nc)-100], Options{}, `variable "bottom": its values end`},
		{"nc head", "a.nc", nc[:60], Options{}, "header at byte"},
		{"nc variable", "a.nc", nc, Options{Variable: "top"}, `no variable "top"`},
		{"nc variable kind", "a.nc", nc, Options{Variable: "latitude"}, "no grid of numbers"},
		{"nc5", "a.nc", []byte("CDF\x05aaaaaaaaaaaa"), Options{}, "CDF-5"},
		{"nc unit", "a.nc", bytes.Replace(nc, []byte("\x00\x00\x00\x01m"), []byte("\x00\x00\x00\x01K"), 1), Options{}, `unit "K"`},
		{"options", "a.nc", nc, Options{Unit: "yd"}, "unit"},
	} {
		res, err := decode(c.name, c.data, c.opt)
		if err == nil {
			t.Errorf("%s: read as %+v", c.about, res.Raster.Grid())
			continue
		}
		if s := err.Error(); !strings.Contains(s, c.want) || !strings.Contains(s, c.name) || strings.Contains(s, "\n") {
			t.Errorf("%s: error %q, want one line with %q", c.about, s, c.want)
		}
	}
	if _, err := Read(filepath.Join(t.TempDir(), "none.tif"), Options{}); err == nil || !strings.Contains(err.Error(), "none.tif") {
		t.Errorf("a missing file: %v", err)
	}
	if _, err := Read(t.TempDir(), Options{}); err == nil || !strings.Contains(err.Error(), "not a regular file") {
		t.Errorf("a folder: %v", err)
	}
}

// TestPlacesAgree: a height read from UTM and one read from longitude and
// latitude are found where the projection says.
func TestPlacesAgree(t *testing.T) {
	res, err := Read(fixtureDir+"utm-deflate.tif", Options{})
	if err != nil {
		t.Fatal(err)
	}
	// Column 3, row 4 of the grid, by geo's own UTM.
	p := geo.UTM(33, false).Inverse(geo.Point{E: 500012.5 + 3*25, N: 5500437.5 - 4*25})
	q := res.Raster.Frame().Forward(p)
	h := make([]float64, 1)
	res.Raster.Sample(geo.Heights{HeightM: h}, []float64{q.E}, []float64{q.N})
	// Slopes reach 10/25 and the mapping is within 2 mm.
	if want, _ := heights.Height(3, 4); math.Abs(h[0]-want) > 0.002 {
		t.Errorf("height %v, want %v", h[0], want)
	}
}
