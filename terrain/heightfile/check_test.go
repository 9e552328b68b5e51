package heightfile

import (
	"bytes"
	"encoding/json"
	"image/png"
	"math"
	"strings"
	"testing"

	"leadline/terrain"
)

// TestCheck: the report's figures against what the raster was made of.
func TestCheck(t *testing.T) {
	r := wavy(t, terrain.LonLat(), 301, 503)
	rep := Check(r)
	// A second of arc at 50.23° N on WGS 84: 30.893 m · cos of the reduced
	// latitude east, 30.900 m north; computed from the radii of curvature
	// N = a/√(1-e²sin²φ), M = a(1-e²)/(1-e²sin²φ)^1.5.
	lat := (50.3 - 251./3600) * math.Pi / 180
	const a, e2 = 6378137.0, 0.00669437999014
	w := 1 - e2*math.Sin(lat)*math.Sin(lat)
	sec := math.Pi / 180 / 3600
	eastM, northM := a/math.Sqrt(w)*math.Cos(lat)*sec, a*(1-e2)/math.Pow(w, 1.5)*sec
	for _, c := range []struct {
		what           string
		got, want, tol float64
	}{
		{"resolution east", rep.ResolutionEastM, eastM, 1e-6},
		{"resolution north", rep.ResolutionNorthM, northM, 1e-6},
		{"size east", rep.SizeEastM, 300 * eastM, 1e-3},
		{"size north", rep.SizeNorthM, 502 * northM, 1e-3},
		{"west", rep.WestDeg, 10.1, 1e-9},
		{"east", rep.EastDeg, 10.1 + 300./3600, 1e-9},
		{"south", rep.SouthDeg, 50.3 - 502./3600, 1e-9},
		{"north", rep.NorthDeg, 50.3, 1e-9},
		{"voids", float64(rep.Voids.Samples), 9 * 19, 0},
		{"void areas", float64(rep.Voids.Areas), 1, 0},
		{"void share", rep.Voids.Share, 9 * 19. / (301 * 503), 1e-12},
		{"void size", rep.Voids.LargestKm2, 9 * 19 * eastM * northM / 1e6, 1e-6},
		{"void longitude", rep.Voids.LargestLonDeg, 10.1 + 21./3600, 1e-9},
		{"void latitude", rep.Voids.LargestLatDeg, 50.3 - 41./3600, 1e-9},
		{"sigma", *rep.SigmaM, 9.7269, 0},
		// (3 km)²/2R² east of the middle.
		{"frame", rep.FrameScaleError, 1.1e-7, 0.2e-7},
	} {
		if !(math.Abs(c.got-c.want) <= c.tol) {
			t.Errorf("%s: %v, want %v", c.what, c.got, c.want)
		}
	}
	share := 0.0
	for _, c := range rep.Slope.Classes {
		share += c.Share
	}
	if math.Abs(share-1) > 1e-12 || rep.Slope.RMS <= 0 || rep.Slope.RMS > rep.Slope.Max {
		t.Errorf("slopes %+v", rep.Slope)
	}
	if len(rep.Warnings) != 0 {
		t.Errorf("warnings %q", rep.Warnings)
	}
	b, err := json.Marshal(rep)
	if err != nil {
		t.Fatal(err)
	}
	var back Report
	if err := json.Unmarshal(b, &back); err != nil || back.Fingerprint != rep.Fingerprint {
		t.Errorf("JSON: %v", err)
	}
	var text strings.Builder
	if err := rep.WriteText(&text); err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{"301 columns × 503 rows", "EGM96", "sigma 9.73 m", "171 samples", "Apache-2.0\n                second line", rep.Fingerprint} {
		if !strings.Contains(text.String(), want) {
			t.Errorf("the text lacks %q:\n%s", want, text.String())
		}
	}
}

