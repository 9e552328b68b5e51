package heightfile

import (
	"errors"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/terrain"
)

// wavy makes a raster with several strips and a void area.
func wavy(tb testing.TB, c terrain.CRS, cols, rows int) *terrain.Raster {
	tb.Helper()
	g := terrain.Grid{CRS: c, Cols: cols, Rows: rows, FirstX: 10.1, FirstY: 50.3, StepX: 1. / 3600, StepY: -1. / 3600}
	if !c.Geographic() {
		g.FirstX, g.FirstY, g.StepX, g.StepY = 440000.25, 5500000.5, 30.1, -29.9
	}
	h := make([]float32, cols*rows)
	for i := range h {
		x, y := i%cols, i/cols
		h[i] = float32(200 + 50*math.Sin(float64(x)/17)*math.Cos(float64(y)/13))
		if x > 20 && x < 30 && y > 40 && y < 60 {
			h[i] = float32(math.NaN())
		}
	}
	r, err := terrain.New(g, h, terrain.Meta{VerticalDatum: "EGM96", SigmaM: 9.7269, Source: "Invented <ground> & \"more\"", Licence: "Apache-2.0\nsecond line, äöü"})
	if err != nil {
		tb.Fatal(err)
	}
	return r
}

// TestCompiled: a compiled map opens as the raster that was written, bit for
// bit, in every kind of CRS, and answers the same.
func TestCompiled(t *testing.T) {
	for _, name := range []string{"EPSG:4326", "EPSG:4258", "utm:32N", "EPSG:25832", "utm:23S", "tm:9.5,49.6,0.9999,440000,5500000", "tm:9.5,49.6,1,440000,5500000,grs80"} {
		want := wavy(t, crs(t, name), 301, 503)
		path := filepath.Join(t.TempDir(), "a"+Suffix)
		if err := Write(path, want); err != nil {
			t.Fatal(err)
		}
		got, closer, err := Open(path)
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		if g, w := got.Grid(), want.Grid(); g.CRS.String() != w.CRS.String() || g.FirstX != w.FirstX || g.FirstY != w.FirstY || g.StepX != w.StepX || g.StepY != w.StepY || g.Cols != w.Cols || g.Rows != w.Rows {
			t.Errorf("%s: grid %+v, want %+v", name, g, w)
		}
		if got.Meta() != want.Meta() || got.Scan() != want.Scan() || got.Fingerprint() != want.Fingerprint() {
			t.Errorf("%s: meta %+v, scan %+v", name, got.Meta(), got.Scan())
		}
		if f := terrain.Fingerprint(got.Grid(), got.Samples(), got.Meta()); f != want.Fingerprint() {
			t.Errorf("%s: content has fingerprint %s, want %s", name, f, want.Fingerprint())
		}
		rng := rand.New(rand.NewPCG(1, 1))
		a, b := make([]float64, 1), make([]float64, 1)
		for range 1000 {
			e, n := []float64{(rng.Float64() - 0.5) * 9000}, []float64{(rng.Float64() - 0.5) * 15000}
			got.Sample(geo.Heights{HeightM: a}, e, n)
			want.Sample(geo.Heights{HeightM: b}, e, n)
			if math.Float64bits(a[0]) != math.Float64bits(b[0]) {
				t.Fatalf("%s: height %v, want %v", name, a[0], b[0])
			}
		}
		if err := closer.Close(); err != nil {
			t.Error(err)
		}
		if err := closer.Close(); err != nil {
			t.Errorf("closing twice: %v", err)
		}
		// The ordinary reader takes it too and keeps what it knows.
		res, err := Read(path, Options{})
		if err != nil {
			t.Fatal(err)
		}
		if res.Raster.Fingerprint() != want.Fingerprint() || res.Raster.Meta() != want.Meta() {
			t.Errorf("%s: read with meta %+v, grid %+v", name, res.Raster.Meta(), res.Raster.Grid())
		}
	}
}

// TestDamage: a flipped bit anywhere in the file is found, as is a file cut
// short; nothing panics.
func TestDamage(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "a"+Suffix)
	if err := Write(path, wavy(t, terrain.LonLat(), 301, 503)); err != nil {
		t.Fatal(err)
	}
	good, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	try := func(b []byte) error { // Open, less the mapping of a file
		_, err := attach(append([]byte(nil), b...))
		return err
	}
	if err := try(good); err != nil {
		t.Fatal(err)
	}
	// Every byte of a small map's header, then places in the strips of a
	// larger one.
	small := filepath.Join(dir, "small"+Suffix)
	if err := Write(small, wavy(t, terrain.LonLat(), 40, 70)); err != nil {
		t.Fatal(err)
	}
	little, err := os.ReadFile(small)
	if err != nil {
		t.Fatal(err)
	}
	for at := range len(little) - 4*40*70 {
		b := append([]byte(nil), little...)
		b[at] ^= 1 << (at % 8)
		if _, err := attach(b); err == nil {
			t.Fatalf("a flipped bit in byte %d of the header is not found", at)
		} else if strings.Contains(err.Error(), "\n") {
			t.Fatalf("byte %d: error %q", at, err)
		}
	}
	flip := func(at int) error {
		b := append([]byte(nil), good...)
		b[at] ^= 1 << (at % 8)
		return try(b)
	}
	head := len(good) - 4*301*503
	rps := rowsPerStrip(terrain.Grid{Cols: 301, Rows: 503})
	for _, at := range []int{0, 4*301*rps - 1, 4 * 301 * rps, 4*301*503 - 1} {
		err := flip(head + at)
		if !errors.Is(err, ErrDamaged) || !strings.Contains(err.Error(), "strip "+string(rune('0'+at/(4*301*rps)))) {
			t.Errorf("a flipped bit in byte %d of the heights: %v", at, err)
		}
	}
	for _, n := range []int{3, 8, 9, 500, head - 1, head, head + 1000, len(good) - 1} {
		if err := try(good[:n]); err == nil {
			t.Errorf("cut to %d bytes, it opens", n)
		}
	}
	if err := os.WriteFile(path, good[:head+1000], 0o644); err != nil {
		t.Fatal(err)
	}
	if _, _, err := Open(path); err == nil || !strings.Contains(err.Error(), path) {
		t.Errorf("Open of a file cut short: %v", err)
	}
}

// TestOpenRefuses: other files are told from damaged ones.
func TestOpenRefuses(t *testing.T) {
	for _, name := range []string{"lonlat-lzw.tif", "utm.asc", "depths.nc", "utm-deflate.tif"} {
		_, _, err := Open(fixtureDir + name)
		if err == nil || errors.Is(err, ErrDamaged) || !strings.Contains(err.Error(), "leadline map heights") {
			t.Errorf("%s: %v, want what to do", name, err)
		}
	}
}

// TestWriteWholeOrNot: a failed write leaves neither the map nor a temporary
// file, and the old map as it was.
func TestWriteWholeOrNot(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "sub")
	if err := os.MkdirAll(filepath.Join(path, "full"), 0o755); err != nil { // a folder that rename cannot replace
		t.Fatal(err)
	}
	if err := Write(path, wavy(t, terrain.LonLat(), 301, 503)); err == nil {
		t.Fatal("a folder was replaced")
	}
	list, err := os.ReadDir(dir)
	if err != nil || len(list) != 1 || list[0].Name() != "sub" {
		t.Errorf("left behind: %v, %v", list, err)
	}
	if err := Write(filepath.Join(dir, "no", "a.tif"), wavy(t, terrain.LonLat(), 301, 503)); err == nil || !strings.Contains(err.Error(), "a.tif") {
		t.Errorf("a missing folder: %v", err)
	}
}
