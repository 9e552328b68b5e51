package geo

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

func dms(d, m, s float64) float64 { return math.Copysign(math.Abs(d)+m/60+s/3600, d) }

// TestTransverseMercatorPublished holds the projection to published worked
// examples, each within the digits printed.
func TestTransverseMercatorPublished(t *testing.T) {
	bng := NewTransverseMercator(Airy1830, FromDegrees(-2, 49), 0.9996012717, 400000, -100000)
	for _, c := range []struct {
		source   string
		tm       *TransverseMercator
		lon, lat float64
		e, n     float64
		tolM     float64
	}{
		{"EPSG Guidance Note 7-2, Transverse Mercator example", bng, 0.5, 50.5, 577274.99, 69740.50, 0.01},
		{"Ordnance Survey, A guide to coordinate systems in Great Britain, annex C", bng, dms(1, 43, 4.5177), dms(52, 39, 27.2531), 651409.903, 313177.270, 0.001},
		{"Snyder, USGS Professional Paper 1395, p. 269", NewTransverseMercator(Clarke1866, FromDegrees(-75, 0), 0.9996, 0, 0), -73.5, 40.5, 127106.5, 4484124.4, 0.05},
		{"GeographicLib documentation, GeoConvert: 38N 444140.54 3684706.36", UTM(38, false), 44.4, 33.3, 444140.54, 3684706.36, 0.01},
	} {
		p := FromDegrees(c.lon, c.lat)
		q := c.tm.Forward(p)
		if math.Abs(q.E-c.e) > c.tolM || math.Abs(q.N-c.n) > c.tolM {
			t.Errorf("%s: got %.4f, %.4f, want %.3f, %.3f", c.source, q.E, q.N, c.e, c.n)
		}
		back := c.tm.Inverse(q)
		if math.Abs(back.Lon-p.Lon) > 1e-14 || math.Abs(back.Lat-p.Lat) > 1e-14 {
			t.Errorf("%s: inverse is off by %g, %g rad", c.source, back.Lon-p.Lon, back.Lat-p.Lat)
		}
	}
	// Snyder's point scale at the same place.
	_, k := NewTransverseMercator(Clarke1866, FromDegrees(-75, 0), 0.9996, 0, 0).Convergence(FromDegrees(-73.5, 40.5))
	if math.Abs(k-0.9997989) > 5e-8 {
		t.Errorf("Snyder: scale %.8f, want 0.9997989", k)
	}
}

// TestGeodesicPublished checks Distance against published lines.
func TestGeodesicPublished(t *testing.T) {
	for _, c := range []struct {
		source         string
		ell            Ellipsoid
		p, q           LonLat
		wantM, azimuth float64 // azimuth in degrees
	}{
		{"GeographicLib documentation, GeodSolve (JFK to LHR)", WGS84, FromDegrees(-73.8, 40.6), FromDegrees(-0.5, 51.6), 5551759.400, 51.198883},
		{
			"Geoscience Australia, Flinders Peak to Buninyong (GRS80)", GRS80,
			FromDegrees(dms(144, 25, 29.52440), dms(-37, 57, 3.72030)), FromDegrees(dms(143, 55, 35.38390), dms(-37, 39, 10.15610)),
			54972.271, dms(306, 52, 5.37),
		},
	} {
		d, az, err := c.ell.Distance(c.p, c.q)
		if err != nil || math.Abs(d-c.wantM) > 1.5e-3 || math.Abs(Deg(az)-c.azimuth) > 3e-6 {
			t.Errorf("%s: %.4f m at %.7f° (%v), want %.3f at %.7f", c.source, d, Deg(az), err, c.wantM, c.azimuth)
		}
	}
}

// TestFrameDistances proves that frame distances within a map of 100 km are
// good to 1e-4, at every latitude where roads are, and that the scale mends the
// rest: the claim that maps rest on.
func TestFrameDistances(t *testing.T) {
	const seed = 11
	rng := rand.New(rand.NewPCG(seed, 0))
	worst := 0.0
	for range 5000 {
		origin := FromDegrees(360*rng.Float64()-180, 140*rng.Float64()-70)
		f := NewFrame(origin)
		a := f.Inverse(Point{1e5 * (rng.Float64() - 0.5), 1e5 * (rng.Float64() - 0.5)})
		b := f.Inverse(Point{1e5 * (rng.Float64() - 0.5), 1e5 * (rng.Float64() - 0.5)})
		d, az, err := WGS84.Distance(a, b)
		if err != nil {
			t.Fatal(err)
		}
		v := f.Forward(b).Sub(f.Forward(a))
		worst = math.Max(worst, math.Abs(v.Norm()/d-1))
		// The direction too: within the arc-to-chord correction, below
		// x·d/4R² = 1.3e-4 rad for lines of 140 km.
		g, _ := f.Convergence(f.Forward(a))
		if math.Abs(WrapPi(Heading(v)-(az-g))) > 1.6e-4 {
			t.Fatalf("seed %d: direction off by %g rad over %.0f m", seed, WrapPi(Heading(v)-(az-g)), d)
		}
	}
	if worst > 1e-4 {
		t.Errorf("seed %d: worst relative distance error %g, want below 1e-4", seed, worst)
	}
}

// TestFromTrue proves that a short true displacement and its frame image name
// the same place.
func TestFromTrue(t *testing.T) {
	f := NewFrame(FromDegrees(-61.5, 10.6))
	at := f.Forward(FromDegrees(-60.4, 10.1))
	a := f.Inverse(at)
	got := f.Inverse(at.Add(f.FromTrue(at, Point{300, 400})))
	d, az, err := WGS84.Distance(a, got)
	// Over 500 m the scale changes by x·500/R² = 1.5e-6.
	if err != nil || math.Abs(d-500) > 2e-3 || math.Abs(WrapPi(az-math.Atan2(3, 4))) > 3e-6 {
		t.Errorf("went %.5f m at %.6f°, %v; want 500 m at %.6f°", d, Deg(az), err, Deg(math.Atan2(3, 4)))
	}
}

func TestWrap(t *testing.T) {
	for _, c := range []struct{ in, pi, compass float64 }{
		{0, 0, 0},
		{math.Pi, -math.Pi, math.Pi},
		{-math.Pi, -math.Pi, math.Pi},
		{3 * math.Pi / 2, -math.Pi / 2, 3 * math.Pi / 2},
		{-1e-320, -1e-320, 0},
		{2 * math.Pi, 0, 0},
		{-7, -7 + 2*math.Pi, -7 + 4*math.Pi},
	} {
		if got := WrapPi(c.in); math.Abs(got-c.pi) > 1e-15*8 {
			t.Errorf("WrapPi(%v) = %v, want %v", c.in, got, c.pi)
		}
		if got := WrapCompass(c.in); math.Abs(got-c.compass) > 1e-15*8 || got >= 2*math.Pi {
			t.Errorf("WrapCompass(%v) = %v, want %v", c.in, got, c.compass)
		}
	}
	if !math.IsNaN(WrapPi(math.Inf(1))) || !math.IsNaN(WrapPi(math.NaN())) {
		t.Error("infinite and NaN angles must give NaN")
	}
}

func ExampleFrame() {
	f := NewFrame(FromDegrees(1.52, 42.51)) // a valley in the Pyrenees
	p := f.Forward(FromDegrees(1.53, 42.51))
	fmt.Printf("%.2f m east, %.2f m north\n", p.E, p.N)
	// Output: 821.86 m east, 0.05 m north
}
