package summary

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/geo"
)

// ringAt makes a ring of frame points into positions.
func ringAt(pts ...geo.Point) []geo.LonLat {
	out := make([]geo.LonLat, len(pts))
	for i, p := range pts {
		out[i] = testFrame.Inverse(p)
	}
	return out
}

// inRings is a slow, obvious even-odd test.
func inRings(p geo.Point, rings [][]geo.Point) bool {
	in := false
	for _, r := range rings {
		for i, a := range r {
			b := r[(i+1)%len(r)]
			if (a.N > p.N) != (b.N > p.N) && p.E < a.E+(b.E-a.E)*(p.N-a.N)/(b.N-a.N) {
				in = !in
			}
		}
	}
	return in
}

// TestInsideClosedForms holds the polygon's probability to closed forms.
func TestInsideClosedForms(t *testing.T) {
	upper := func(x float64) float64 { return 0.5 * math.Erfc(x/math.Sqrt2) }
	box := func(e0, n0, e1, n1 float64) []geo.LonLat {
		return ringAt(geo.Point{E: e0, N: n0}, geo.Point{E: e1, N: n0}, geo.Point{E: e1, N: n1}, geo.Point{E: e0, N: n1})
	}
	reverse := func(r []geo.LonLat) []geo.LonLat {
		out := make([]geo.LonLat, len(r))
		for i, p := range r {
			out[len(r)-1-i] = p
		}
		return out
	}
	span := func(a, b, sigma float64) float64 { return upper(a/sigma) - upper(b/sigma) }
	one := []gauss{{1, 0, 0, Cov{9, 0, 4}}}
	tilted := []gauss{{1, 0, 0, Cov{4, 1.2, 1}}} // correlation 0.6
	far := 1000.0
	for _, c := range []struct {
		name string
		gs   []gauss
		poly [][]geo.LonLat
		want float64
	}{
		{"box", one, [][]geo.LonLat{box(-1, -3, 4, 1)}, span(-1, 4, 3) * span(-3, 1, 2)},
		{"box, clockwise and closed", one, [][]geo.LonLat{append(reverse(box(-1, -3, 4, 1)), box(-1, -3, 4, 1)[3])}, span(-1, 4, 3) * span(-3, 1, 2)},
		{"far box", one, [][]geo.LonLat{box(12, -3, 15, 1)}, span(12, 15, 3) * span(-3, 1, 2)},
		{"beyond reach", one, [][]geo.LonLat{box(25, -3, 35, 1)}, 0},
		{"around everything", one, [][]geo.LonLat{box(-far, -far, far, far)}, 1},
		{"half plane through the mean", one, [][]geo.LonLat{box(0, -far, far, far)}, 0.5},
		{"corner at the mean", one, [][]geo.LonLat{box(0, 0, far, far)}, 0.25},
		// Sheppard: P(X>0, Y>0) = 1/4 + asin(rho)/2π.
		{"quadrant, correlated", tilted, [][]geo.LonLat{box(0, 0, far, far)}, 0.25 + math.Asin(0.6)/(2*math.Pi)},
		{"hole", one, [][]geo.LonLat{box(-far, -far, far, far), box(-1, -3, 4, 1)}, 1 - span(-1, 4, 3)*span(-3, 1, 2)},
		{"point inside", []gauss{{1, 1, 1, Cov{}}}, [][]geo.LonLat{box(0, 0, 2, 2)}, 1},
		{"point in the hole", []gauss{{1, 1, 1, Cov{}}}, [][]geo.LonLat{box(-5, -5, 5, 5), box(0, 0, 2, 2)}, 0},
		{"line", []gauss{{1, 0, 0, Cov{4, 0, 0}}}, [][]geo.LonLat{box(-1, -1, 3, 1)}, span(-1, 3, 2)},
		{"two", []gauss{{0.3, 0, 0, Cov{9, 0, 4}}, {0.7, 500, 0, Cov{1, 0, 1}}}, [][]geo.LonLat{box(-far, -far, 0, far)}, 0.15},
	} {
		s, _ := summarize(t, Options{}, planeInput(c.gs))
		got, err := s.Inside(c.poly)
		// Lon/lat rounding moves corners by 1e-9 m.
		if err != nil || math.Abs(got-c.want) > 2e-8 {
			t.Errorf("%s: %.10f, want %.10f (%v)", c.name, got, c.want, err)
		}
	}
}

