package terrain

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"leadline/engine/geo"
)

func must[T any](v T, err error) T {
	if err != nil {
		panic(err)
	}
	return v
}

// raster fills a grid by a function of column and row.
func raster(tb testing.TB, g Grid, f func(c, r int) float64, meta Meta) *Raster {
	tb.Helper()
	h := make([]float32, g.Cols*g.Rows)
	for r := range g.Rows {
		for c := range g.Cols {
			h[r*g.Cols+c] = float32(f(c, r))
		}
	}
	out, err := New(g, h, meta)
	if err != nil {
		tb.Fatal(err)
	}
	return out
}

func sample(r *Raster, q geo.Point) (h, se, sn, v float64) {
	d := geo.Heights{HeightM: make([]float64, 1), SlopeE: make([]float64, 1), SlopeN: make([]float64, 1), VarianceM2: make([]float64, 1)}
	r.Sample(d, []float64{q.E}, []float64{q.N})
	return d.HeightM[0], d.SlopeE[0], d.SlopeN[0], d.VarianceM2[0]
}

// grids at the places and of the kinds that the tests run over: 3 arc seconds
// at the latitude of Trinidad, Colorado, and at 65°N; UTM; a bare metric grid;
// one across 180°.
func grids() map[string]Grid {
	return map[string]Grid{
		"2x1deg at 37N": {LonLat(), 2401, 1201, -106, 38, 1. / 1200, -1. / 1200},
		"2x1deg at 65N": {LonLat(), 2401, 1201, 20, 65.5, 1. / 1200, -1. / 1200},
		"utm 25S":       {must(UTM(25, true)), 401, 301, 288776, 9120761, 89.5, -89.5},
		"tm":            {must(ParseCRS("tm:11.5,48.1")), 87, 61, 0, 600, 10, -10},
		"across 180":    {LonLat(), 601, 301, 179.75, -16, 1. / 1200, -1. / 1200},
	}
}

// TestMappingAccuracy holds the tabulated inverse mapping to 1 cm of the exact
// one at random points over whole grids (the table's own aim is 2 mm).
func TestMappingAccuracy(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	for name, g := range grids() {
		frame := geo.NewFrame(g.Middle())
		box := g.outline(frame, 0, float64(g.Cols-1), 0, float64(g.Rows-1))
		m, err := newMapping(frame, g, box)
		if err != nil {
			t.Fatal(err)
		}
		worst := 0.0
		for range 20000 {
			// The exact way round: a place on the grid, its frame point, and
			// back through the table.
			c, r := rng.Float64()*float64(g.Cols-1), rng.Float64()*float64(g.Rows-1)
			q := frame.Forward(g.Position(c, r))
			gc, gr, jac, ok := m.at(q)
			if !ok {
				t.Fatalf("%s: column %v, row %v is off the table", name, c, r)
			}
			dc, dr := gc-c, gr-r
			det := jac[0]*jac[3] - jac[1]*jac[2]
			worst = math.Max(worst, math.Hypot(jac[3]*dc-jac[1]*dr, jac[0]*dr-jac[2]*dc)/math.Abs(det))
		}
		t.Logf("%s: %d × %d patches, worst error %.2g mm", name, m.nE, m.nN, worst*1000)
		if worst > 0.01 {
			t.Errorf("%s: mapping error %g m", name, worst)
		}
	}
}

// TestPlane: bilinear interpolation reproduces a plane in the grid's own
// coordinates exactly, and its gradient.
func TestPlane(t *testing.T) {
	g := grids()["utm 25S"]
	const a, b, c = 0.03, -0.07, 120
	x := func(col float64) float64 { return g.StepX * col }
	y := func(row float64) float64 { return g.StepY * row }
	r := raster(t, g, func(col, row int) float64 { return a*x(float64(col)) + b*y(float64(row)) + c }, Meta{SigmaM: 3})
	rng := rand.New(rand.NewPCG(3, 4))
	for range 2000 {
		col, row := rng.Float64()*float64(g.Cols-1), rng.Float64()*float64(g.Rows-1)
		q := r.Frame().Forward(g.Position(col, row))
		h, se, sn, v := sample(r, q)
		// float32 heights up to 3100 m round to 1.2e-4 m, and the mapping's
		// 2 mm times a slope of 0.08 adds 1.6e-4.
		if want := a*x(col) + b*y(row) + c; math.Abs(h-want) > 4e-4 {
			t.Fatalf("column %v, row %v: height %v, want %v", col, row, h, want)
		}
		if v != 9 {
			t.Fatalf("variance %v, want 9", v)
		}
		// The frame is turned against UTM by the convergence and scaled by
		// the ratio of scales; the magnitude of the slope scales only.
		_, ku := g.CRS.proj.Convergence(g.Position(col, row))
		_, kf := r.Frame().Convergence(q)
		// Two float32 roundings of 1.2e-4 m across 89.5 m.
		if want := math.Hypot(a, b) * ku / kf; math.Abs(math.Hypot(se, sn)-want) > 4e-6 {
			t.Fatalf("slope %v, %v: magnitude %v, want %v", se, sn, math.Hypot(se, sn), want)
		}
	}
}

