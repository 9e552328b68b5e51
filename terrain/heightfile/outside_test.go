package heightfile

import (
	"math"
	"path/filepath"
	"testing"

	"leadline/engine/geo"
	"leadline/fixtures/outside"
	"leadline/terrain"
)

// TestOutsideFiles reads other people's files whole: size, place, range and,
// where gdalinfo can tell, that the values are the same as GDAL's.
func TestOutsideFiles(t *testing.T) {
	for _, c := range []struct {
		name       string
		opt        Options
		cols, rows int
		crs        string
		lo, hi     float64 // heights in the file's unit, as gdalinfo -mm prints them
		scale      float64
	}{
		{"trinidad.nc", Options{Unit: Foot, LE90M: 16}, 2401, 1201, "EPSG:4326", 4457.520, 14176.160, 0.3048},
		{"olinda_dem_utm25s.tif", Options{}, 111, 111, "tm:-33,0,0.9996,500000,1e+07,grs80", -1, 88, 1},
		{"elev.tif", Options{}, 95, 90, "EPSG:4326", 141, 547, 1},
	} {
		t.Run(c.name, func(t *testing.T) {
			path := outside.Path(t, c.name)
			res, err := Read(path, c.opt)
			if err != nil {
				t.Fatal(err)
			}
			r := res.Raster
			g := r.Grid()
			if g.Cols != c.cols || g.Rows != c.rows || g.CRS.String() != c.crs {
				t.Errorf("grid %+v", g)
			}
			lo, hi := r.HeightRange()
			if math.Abs(lo/c.scale-c.lo) > 6e-4 || math.Abs(hi/c.scale-c.hi) > 6e-4 {
				t.Errorf("heights %v to %v, want %v to %v", lo/c.scale, hi/c.scale, c.lo, c.hi)
			}
			// Through a compiled map and back.
			out := filepath.Join(t.TempDir(), "a"+Suffix)
			if err := Write(out, r); err != nil {
				t.Fatal(err)
			}
			again, closer, err := Open(out)
			if err != nil {
				t.Fatal(err)
			}
			defer closer.Close()
			if again.Fingerprint() != r.Fingerprint() {
				t.Error("the compiled map differs")
			}
			if c.name != "trinidad.nc" {
				tool := outside.Tool(t, "gdal_translate", "gdal-bin")
				for i, v := range gdalValues(t, tool, out) {
					if h := r.Samples()[i]; float32(v) != h && (h == h || v == v) {
						t.Fatalf("sample %d is %v, GDAL reads %v", i, h, v)
					}
				}
			}
		})
	}
}

// TestTrinidadIsColorado: the file's first latitude is its southernmost. Its
// highest ground within 12 km of 37.58° N 105.49° W is the Blanca massif,
// whose top stands at 4374 m (Blanca Peak, 14 345 ft by the USGS; from
// memory); samples 3 seconds apart miss a summit by some tens of metres. Read
// upside down, the place is 150 km away in the San Luis valley or on the
// plains.
func TestTrinidadIsColorado(t *testing.T) {
	res, err := Read(outside.Path(t, "trinidad.nc"), Options{Unit: Foot})
	if err != nil {
		t.Fatal(err)
	}
	r := res.Raster
	mid := r.Frame().Forward(geo.FromDegrees(-105.49, 37.58))
	var e, n []float64
	for y := -12000.0; y <= 12000; y += 60 {
		for x := -12000.0; x <= 12000; x += 60 {
			e, n = append(e, mid.E+x), append(n, mid.N+y)
		}
	}
	h := make([]float64, len(e))
	r.Sample(geo.Heights{HeightM: h}, e, n)
	top := math.Inf(-1)
	for _, x := range h {
		top = math.Max(top, x)
	}
	if top > 4374+10 || top < 4374-100 {
		t.Errorf("the highest ground is %v m, want Blanca Peak's 4374 m", top)
	}
}

// BenchmarkOpen measures opening, checksums included, of a map whose pages
// are in memory.
func BenchmarkOpen(b *testing.B) {
	for _, c := range []struct {
		name       string
		cols, rows int
	}{{"samples=3M", 2401, 1201}, {"samples=52M", 7201, 7201}} {
		g := terrain.Grid{CRS: terrain.LonLat(), Cols: c.cols, Rows: c.rows, FirstX: 10, FirstY: 50, StepX: 1. / 3600, StepY: -1. / 3600}
		h := make([]float32, g.Cols*g.Rows)
		for i := range h {
			h[i] = float32(i % 1000)
		}
		r, err := terrain.New(g, h, terrain.Meta{})
		if err != nil {
			b.Fatal(err)
		}
		path := filepath.Join(b.TempDir(), "a"+Suffix)
		if err := Write(path, r); err != nil {
			b.Fatal(err)
		}
		b.Run(c.name, func(b *testing.B) {
			b.SetBytes(int64(4 * len(h)))
			for b.Loop() {
				_, closer, err := Open(path)
				if err != nil {
					b.Fatal(err)
				}
				closer.Close()
			}
		})
	}
}