// TestOwen holds T to its closed forms: T(0, a) = atan(a)/2π, T(h, 1) =
// ½Φ(h)Q(h) (Owen 1956), and to the trapezoidal rule.
func TestOwen(t *testing.T) {
	for _, h := range []float64{0, 0.01, 0.3, 1, 2.5, 5, 8} {
		q := 0.5 * math.Erfc(h/math.Sqrt2)
		if got := owen(h, 1); math.Abs(got-0.5*q*(1-q)) > 1e-10 {
			t.Errorf("T(%v, 1) = %v, want %v", h, got, 0.5*q*(1-q))
		}
		for _, a := range []float64{-3, -0.4, 0.1, 0.7, 1.5, 20, 1e4} {
			want := 0.0
			const n = 100_000
			// In the angle: ∫ exp(-h²/2cos²ψ) dψ.
			for i := range n {
				c := math.Cos(math.Atan(a) * (float64(i) + 0.5) / n)
				want += math.Exp(-0.5 * h * h / (c * c))
			}
			want *= math.Atan(a) / n / (2 * math.Pi)
			if got := owen(h, a); math.Abs(got-want) > 1e-10 {
				t.Errorf("T(%v, %v) = %v, want %v", h, a, got, want)
			}
		}
	}
}

// TestInsideSampled compares the probability in a jagged polygon with a hole
// with samples, within 4.5 standard errors.
func TestInsideSampled(t *testing.T) {
	const seed, n = 9, 300_000
	rng := rand.New(rand.NewPCG(seed, 1))
	r := roads{{geo.Point{E: -200, N: 50}, geo.Point{E: 300, N: 90}, "a", -1}}
	for name, in := range map[string]*Input{
		"roads": roadInput(r, 1, []part{{0, 1, 230, 30}}),
		"plane": latticeInput(50, 2, 15, geo.Point{E: 40, N: 80}),
	} {
		s, p := summarize(t, Options{}, in)
		var star, hole []geo.Point
		for i := range 14 {
			d := geo.Direction(2 * math.Pi * float64(i) / 14)
			a := 12 + 25*float64(i%2)
			star = append(star, p.MeanFrame.Add(geo.Point{E: a * d.E, N: a * d.N}))
			hole = append(hole, p.MeanFrame.Add(geo.Point{E: 5 * d.E, N: 5 * d.N}))
		}
		got, err := s.Inside([][]geo.LonLat{ringAt(star...), ringAt(hole...)})
		in := 0
		for _, q := range draw(rng, mixture(s), n) {
			if inRings(q, [][]geo.Point{star, hole}) {
				in++
			}
		}
		want := float64(in) / n
		if err != nil || math.Abs(got-want) > 4.5*math.Sqrt(want*(1-want)/n) {
			t.Errorf("%s, seed %d: %v, sampled %v (%v)", name, seed, got, want, err)
		}
	}
}