// TestGradientIsDerivative compares gradients with central differences inside
// a cell, where the surface is a smooth bilinear patch.
func TestGradientIsDerivative(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	for name, g := range grids() {
		r := raster(t, g, func(int, int) float64 { return math.Round(rng.Float64() * 100) }, Meta{})
		for range 500 {
			col := float64(rng.IntN(g.Cols-1)) + 0.2 + 0.6*rng.Float64()
			row := float64(rng.IntN(g.Rows-1)) + 0.2 + 0.6*rng.Float64()
			q := r.Frame().Forward(g.Position(col, row))
			_, se, sn, _ := sample(r, q)
			const d = 0.05
			e0, _, _, _ := sample(r, geo.Point{E: q.E - d, N: q.N})
			e1, _, _, _ := sample(r, geo.Point{E: q.E + d, N: q.N})
			n0, _, _, _ := sample(r, geo.Point{E: q.E, N: q.N - d})
			n1, _, _, _ := sample(r, geo.Point{E: q.E, N: q.N + d})
			// Rounding: columns to 1e-13 of 2400, heights of 100 m a cell of
			// 10 m or more, differences over 0.1 m: below 1e-8; the third
			// derivative of the mapping is far below.
			if de, dn := (e1-e0)/(2*d), (n1-n0)/(2*d); math.Abs(de-se) > 1e-7 || math.Abs(dn-sn) > 1e-7 {
				t.Fatalf("%s: column %v, row %v: gradient %v, %v; differences %v, %v", name, col, row, se, sn, de, dn)
			}
		}
	}
}

// TestAgainstSlowSample compares with the obvious implementation: exact
// inverse projection, then bilinear.
func TestAgainstSlowSample(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 8))
	for name, g := range grids() {
		r := raster(t, g, func(c, w int) float64 {
			return 300 + 200*math.Sin(float64(c)/40)*math.Cos(float64(w)/30)
		}, Meta{})
		b := r.Bounds()
		for range 2000 {
			q := geo.Point{E: b.Min.E + rng.Float64()*(b.Max.E-b.Min.E), N: b.Min.N + rng.Float64()*(b.Max.N-b.Min.N)}
			col, row := g.index(r.Frame().Inverse(q))
			c, w := math.Floor(col), math.Floor(row)
			h, _, _, _ := sample(r, q)
			if c < 0 || w < 0 || c > float64(g.Cols-2) || w > float64(g.Rows-2) {
				continue // the edge has its own test
			}
			at := func(dc, dw int) float64 { return float64(r.heights[(int(w)+dw)*g.Cols+int(c)+dc]) }
			u, v := col-c, row-w
			want := at(0, 0)*(1-u)*(1-v) + at(1, 0)*u*(1-v) + at(0, 1)*(1-u)*v + at(1, 1)*u*v
			// 1 cm of position on slopes of at most 200/40 m a column of 10 m.
			if !(math.Abs(h-want) < 0.01*0.9) {
				t.Fatalf("%s: %v: height %v, want %v", name, q, h, want)
			}
		}
	}
}

