package forecast

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/study/score"
	"leadline/engine/summary"
)

// ground is a field of heights given by a function of the frame's east and north.
type ground struct {
	frame  geo.Frame
	halfM  float64
	height func(e, n float64) (h, slopeE, slopeN float64)
}

func (g ground) Frame() geo.Frame { return g.frame }
func (g ground) Bounds() geo.Box {
	return geo.Box{Min: geo.Point{E: -g.halfM, N: -g.halfM}, Max: geo.Point{E: g.halfM, N: g.halfM}}
}

func (g ground) Sample(dst geo.Heights, e, n []float64) {
	for i := range e {
		h, sE, sN := math.NaN(), 0.0, 0.0
		if g.Bounds().Contains(geo.Point{E: e[i], N: n[i]}) {
			h, sE, sN = g.height(e[i], n[i])
		}
		dst.HeightM[i] = h
		if dst.SlopeE != nil {
			dst.SlopeE[i] = sE
		}
		if dst.SlopeN != nil {
			dst.SlopeN[i] = sN
		}
		if dst.VarianceM2 != nil {
			dst.VarianceM2[i] = 0
		}
	}
}

func over(height func(e, n float64) (h, slopeE, slopeN float64)) *plane.Plane {
	return plane.Over(ground{geo.NewFrame(geo.FromDegrees(-30, 45)), 5000, height}, "test", 50)
}

// hills are 40 m high and some 600 m wide.
func hills(e, n float64) (h, sE, sN float64) {
	const k = 2 * math.Pi / 600
	se, ce := math.Sincos(k * e)
	sn, cn := math.Sincos(k * (n + 0.3*e))
	return 20*se + 20*sn, 20*k*ce + 20*k*0.3*cn, 20 * k * cn
}

const flyingSuite = `
sensors:
  - {name: ins, kind: displacement, noise: {sigma_m_per_sqrt_m: 0.5}}
  - {name: altimeter, kind: clearance, noise: {sigma_m: 3}, outlier_probability: 0}
`

func parsed(t testing.TB, text string) *sensor.Suite {
	t.Helper()
	s, err := sensor.ParseSuite("the test's", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// flown is a straight plan of 2 km to the north-east at 50 m/s.
func flown(t testing.TB, space filter.Space, suite *sensor.Suite, startM float64) *Plan {
	t.Helper()
	return flownFor(t, space, suite, startM, 1)
}

func flownFor(t testing.TB, space filter.Space, suite *sensor.Suite, startM, share float64) *Plan {
	t.Helper()
	f := space.Frame()
	r := &Route{Name: "line", Points: []geo.LonLat{f.Inverse(geo.Point{E: -800, N: -600}), f.Inverse(geo.Point{E: 1600*share - 800, N: 1200*share - 600})}}
	path, err := NewPath(space, r, 50)
	if err != nil {
		t.Fatal(err)
	}
	p, err := NewPlan(path, suite, nil, startM)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

// TestBoundIsTheRecursion: over hills, with displacements and an altimeter without
// outliers, the bound is that of score.CramerRaoStep, step by step.
func TestBoundIsTheRecursion(t *testing.T) {
	p := flown(t, over(hills), parsed(t, flyingSuite), 200)
	marks, err := p.bound()
	if err != nil {
		t.Fatal(err)
	}
	j := mat.NewSymDense(2, []float64{1 / 4e4, 0, 0, 1 / 4e4})
	q := mat.NewSymDense(2, []float64{0.25 * 50, 0, 0, 0.25 * 50})
	for i := 1; i < len(marks); i++ {
		at := p.Path.place(50 * marks[i].timeS).at
		_, sE, sN := hills(at.E, at.N)
		gain := score.MeasurementInformation(mat.NewDense(1, 2, []float64{sE, sN}), 9)
		noise := q
		if marks[i].timeS == 0 { // the altimeter speaks at once
			noise = mat.NewSymDense(2, nil)
		}
		if j, err = score.CramerRaoStep(j, noise, gain); err != nil {
			t.Fatal(err)
		}
		var want mat.Dense
		if err := want.Inverse(j); err != nil {
			t.Fatal(err)
		}
		got := marks[i].cov
		for k, pair := range [][2]float64{{got.EE, want.At(0, 0)}, {got.EN, want.At(0, 1)}, {got.NN, want.At(1, 1)}} {
			if d := math.Abs(pair[0] - pair[1]); d > 1e-4*math.Max(math.Abs(pair[1]), want.At(0, 0)) { // the frame's scale is 1e-6 off 1
				t.Fatalf("mark %d at %v s, element %d: %v, want %v", i, marks[i].timeS, k, pair[0], pair[1])
			}
		}
	}
	if len(marks) < 40 {
		t.Errorf("only %d marks", len(marks))
	}
}

func TestFisher(t *testing.T) {
	at := func(n filter.Noise, extra float64) *linearized {
		l := &linearized{noise: n, rows: 1}
		l.terms.Reset(1, 1, 1)
		l.terms.Extra[0] = extra
		return l
	}
	if got := fisher(at(filter.Gaussian(3), 7), 0); math.Abs(got-1.0/16) > 1e-12 {
		t.Errorf("a Gaussian of 3 with 7 extra has %v, want 1/16", got)
	}
	tempered := filter.Gaussian(2)
	tempered.Power = 0.25
	if got := fisher(at(tempered, 0), 0); math.Abs(got-1.0/16) > 1e-12 {
		t.Errorf("a quarter of one of 2 has %v, want 1/16", got)
	}
	// A mixture by a plain sum of a hundred times as many terms.
	n := filter.Noise{Parts: []filter.NoisePart{{Weight: 0.8, Cov: [3]float64{1}}, {Weight: 0.15, Cov: [3]float64{25}, Mean: 2}}, FlatWeight: 0.05, FlatDensity: 0.001}
	want := 0.0
	const h = 1e-3
	density := func(v float64) float64 {
		return 0.05*0.001 + 0.8*math.Exp(-v*v/2)/math.Sqrt(2*math.Pi) + 0.15*math.Exp(-(v-2)*(v-2)/50)/(5*math.Sqrt(2*math.Pi))
	}
	for v := -60.0; v < 60; v += h {
		d := (density(v+h/2) - density(v-h/2)) / h
		want += d * d / density(v) * h
	}
	if got := fisher(at(n, 0), 0); math.Abs(got-want) > 1e-4*want {
		t.Errorf("a mixture has %v, want %v", got, want)
	}
	if got := fisher(at(n, 0), 0); !(got < 1 && got > 0.5) {
		t.Errorf("outliers leave %v of 1", got)
	}
}

func TestRadius(t *testing.T) {
	for _, c := range []struct {
		cov  summary.Cov
		p    float64
		want float64
	}{
		{summary.Cov{EE: 4, NN: 4}, 0.95, 2 * math.Sqrt(-2*math.Log(0.05))}, // Rayleigh
		{summary.Cov{EE: 9}, 0.95, 3 * 1.959964},                            // normal
		{summary.Cov{EE: 2, EN: 2, NN: 2}, 0.95, 2 * 1.959964},              // the same on a slant
		{summary.Cov{EE: 1, NN: 1}, 1 - 1e-7, math.Sqrt(-2 * math.Log(1e-7))},
		{summary.Cov{}, 0.95, 0},
	} {
		if got := radius(c.cov, c.p); math.Abs(got-c.want) > 2e-4*c.want {
			t.Errorf("radius(%+v, %v) = %v, want %v", c.cov, c.p, got, c.want)
		}
	}
}