func TestInsideBadPolygon(t *testing.T) {
	s, _ := New(Options{})
	if _, err := s.Inside([][]geo.LonLat{{{}, {}, {}}}); !errors.Is(err, ErrNothing) {
		t.Errorf("before the first belief: %v", err)
	}
	if _, err := s.Region(0.5); !errors.Is(err, ErrNothing) {
		t.Errorf("before the first belief: %v", err)
	}
	s, _ = summarize(t, Options{}, planeInput([]gauss{{1, 0, 0, Cov{1, 0, 1}}}))
	for name, poly := range map[string][][]geo.LonLat{
		"none": nil, "no positions": {{}}, "two": {lonLats(0, 0, 1, 1)}, "closed two": {lonLats(0, 0, 1, 1, 0, 0)},
		"off the globe": {lonLats(0, 0, 1, 1, 2, 100)}, "nan": {lonLats(0, 0, 1, 1, math.NaN(), 0)},
		"too long": {make([]geo.LonLat, maxPolygonCorners+1)},
	} {
		if _, err := s.Inside(poly); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
	for _, level := range []float64{0, 1, -1, 2, math.NaN()} {
		if _, err := s.Region(level); err == nil {
			t.Errorf("level %v: no error", level)
		}
	}
}

// lonLats makes positions from degrees.
func lonLats(deg ...float64) []geo.LonLat {
	var out []geo.LonLat
	for i := 0; i < len(deg); i += 2 {
		out = append(out, geo.FromDegrees(deg[i], deg[i+1]))
	}
	return out
}

// TestRegionSampled proves that a region holds what it says, by samples within
// 4.5 standard errors, little more, that Inside agrees, that rings are closed,
// rightly wound and bounded, and that the area is not far above the least one.
func TestRegionSampled(t *testing.T) {
	const seed, n = 17, 100_000
	rng := rand.New(rand.NewPCG(seed, 2))
	r := append(street(geo.Point{E: -200, N: 50}, geo.Point{E: 300, N: 90}, "a"),
		road{geo.Point{E: -200, N: 50}, geo.Point{E: -300, N: 500}, "b", -1})
	ring := []gauss{}
	for i := range 72 {
		d := geo.Direction(2 * math.Pi * float64(i) / 72)
		ring = append(ring, gauss{1.0 / 72, 100 * d.E, 100 * d.N, Cov{16, 0, 16}})
	}
	for _, c := range []struct {
		name     string
		in       *Input
		polygons int // at 95 %
		holes    int
	}{
		{"roads", roadInput(r, 1, []part{{0, 0.6, 230, 5}, {2, 0.4, 400, 12}}), 2, 0},
		{"lattice", latticeInput(40, 2, 8, geo.Point{E: 40, N: 80}), 1, 0},
		{"correlated", planeInput([]gauss{{1, 0, 0, Cov{100, 60, 49}}}), 1, 0},
		{"ring", planeInput(ring), 1, 1},
	} {
		s, _ := summarize(t, Options{}, c.in)
		pts := draw(rng, mixture(s), n)
		for _, level := range []float64{0.5, 0.95, 0.99} {
			reg, err := s.Region(level)
			if err != nil {
				t.Fatal(err)
			}
			holes, corners, inside := 0, 0, 0.0
			var rings [][]geo.Point
			for _, poly := range reg.Polygons {
				holes += len(poly) - 1
				for k, lr := range poly {
					corners += len(lr)
					if lr[0] != lr[len(lr)-1] || len(lr) < 4 {
						t.Fatalf("%s: ring not closed", c.name)
					}
					var fr []geo.Point
					a := 0.0
					for i, p := range lr[:len(lr)-1] {
						fr = append(fr, testFrame.Forward(p))
						a += p.Lon*lr[i+1].Lat - p.Lat*lr[i+1].Lon
					}
					rings = append(rings, fr)
					// Signed area about the origin of lon/lat, rounding 1e-16.
					if math.Abs(a) > 1e-14 && (a > 0) != (k == 0) {
						t.Errorf("%s: ring %d is wound the wrong way", c.name, k)
					}
				}
				if p, err := s.Inside(poly); err != nil {
					t.Fatal(err)
				} else {
					inside += p
				}
			}
			hit := 0
			for _, p := range pts {
				if inRings(p, rings) {
					hit++
				}
			}
			got, slack := float64(hit)/n, 4.5*math.Sqrt(level*(1-level)/n)
			// Above: the margin, and what the blur adds at most: 0.6 pixels of
			// half a sigma widen by 4.4 %, worth 2·φ(0.67)·0.67·0.044 = 0.019
			// across the ring at 50 %, less elsewhere.
			if got < level-slack || got > level+0.05*(1-level)+0.002+0.019+slack {
				t.Errorf("%s, seed %d: the %v region holds %v of the samples", c.name, seed, level, got)
			}
			if math.Abs(inside-got) > slack {
				t.Errorf("%s, seed %d: Inside of the %v region %v, sampled %v", c.name, seed, level, inside, got)
			}
			if corners > 2048+2*len(rings) {
				t.Errorf("%s: %d corners", c.name, corners)
			}
			if level == 0.95 && (len(reg.Polygons) != c.polygons || holes != c.holes) {
				t.Errorf("%s: %d polygons with %d holes, want %d, %d", c.name, len(reg.Polygons), holes, c.polygons, c.holes)
			}
			if c.name == "correlated" {
				// The least area: π·chi²·sqrt det, chi² = -2 ln(1-level).
				least := -2 * math.Pi * math.Log(1-level) * math.Sqrt(100*49-60*60)
				if reg.AreaM2 < 0.98*least || reg.AreaM2 > 1.2*least {
					t.Errorf("%v region of %v m², least %v", level, reg.AreaM2, least)
				}
			}
		}
	}
}

// TestRegionBound proves that corners stay bounded for a belief of many places.
func TestRegionBound(t *testing.T) {
	const seed = 3
	rng := rand.New(rand.NewPCG(seed, 0))
	var gs []gauss
	for range 900 {
		gs = append(gs, gauss{1.0 / 900, 30000 * rng.Float64(), 30000 * rng.Float64(), Cov{9, 0, 9}})
	}
	s, _ := summarize(t, Options{MaxVertices: 200}, planeInput(gs))
	reg, err := s.Region(0.95)
	if err != nil {
		t.Fatal(err)
	}
	corners := 0
	for _, p := range reg.Polygons {
		for _, r := range p {
			corners += len(r) - 1
		}
	}
	if corners > 200 || reg.Holds < 0.95 {
		t.Errorf("%d corners, holds %v", corners, reg.Holds)
	}
}
