package sensor

import (
	"math"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// A good range with a poor bearing gives an arc around the beacon, on a plane
// whose prior is wide: through filter.Seed and filter.Update, against
// integration in polar coordinates about the beacon.
func TestRangeAndPoorBearingGiveAnArc(t *testing.T) {
	w := newWorld()
	const r0, sigmaR, sigmaB, wide = 300.0, 10.0, 0.5, 400.0
	b := geo.Point{E: 50, N: -20}
	beacon := Beacon{Position: w.frame.Inverse(b)}
	zero := 0.0
	c := w.context(2, nil, geo.Point{})
	c.Suite.Sensors = []Sensor{
		{Name: KindRange, Kind: KindRange, OutlierProbability: &zero},
		{Name: KindBearing, Kind: KindBearing, OutlierProbability: &zero},
	}
	belief, err := filter.Seed(w, filter.AtPoint{SigmaM: wide}, nil, 4000000)
	if err != nil {
		t.Fatal(err)
	}
	c.CellM = belief.Lattice.SpacingM
	var work filter.Workspace
	evidence := 0.0
	// The bearing to the beacon is west by south: the vehicle is east.
	bearing := geo.Rad(260)
	for _, m := range []Measurement{Range{beacon, r0, sigmaR}, Bearing{beacon, bearing, sigmaB}} {
		ls, err := Likelihoods(Event{Sensor: m.Kind(), Measurement: m}, c)
		if err != nil {
			t.Fatal(err)
		}
		for _, l := range ls {
			e, err := filter.Update(belief, w, l, &work)
			if err != nil {
				t.Fatal(err)
			}
			evidence += e
		}
	}
	_, mean, cov := belief.Moments(w, &work)

	// Polar: p(r, θ) r dr dθ with the prior, range and von Mises densities by
	// package math; the convergence at 300 m is below 1e-4 rad and enters
	// nowhere near the tolerance.
	var mass, e, n, ee, nn float64
	const dr, dth = 0.5, math.Pi / 720
	vm := NewVonMises(sigmaB)
	for r := dr / 2; r < 500; r += dr {
		for th := -math.Pi; th < math.Pi; th += dth {
			// From the vehicle to the beacon th; the vehicle is the other way.
			x, y := b.E-r*math.Sin(th), b.N-r*math.Cos(th)
			p := math.Exp(-(x*x+y*y)/2/wide/wide) / (2 * math.Pi * wide * wide) *
				math.Exp(-(r-r0)*(r-r0)/2/sigmaR/sigmaR) / math.Sqrt(2*math.Pi) / sigmaR *
				math.Exp(vm.LogDensity(th-bearing)) * r * dr * dth
			mass += p
			e += p * x
			n += p * y
			ee += p * x * x
			nn += p * y * y
		}
	}
	e, n = e/mass, n/mass
	ee, nn = ee/mass-e*e, nn/mass-n*n
	t.Logf("spacing %v m; polar mean (%.2f, %.2f), sd (%.2f, %.2f), ln p %.4f", c.CellM, e, n, math.Sqrt(ee), math.Sqrt(nn), math.Log(mass))
	// The design's bar for two ways to compute one posterior: 0.1 sigma in
	// mean, 5 % in variance; evidence to 5 % likewise.
	if !near(mean.E, e, 0.1*math.Sqrt(ee)) || !near(mean.N, n, 0.1*math.Sqrt(nn)) {
		t.Errorf("mean %v, polar (%v, %v)", mean, e, n)
	}
	if !near(cov[0], ee, 0.05*ee) || !near(cov[2], nn, 0.05*nn) {
		t.Errorf("variances %v %v, polar %v %v", cov[0], cov[2], ee, nn)
	}
	if !near(evidence, math.Log(mass), 0.05) {
		t.Errorf("log evidence %v, polar %v", evidence, math.Log(mass))
	}
	// It is an arc: the mean lies inside the circle by more than the range's
	// own error.
	if d := hypot(mean.E-b.E, mean.N-b.N); d > r0-2*sigmaR {
		t.Errorf("the mean is %v m from the beacon, on the circle: no arc", d)
	}
}
