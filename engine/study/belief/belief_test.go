package belief

import (
	"bytes"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/fixtures/outside"
)

var origin = geo.FromDegrees(-30, 45) // in the open Atlantic

// some is a belief of three cells of 2 m, one of them twice, in a corner of the
// plane where columns and rows are negative.
func some(scale float64) *Belief {
	return &Belief{
		TimeNS: 1e9, Drive: "a\x01b", Space: plane.Open(origin, 20e3, 100),
		Lattice: filter.Lattice{Origin: geo.Point{E: 0.5, N: -0.25}, SpacingM: 2},
		Cloud: filter.Cloud{
			East:  []float64{0.5 - 2000*scale, 0.5 - 2000*scale, 0.5 - 1996*scale, 0.5 - 1998*scale},
			North: []float64{-0.25 + 600*scale, -0.25 + 600*scale, -0.25 + 602*scale, -0.25 + 596*scale},
			Mass:  []float64{0.25, 0.125, 0.5, 0.125},
		},
	}
}

// TestGeoTIFFByGDAL lets GDAL say where each cell is, and its probability.
func TestGeoTIFFByGDAL(t *testing.T) {
	tool := outside.Tool(t, "gdal_translate", "gdal-bin")
	for _, scale := range []float64{1, 5000} { // the second is made coarser
		b := some(scale)
		var text bytes.Buffer
		if err := b.Write(&text); err != nil {
			t.Fatal(err)
		}
		if text.Len() > 4*mostCells+4096 {
			t.Fatalf("%d bytes", text.Len())
		}
		path := filepath.Join(t.TempDir(), "belief"+b.Suffix())
		if err := os.WriteFile(path, text.Bytes(), 0o600); err != nil {
			t.Fatal(err)
		}
		if scale > 1 {
			mass, cols, rows, cellM, nw := b.grid()
			total := 0.0
			for i, m := range mass {
				if total += m; m == 0.5 {
					e, n := nw.E+(float64(i%cols)+0.5)*cellM, nw.N-(float64(i/cols)+0.5)*cellM
					if math.Abs(e-b.Cloud.East[2]) > cellM/2 || math.Abs(n-b.Cloud.North[2]) > cellM/2 {
						t.Errorf("the heaviest cell of %g m is at %v, %v", cellM, e, n)
					}
				}
			}
			if math.Abs(total-1) > 1e-12 || cols*rows > mostCells || cols*rows < mostCells/5 {
				t.Errorf("%d × %d cells hold %v", cols, rows, total)
			}
			continue
		}
		xyz := filepath.Join(t.TempDir(), "cells.xyz")
		if out, err := exec.Command(tool, "-q", "-of", "XYZ", path, xyz).CombinedOutput(); err != nil || len(out) > 0 {
			t.Fatalf("%v: %s", err, out)
		}
		cells, err := os.ReadFile(xyz)
		if err != nil {
			t.Fatal(err)
		}
		want := map[geo.Point]float64{}
		for i, m := range b.Cloud.Mass {
			want[geo.Point{E: b.Cloud.East[i], N: b.Cloud.North[i]}] += m
		}
		n := 0
		for line := range strings.Lines(string(cells)) {
			var v [3]float64
			for i, f := range strings.Fields(line) {
				if v[i], err = strconv.ParseFloat(f, 64); err != nil {
					t.Fatal(err)
				}
			}
			n++
			if p := (geo.Point{E: v[0], N: v[1]}); want[p] != v[2] {
				t.Errorf("at %v it reads %v, want %v", p, v[2], want[p])
			}
			delete(want, geo.Point{E: v[0], N: v[1]})
		}
		if n != 12 || len(want) > 0 {
			t.Errorf("%d cells; not there: %v", n, want)
		}
		info, err := exec.Command(outside.Tool(t, "gdalinfo", "gdal-bin"), path).CombinedOutput()
		if err != nil {
			t.Fatalf("%v: %s", err, info)
		}
		for _, says := range []string{`"Latitude of natural origin",45,`, `"Longitude of natural origin",-30,`, "Pixel Size = (2.0", "a?b at 1970-01-01T00:00:01Z"} {
			if !strings.Contains(string(info), says) {
				t.Errorf("GDAL does not say %q: %s", says, info)
			}
		}
	}
	if err := (&Belief{Space: plane.Open(origin, 20e3, 100)}).Write(&bytes.Buffer{}); err == nil {
		t.Error("an empty belief is written")
	}
}
