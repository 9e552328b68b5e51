package sensor

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// slopeOf linearizes a clearance over a plane of the slopes s east and n north
// whose height is 0 below the sensor.
func slopeOf(t *testing.T, d Sensor, clearanceM, altitudeM, s, n float64) (*filter.Terms, filter.Noise) {
	t.Helper()
	w := newWorld()
	zero := 0.0
	d.Name, d.Kind, d.OutlierProbability = "altimeter", KindClearance, &zero
	suite := &Suite{Sensors: []Sensor{d}}
	if err := suite.Validate(); err != nil {
		t.Fatal(err)
	}
	c := w.context(2, nil, geo.Point{})
	c.Suite, c.Plane = suite.For(2), nil
	ls, err := Likelihoods(Event{Sensor: "altimeter", Measurement: Clearance{clearanceM, altitudeM, 2}}, c)
	if err != nil {
		t.Fatal(err)
	}
	l := ls[0].(filter.LinearLikelihood)
	cols := w.spot(l.Wants(), geo.Point{})
	cols.Height[0], cols.SlopeE[0], cols.SlopeN[0], cols.HeightVar[0] = 0, s, n, 0
	tm := terms(1, 1, 2)
	l.Linearize(tm, cols, nil, nil)
	return tm, l.Noise()
}

// TestNearestReturn: over a slope a beam that reports the nearest ground reads
// the least of all distances within it, found here by trying.
func TestNearestReturn(t *testing.T) {
	for _, width := range []float64{0.2, 20, 60} {
		for _, s := range []float64{0, 0.05, 0.3, 0.8} {
			const h = 1000.0
			nearest := math.Inf(1)
			half := geo.Rad(width) / 2
			for tilt := -half; tilt <= half; tilt += half / 2000 {
				// A ray off the vertical by tilt meets the ground h + s·x below at r.
				nearest = math.Min(nearest, h/(math.Cos(tilt)+s*math.Sin(tilt)))
			}
			tm, _ := slopeOf(t, Sensor{BeamWidthDeg: width, BeamReturn: ReturnNearest}, nearest, h, 0.6*s, 0.8*s)
			if math.Abs(tm.Residual[0]) > 1e-3 || tm.Extra[0] != 0 {
				t.Errorf("%g° over a slope of %g: residual %v, extra variance %v", width, s, tm.Residual[0], tm.Extra[0])
			}
			if want := nearest / h * 0.6 * s; !near(tm.Row[0], want, 1e-6) {
				t.Errorf("%g° over a slope of %g: row %v, want %v", width, s, tm.Row[0], want)
			}
		}
	}
}

// TestAttitude: what pitch and roll do to a beam is, on average and in variance,
// what is taken off and added.
func TestAttitude(t *testing.T) {
	const seed, n, h, tauDeg, s = 5, 400_000, 800.0, 2.0, 0.15
	rng := rand.New(rand.NewPCG(seed, 0))
	tau := geo.Rad(tauDeg)
	var sum, squares float64
	for range n {
		// The ray's direction; the ground is s·x below.
		a, b := tau*rng.NormFloat64(), tau*rng.NormFloat64()
		r := h / (math.Cos(math.Hypot(a, b)) + s*math.Sin(a))
		sum += h - r
		squares += (h - r) * (h - r)
	}
	mean := sum / n
	variance := squares/n - mean*mean
	tm, _ := slopeOf(t, Sensor{AttitudeSigmaDeg: tauDeg}, h, h, s, 0)
	// Second-order terms in s·τ shift the mean by a further s²τ²h = 0.02 m.
	if math.Abs(tm.Residual[0]+mean) > s*s*tau*tau*h+4*math.Sqrt(variance/n) {
		t.Errorf("seed %d: %v is taken off, on average it is %v", seed, tm.Residual[0], -mean)
	}
	if math.Abs(tm.Extra[0]/variance-1) > 0.03 {
		t.Errorf("seed %d: variance %v, simulated %v", seed, tm.Extra[0], variance)
	}
	if tm, _ := slopeOf(t, Sensor{AttitudeSigmaDeg: tauDeg, BeamWidthDeg: 5, BeamReturn: ReturnNearest}, h, h, 0, 0); tm.Extra[0] != 0 || tm.Residual[0] != 0 {
		t.Errorf("within a wide beam the attitude matters: %v, %v", tm.Residual[0], tm.Extra[0])
	}
}

// TestCanopy: the noise has the mean and the variance of a share of ends evenly
// within the canopy.
func TestCanopy(t *testing.T) {
	_, n := slopeOf(t, Sensor{CanopyProbability: 0.3, CanopyHeightM: 20}, 100, 100, 0, 0)
	var weight, mean, second float64
	for _, p := range n.Parts {
		weight += p.Weight
		mean += p.Weight * p.Mean
		second += p.Weight * (p.Cov[0] + p.Mean*p.Mean)
	}
	// U(0, 20) has mean 10 and second moment 400/3.
	if !near(weight, 1, 1e-12) || !near(mean, 3, 1e-12) || !near(second, 4+0.3*400/3, 1e-12) {
		t.Errorf("weight %v, mean %v, second moment %v", weight, mean, second)
	}
}

// TestMapErrorIsShared: however often the ground is measured on the way, the
// map's own error counts as often as it is another one; the sensor's own
// counts each time.
func TestMapErrorIsShared(t *testing.T) {
	w := newWorld()
	const lengthM, stretchM = 50.0, 400.0
	suite := &Suite{Environment: Environment{MapErrorLengthM: lengthM}}
	information := func(n int, sensorVar float64) float64 {
		c := w.context(2, nil, geo.Point{})
		c.Suite = suite.For(2)
		c.TravelledM = stretchM / float64(n)
		// The first one has none before it.
		return 1/(sensorVar+worldVarM2) + float64(n-1)/(sensorVar+worldVarM2*c.mapErrorFactor())
	}
	// Of the exact: a constant seen through an error of that correlation at n
	// places, whose covariance is inverted.
	for _, n := range []int{40, 400} {
		for _, sensorVar := range []float64{0.01, 4} {
			exact := constantInformation(t, n, stretchM/float64(n), lengthM, worldVarM2, sensorVar)
			// At the ends of the stretch less is lost than is known here: at most
			// what one look at the map says.
			if got := information(n, sensorVar); got > 1.01*exact || got < exact-1/worldVarM2 {
				t.Errorf("%d measurements with a variance of %g: information %v, exact %v", n, sensorVar, got, exact)
			}
		}
	}
	if a, b := information(100, 1e-9), information(10_000, 1e-9); math.Abs(a/b-1) > 0.01 {
		t.Errorf("100 measurements say %v, 10 000 over the same way %v", a, b)
	}
	c := w.context(2, nil, geo.Point{})
	for travelled, want := range map[float64]float64{math.Inf(1): 1, 1e9: 1, 0: standingFactor} {
		c.TravelledM = travelled
		if got := c.mapErrorFactor(); got != want {
			t.Errorf("%v m on: factor %v, want %v", travelled, got, want)
		}
	}
}