// TestCheckWarns: each kind of doubt is said.
func TestCheckWarns(t *testing.T) {
	flat := func(c, r int) float64 { return 5 }
	board := func(c, r int) float64 {
		if (c+r)%2 == 1 {
			return math.NaN()
		}
		return 5
	}
	place := terrain.Grid{CRS: terrain.LonLat(), Cols: 50, Rows: 20, FirstX: 10, FirstY: 50, StepX: .001, StepY: -.001}
	wide, far := place, place
	wide.StepX = .01
	far.FirstX, far.FirstY, far.StepX, far.StepY = 5, 1, .2, -.1
	for _, c := range []struct {
		want string
		grid terrain.Grid
		f    func(col, row int) float64
	}{
		{"vertical datum is unstated", place, flat},
		{"vertical error is unstated", place, flat},
		{"no cell has four known corners", place, board},
		{"50 % of the samples are void", place, board},
		{"unmarked voids", place, func(c, r int) float64 { return 5 - 10004*float64(r%2) }},
		{"no place on Earth", place, func(c, r int) float64 { return 12000 }},
		{"terraces", place, func(c, r int) float64 { return math.Floor(float64(r) / 3) }},
		{"is the coordinate system right", wide, flat},
		{"cut the map to the region", far, flat},
	} {
		g := c.grid
		h := make([]float32, g.Cols*g.Rows)
		for i := range h {
			h[i] = float32(c.f(i%g.Cols, i/g.Cols))
		}
		r, err := terrain.New(g, h, terrain.Meta{})
		if err != nil {
			t.Fatal(err)
		}
		if all := strings.Join(Check(r).Warnings, "\n"); !strings.Contains(all, c.want) {
			t.Errorf("warnings %q lack %q", all, c.want)
		}
	}
}

// TestPicture: a PNG in the map's proportions, with the scale's both ends and
// the void colour in it.
func TestPicture(t *testing.T) {
	r := wavy(t, terrain.LonLat(), 301, 503)
	var b bytes.Buffer
	if err := Picture(&b, r); err != nil {
		t.Fatal(err)
	}
	img, err := png.Decode(&b)
	if err != nil {
		t.Fatal(err)
	}
	scale := sequential()
	var dark, light, void int
	rect := img.Bounds()
	minY, maxY := rect.Max.Y, 0
	for y := rect.Min.Y; y < rect.Max.Y; y++ {
		for x := rect.Min.X; x < rect.Max.X; x++ {
			cr, cg, cb, _ := img.At(x, y).RGBA()
			near := func(r, g, b uint8) bool {
				return math.Abs(float64(cr>>8)-float64(r)) < 12 && math.Abs(float64(cg>>8)-float64(g)) < 12 && math.Abs(float64(cb>>8)-float64(b)) < 12
			}
			if near(scale[0].R, scale[0].G, scale[0].B) {
				dark++
			}
			if near(scale[255].R, scale[255].G, scale[255].B) {
				light++
			}
			if near(voidColour.R, voidColour.G, voidColour.B) {
				void++
				minY, maxY = min(minY, y), max(maxY, y)
			}
		}
	}
	// The void is 9 × 19 samples of 301 × 503, the map 1200 pixels high.
	if dark < 1000 || light < 1000 || void < 9*19*1200*1200/503/503/2 {
		t.Errorf("%v: %d dark, %d light, %d void pixels", rect, dark, light, void)
	}
	if minY > rect.Max.Y/4 {
		t.Errorf("the void is at the bottom (%d to %d of %d): is north up?", minY, maxY, rect.Max.Y)
	}
	// Lightness rises along the scale: it can be read without colour.
	last := -1.0
	for i, c := range scale {
		if y := 0.2126*float64(c.R) + 0.7152*float64(c.G) + 0.0722*float64(c.B); y < last {
			t.Fatalf("colour %d is darker than the one before", i)
		} else {
			last = y
		}
	}
	// A flat map has a picture too.
	h := make([]float32, 100)
	flat, err := terrain.New(terrain.Grid{CRS: terrain.LonLat(), Cols: 10, Rows: 10, FirstX: 1, FirstY: 1, StepX: 1e-4, StepY: -1e-4}, h, terrain.Meta{})
	if err != nil {
		t.Fatal(err)
	}
	if err := Picture(&b, flat); err != nil {
		t.Error(err)
	}
}