// TestVoidsAndEdges: a cell with a void corner is unknown, so is everything
// off the raster; the edges themselves are known.
func TestVoidsAndEdges(t *testing.T) {
	g := grids()["tm"]
	r := raster(t, g, func(c, w int) float64 {
		if c == 10 && w == 20 {
			return math.NaN()
		}
		return 5
	}, Meta{SigmaM: 2})
	at := func(col, row float64) float64 {
		h, se, sn, v := sample(r, r.Frame().Forward(g.Position(col, row)))
		if math.IsNaN(h) != (v == 0) || se != 0 || sn != 0 {
			t.Errorf("column %v, row %v: height %v with slopes %v, %v, variance %v", col, row, h, se, sn, v)
		}
		return h
	}
	lastC, lastR := float64(g.Cols-1), float64(g.Rows-1)
	for _, c := range []struct {
		col, row float64
		known    bool
	}{
		{9.5, 19.5, false},
		{10.5, 19.5, false},
		{9.5, 20.5, false},
		{10.5, 20.5, false},
		{8.9, 20, true},
		{11.1, 20, true},
		{10, 18.9, true},
		{10, 21.1, true},
		{0, 0, true},
		{lastC, 0, true},
		{0, lastR, true},
		{lastC, lastR, true},
		{0, 30.5, true},
		{lastC, 30.5, true},
		{40.5, 0, true},
		{40.5, lastR, true},
		{-0.01, 30, false},
		{lastC + 0.01, 30, false},
		{40, -0.01, false},
		{40, lastR + 0.01, false},
		{-5, 30, false},
		{400, 3000, false},
	} {
		if h := at(c.col, c.row); math.IsNaN(h) == c.known {
			t.Errorf("column %v, row %v: height %v, want known %v", c.col, c.row, h, c.known)
		}
	}
	for _, q := range []geo.Point{{E: math.NaN()}, {N: math.NaN()}, {E: math.Inf(1)}, {N: math.Inf(-1)}, {E: 1e300, N: 1e300}} {
		if h, _, _, v := sample(r, q); !math.IsNaN(h) || v != 0 {
			t.Errorf("%v: height %v, variance %v, want unknown", q, h, v)
		}
	}
}

// TestBoundsHold: no known height lies outside Bounds, none of the known part
// outside KnownBox, and both are at most a few metres too large.
func TestBoundsHold(t *testing.T) {
	for name, g := range grids() {
		r := raster(t, g, func(c, w int) float64 {
			if c < 7 || w > g.Rows-12 {
				return math.NaN()
			}
			return 1
		}, Meta{})
		check := func(what string, b geo.Box, c0, c1, r0, r1 int) {
			tight := geo.EmptyBox()
			add := func(c, w int) { tight = tight.Extend(r.Frame().Forward(g.Position(float64(c), float64(w)))) }
			for c := c0; c <= c1; c++ {
				add(c, r0)
				add(c, r1)
			}
			for w := r0; w <= r1; w++ {
				add(c0, w)
				add(c1, w)
			}
			for i, d := range []float64{tight.Min.E - b.Min.E, tight.Min.N - b.Min.N, b.Max.E - tight.Max.E, b.Max.N - tight.Max.N} {
				if d < 0 || d > 1.5 {
					t.Errorf("%s: %s is %g m outside the outline on side %d, want 0 to 1.5", name, what, d, i)
				}
			}
		}
		check("Bounds", r.Bounds(), 0, g.Cols-1, 0, g.Rows-1)
		check("KnownBox", r.KnownBox(), 7, g.Cols-1, 0, g.Rows-12)
	}
}

// TestLE90 holds the conversion to the product specifications: DTED level 1
// has LE90 30 m, SRTM 16 m; sigma = LE90 / 1.6449.
func TestLE90(t *testing.T) {
	for _, c := range []struct{ le90, sigma, digits float64 }{{30, 18.2, 0.05}, {16, 9.73, 0.005}} {
		if got := SigmaFromLE90(c.le90); math.Abs(got-c.sigma) > c.digits {
			t.Errorf("LE90 %v m: sigma %v, want %v", c.le90, got, c.sigma)
		}
	}
}

