package filter_test

import (
	"math"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
)

// nile is the annual flow of the Nile at Aswan, 1871–1970, in 10⁸ m³: the
// series `Nile` of R's package `datasets`, public data since Cobb, Biometrika
// 65 (1978), "The problem of the Nile".
var nile = []float64{
	1120, 1160, 963, 1210, 1160, 1160, 813, 1230, 1370, 1140,
	995, 935, 1110, 994, 1020, 960, 1180, 799, 958, 1140,
	1100, 1210, 1150, 1250, 1260, 1220, 1030, 1100, 774, 840,
	874, 694, 940, 833, 701, 916, 692, 1020, 1050, 969,
	831, 726, 456, 824, 702, 1120, 1100, 832, 764, 821,
	768, 845, 864, 862, 698, 845, 744, 796, 1040, 759,
	781, 865, 845, 944, 984, 897, 822, 1010, 771, 676,
	649, 846, 812, 742, 801, 1040, 860, 874, 848, 890,
	744, 749, 838, 1050, 918, 986, 797, 923, 975, 815,
	1020, 906, 901, 1170, 912, 746, 919, 718, 714, 740,
}

// TestNile runs the local level model (variances 15099 and 1469.1) over the
// Nile series through a belief on a line. Durbin & Koopman, Time Series
// Analysis by State Space Methods, give for it: next forecast 798.37, its 95 %
// interval [517.1, 1079.7], log likelihood of the second value onwards
// −632.544. A diffuse start makes the first posterior N(y₁, 15099), which is
// where the belief is seeded.
func TestNile(t *testing.T) {
	const epsVar, etaVar = 15099, 1469.1
	// The Kalman filter itself, from the same start.
	exact, a, p := 0.0, nile[0], float64(epsVar)
	for _, y := range nile[1:] {
		p += etaVar
		f, v := p+epsVar, y-a
		exact -= 0.5 * (math.Log(2*math.Pi*f) + v*v/f)
		a, p = a+p/f*v, p-p*p/f
	}
	if n, sum := len(nile), sumFloats(nile); n != 100 || sum != 91935 {
		t.Fatalf("%d values with sum %v: the series has 100 with sum 91935", n, sum)
	}
	for _, cell := range []float64{10, 20, 60} {
		g := line(3000, cell)
		b, err := filter.Seed(g, onLine{nile[0], math.Sqrt(epsVar)}, along, 1<<20)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		logL := 0.0
		step := filter.NewStep(1)
		step.Q[0] = etaVar
		for _, y := range nile[1:] {
			filter.Predict(b, g, step, &w)
			e, err := filter.Update(b, g, filtertest.Along{Z: y, SigmaM: math.Sqrt(epsVar)}, &w)
			if err != nil {
				t.Fatal(err)
			}
			logL += e
		}
		filter.Predict(b, g, step, &w)
		_, m, v := b.Moments(g, &w)
		half := 1.959964 * math.Sqrt(v[2]+epsVar)
		t.Logf("cells of %g: forecast %.3f [%.2f, %.2f], log L %.4f", cell, m.N, m.N-half, m.N+half, logL)
		// The pieces of a Gaussian cut at cell edges are kept by moments: that
		// errs by the fourth power of width over sigma (63 after an update).
		cut := 0.1 * math.Pow(cell/63, 4)
		if math.Abs(m.N-a) > 1e-3+cut || math.Abs(logL-exact) > 2e-4+cut {
			t.Errorf("cells of %g: forecast %.4f, log L %.4f; Kalman %.4f, %.4f", cell, m.N, logL, a, exact)
		}
		// Printed digits. The Kalman filter with the printed variances gives
		// −632.5456 in double precision: the printed value is 0.0016 off that.
		if math.Abs(m.N-798.37) > 0.005+cut || math.Abs(m.N-half-517.1) > 0.05+cut || math.Abs(m.N+half-1079.7) > 0.05+cut || math.Abs(logL+632.544) > 0.002+cut {
			t.Errorf("cells of %g: forecast %.3f [%.2f, %.2f], log L %.4f; want 798.37 [517.1, 1079.7], −632.544", cell, m.N, m.N-half, m.N+half, logL)
		}
	}
}

func sumFloats(xs []float64) (sum float64) {
	for _, x := range xs {
		sum += x
	}
	return sum
}
