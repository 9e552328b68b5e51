package heightfile

import (
	"bytes"
	"fmt"
	"hash/crc32"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"leadline/terrain"
)

// fuzzOptions bound the work for one input.
func fuzzOptions() Options {
	c, err := terrain.UTM(33, false)
	if err != nil {
		panic(err)
	}
	return Options{CRS: c, MaxSamples: 1 << 16}
}

// checkDecode is what every reader owes every input: no panic, one line about
// an error, a raster within the bound that is made of finite numbers and
// voids.
func checkDecode(t *testing.T, name string, b []byte) {
	for _, opt := range []Options{{MaxSamples: 1 << 16}, fuzzOptions()} {
		res, err := decode(name, b, opt)
		if err != nil {
			if strings.Contains(err.Error(), "\n") || !strings.Contains(err.Error(), name) {
				t.Fatalf("error %q", err)
			}
			continue
		}
		r := res.Raster
		if g := r.Grid(); g.Check() != nil || g.Cols*g.Rows > 1<<16 || len(r.Samples()) != g.Cols*g.Rows {
			t.Fatalf("grid %+v with %d samples", g, len(r.Samples()))
		}
		for i, h := range r.Samples() {
			if h-h != 0 && h == h {
				t.Fatalf("sample %d is %v", i, h)
			}
		}
	}
}

func FuzzASCII(f *testing.F) {
	f.Add(fixture(f, "utm.asc"))
	f.Add(fixture(f, "utm-center.asc"))
	f.Fuzz(func(t *testing.T, b []byte) { checkDecode(t, "a.asc", b) })
}

// FuzzHGT varies the name, which is where a tile is parsed; its content is
// 16-bit numbers of whatever value, in a file whose size alone decides.
func FuzzHGT(f *testing.F) {
	f.Add("N10W062.hgt", []byte{1, 2})
	f.Add("s01e179.SRTMGL1.hgt", []byte{})
	f.Fuzz(func(t *testing.T, name string, b []byte) {
		if lat, lon, ok := hgtCorner(name); ok && (lat < -90 || lat > 89 || lon < -180 || lon > 179) {
			t.Fatalf("%q: corner %d, %d", name, lat, lon)
		}
		checkDecode(t, "N10W062.hgt", b)
	})
}

func FuzzGeoTIFF(f *testing.F) {
	for _, name := range []string{"lonlat-lzw.tif", "utm-deflate.tif", "utm-deflate-be.tif", "nocrs.tif"} {
		f.Add(fixture(f, name))
	}
	f.Fuzz(func(t *testing.T, b []byte) { checkDecode(t, "a.tif", b) })
}

func FuzzNetCDF(f *testing.F) {
	f.Add(fixture(f, "depths.nc"))
	f.Add(fixture(f, "feet.nc"))
	f.Fuzz(func(t *testing.T, b []byte) { checkDecode(t, "a.nc", b) })
}

// FuzzCompiled: bytes that are no compiled map are refused in one line. An
// input that carries the checksums of its content may be anything, so Open's
// own bounds are tried too, by giving the input its checksums.
func FuzzCompiled(f *testing.F) {
	path := filepath.Join(f.TempDir(), "a"+Suffix)
	if err := Write(path, wavy(f, terrain.LonLat(), 10, 12)); err != nil {
		f.Fatal(err)
	}
	b, err := os.ReadFile(path)
	if err != nil {
		f.Fatal(err)
	}
	f.Add(b)
	f.Fuzz(func(t *testing.T, b []byte) {
		for _, b := range [][]byte{b, seal(b)} {
			r, err := attach(b)
			if err != nil {
				if strings.Contains(err.Error(), "\n") {
					t.Fatalf("error %q", err)
				}
				continue
			}
			if g := r.Grid(); g.Check() != nil || len(r.Samples()) != g.Cols*g.Rows {
				t.Fatalf("grid %+v with %d samples", g, len(r.Samples()))
			}
		}
	})
}

// seal gives bytes that look like a compiled map the checksums of what they
// hold, so that fuzzing reaches what comes after.
func seal(b []byte) []byte {
	b = append([]byte(nil), b...)
	t, err := openTIFF(bytes.NewReader(b), int64(len(b)))
	if err != nil {
		return b
	}
	l, err := t.layout(Options{})
	if err != nil || l.offset[0] > uint64(len(b)) {
		return b
	}
	if at := bytes.Index(b, []byte(`"`+itemStripCRC+`">`)); at >= 0 {
		at += len(itemStripCRC) + 3
		for i := range l.offset {
			from, n := l.offset[i], uint64(l.chunkRows(i)*l.cols*4)
			if from > uint64(len(b)) || n > uint64(len(b))-from || at+8 > len(b) {
				break
			}
			copy(b[at:], fmt.Sprintf("%08x", crc32.Checksum(b[from:from+n], castagnoli)))
			at += 9
		}
	}
	head := b[:l.offset[0]]
	if at, err := headerCRCPlace(head); err == nil {
		copy(head[at:], zeroCRC)
		copy(head[at:], fmt.Sprintf("%08x", crc32.Checksum(head, castagnoli)))
	}
	return b
}

// TestSeal: the fuzz target's own help works: a damaged map, sealed, opens.
func TestSeal(t *testing.T) {
	path := filepath.Join(t.TempDir(), "a"+Suffix)
	if err := Write(path, wavy(t, terrain.LonLat(), 40, 70)); err != nil {
		t.Fatal(err)
	}
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	b[len(b)-100] ^= 1
	if _, err := attach(b); err == nil {
		t.Error("damage is not found")
	}
	if _, err := attach(seal(b)); err != nil {
		t.Error(err)
	}
}

// TestCorpus: every fuzz target has committed inputs, which run with the
// tests.
func TestCorpus(t *testing.T) {
	for _, name := range []string{"FuzzASCII", "FuzzHGT", "FuzzGeoTIFF", "FuzzNetCDF", "FuzzCompiled"} {
		list, err := os.ReadDir(filepath.Join("testdata", "fuzz", name))
		if err != nil || len(list) < 3 {
			t.Errorf("%s: %d inputs, %v", name, len(list), err)
		}
	}
}