// TestVoidAreas compares connected voids with a flood fill.
func TestVoidAreas(t *testing.T) {
	rng := rand.New(rand.NewPCG(9, 10))
	for _, share := range []float64{0, 0.1, 0.4, 0.6, 0.9} {
		g := Grid{LonLat(), 40, 30, 10, 50, 0.001, -0.001}
		r := raster(t, g, func(c, w int) float64 {
			if rng.Float64() < share && c+w > 0 {
				return math.NaN()
			}
			return 1
		}, Meta{})
		seen := make([]bool, len(r.heights))
		var want Voids
		for i := range r.heights {
			if seen[i] || r.heights[i] == r.heights[i] {
				continue
			}
			size, stack := 0, []int{i}
			seen[i] = true
			for len(stack) > 0 {
				k := stack[len(stack)-1]
				stack = stack[:len(stack)-1]
				size++
				c, w := k%g.Cols, k/g.Cols
				for _, d := range [][2]int{{1, 0}, {-1, 0}, {0, 1}, {0, -1}} {
					x, y := c+d[0], w+d[1]
					if n := y*g.Cols + x; x >= 0 && y >= 0 && x < g.Cols && y < g.Rows && !seen[n] && r.heights[n] != r.heights[n] {
						seen[n] = true
						stack = append(stack, n)
					}
				}
			}
			want.Samples += size
			want.Areas++
			if size > want.LargestSamples {
				want.LargestSamples, want.LargestCol, want.LargestRow = size, i%g.Cols, i/g.Cols
			}
		}
		got := r.Voids()
		if got.Samples != want.Samples || got.Areas != want.Areas || got.LargestSamples != want.LargestSamples {
			t.Errorf("share %v: %+v, flood fill finds %+v", share, got, want)
		}
	}
}

// TestSlopes: a plane of slope 5 % in both axes has slope 0.05·√2 everywhere.
func TestSlopes(t *testing.T) {
	g := Grid{must(UTM(33, false)), 50, 40, 500000, 5500000, 20, -20}
	r := raster(t, g, func(c, w int) float64 { return float64(c) + float64(w) }, Meta{})
	s := r.Slopes()
	// UTM's scale on the central meridian is 0.9996: ground distance is
	// longer; the rest of the tolerance is the scale across 1 km.
	want := 0.05 * math.Sqrt2 * 0.9996
	if s.Cells != 49*39 || math.Abs(s.RMS-want) > 1e-6 || math.Abs(s.Max-want) > 1e-6 || s.Share[Rolling] != 1 {
		t.Errorf("slopes %+v, want %v, all rolling", s, want)
	}
	for _, c := range []struct {
		slope float64
		want  Roughness
	}{{0, Flat}, {0.01, Gentle}, {0.0999, Rolling}, {0.1, Hilly}, {0.3, Steep}, {math.Inf(1), Steep}, {math.NaN(), -1}} {
		if got := RoughnessOf(c.slope); got != c.want {
			t.Errorf("slope %v is %v, want %v", c.slope, got, c.want)
		}
	}
}

// TestFingerprint: it changes with everything a posterior depends on, and
// with nothing else.
func TestFingerprint(t *testing.T) {
	g := Grid{LonLat(), 3, 3, 10, 50, 0.001, -0.001}
	h := func(x float32) []float32 { return []float32{x, 2, 3, 4, 5, 6, 7, 8, 9} }
	base := Fingerprint(g, h(1), Meta{})
	g2 := g
	g2.FirstX = 10.0000001
	for name, c := range map[string]struct {
		got  string
		same bool
	}{
		"source":  {Fingerprint(g, h(1), Meta{Source: "a", Licence: "b"}), true},
		"height":  {Fingerprint(g, h(1.0001), Meta{}), false},
		"place":   {Fingerprint(g2, h(1), Meta{}), false},
		"sigma":   {Fingerprint(g, h(1), Meta{SigmaM: 1}), false},
		"datum":   {Fingerprint(g, h(1), Meta{VerticalDatum: "EGM96"}), false},
		"Restore": {must(New(g, h(1), Meta{})).Fingerprint(), true},
	} {
		if (c.got == base) != c.same {
			t.Errorf("%s: fingerprint same = %v, want %v", name, c.got == base, c.same)
		}
	}
}

// TestRefused: bad rasters get one line that says what is wrong.
func TestRefused(t *testing.T) {
	ok := Grid{LonLat(), 3, 3, 10, 50, 0.001, -0.001}
	with := func(f func(*Grid)) Grid { g := ok; f(&g); return g }
	nan := float32(math.NaN())
	flat := func() []float32 { return make([]float32, 9) }
	for name, c := range map[string]struct {
		g    Grid
		h    []float32
		meta Meta
		want string
	}{
		"no crs":       {with(func(g *Grid) { g.CRS = CRS{} }), flat(), Meta{}, "no coordinate system"},
		"one row":      {with(func(g *Grid) { g.Rows = 1 }), make([]float32, 3), Meta{}, "at least 2"},
		"huge":         {with(func(g *Grid) { g.Cols, g.Rows = 1<<40, 1<<40 }), nil, Meta{}, "over the limit"},
		"south first":  {with(func(g *Grid) { g.StepY = 0.001 }), flat(), Meta{}, "steps"},
		"NaN step":     {with(func(g *Grid) { g.StepX = math.NaN() }), flat(), Meta{}, "steps"},
		"tiny step":    {with(func(g *Grid) { g.StepX = 1e-300 }), flat(), Meta{}, "in another unit?"},
		"in metres":    {with(func(g *Grid) { g.FirstX, g.FirstY = 500000, 5500000 }), flat(), Meta{}, "in metres?"},
		"globe":        {with(func(g *Grid) { g.FirstX, g.StepX = -180, 120 }), flat(), Meta{}, "too much for one local frame"},
		"continent":    {with(func(g *Grid) { g.FirstX, g.StepX, g.FirstY, g.StepY = 0, 20, 60, -20 }), flat(), Meta{}, "cut out the region"},
		"wrong length": {ok, make([]float32, 8), Meta{}, "do not fill"},
		"all void":     {ok, []float32{nan, nan, nan, nan, nan, nan, nan, nan, nan}, Meta{}, "all 9 heights are void"},
		"infinite":     {ok, []float32{0, 0, 0, 0, 0, float32(math.Inf(-1)), 0, 0, 0}, Meta{}, "column 2, row 1 is infinite"},
		"sigma":        {ok, flat(), Meta{SigmaM: -1}, "vertical sigma"},
		"sigma NaN":    {ok, flat(), Meta{SigmaM: math.NaN()}, "vertical sigma"},
	} {
		_, err := New(c.g, c.h, c.meta)
		if err == nil || !strings.Contains(err.Error(), c.want) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%s: error %v, want one line with %q", name, err, c.want)
		}
	}
}

// TestCRSText: every CRS prints as a text that makes it again.
func TestCRSText(t *testing.T) {
	for in, want := range map[string]string{
		"epsg:4326": "EPSG:4326", "lonlat": "EPSG:4326", "UTM:33N": "EPSG:32633", "utm:25S": "EPSG:32725",
		"EPSG:25832": "EPSG:25832", "EPSG: 26913": "EPSG:26913", "tm:11.5,48.1": "tm:11.5,48.1,1,0,0",
		"tm:-33,0,0.9996,500000,1e7,grs80": "tm:-33,0,0.9996,500000,1e+07,grs80",
	} {
		c, err := ParseCRS(in)
		if err != nil || c.String() != want {
			t.Errorf("%q: %v, %v, want %s", in, c, err, want)
			continue
		}
		if again, err := ParseCRS(c.String()); err != nil || again.String() != want {
			t.Errorf("%q does not read again: %v, %v", want, again, err)
		}
	}
	for _, in := range []string{"", "EPSG:27700", "EPSG:x", "utm:61N", "utm:33", "utm:N", "tm:1", "tm:1,2,3", "tm:1,x", "tm:1,2,0,0,0", "tm:NaN,0", "Mercator"} {
		if c, err := ParseCRS(in); err == nil {
			t.Errorf("%q read as %v, want an error", in, c)
		}
	}
}

// BenchmarkSample measures a point's height, gradient and variance; cloud is
// a belief 2 km across, spread is points all over the raster.
func BenchmarkSample(b *testing.B) {
	g := grids()["2x1deg at 37N"]
	r := raster(b, g, func(c, w int) float64 { return float64((c*7 + w*13) % 500) }, Meta{SigmaM: 5})
	for _, c := range []struct {
		name  string
		halfM float64
	}{{"cloud", 1000}, {"spread", 50000}} {
		for _, n := range []int{100, 10000, 1000000} {
			rng := rand.New(rand.NewPCG(11, 12))
			e, nn := make([]float64, n), make([]float64, n)
			for i := range e {
				e[i], nn[i] = (2*rng.Float64()-1)*c.halfM, (2*rng.Float64()-1)*c.halfM
			}
			d := geo.Heights{HeightM: make([]float64, n), SlopeE: make([]float64, n), SlopeN: make([]float64, n), VarianceM2: make([]float64, n)}
			b.Run(fmt.Sprintf("%s/points=%d", c.name, n), func(b *testing.B) {
				b.ReportAllocs()
				for b.Loop() {
					r.Sample(d, e, nn)
				}
				b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(n), "ns/point")
			})
		}
	}
}
