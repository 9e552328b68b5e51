package score

import (
	"math"
	"math/rand/v2"
	"testing"
)

// nile is the annual flow of the Nile, 1871 to 1970, as in R's data sets (Durbin
// & Koopman, Time Series Analysis by State Space Methods).
var nile = []float64{
	1120, 1160, 963, 1210, 1160, 1160, 813, 1230, 1370, 1140, 995, 935, 1110, 994, 1020, 960, 1180, 799, 958, 1140,
	1100, 1210, 1150, 1250, 1260, 1220, 1030, 1100, 774, 840, 874, 694, 940, 833, 701, 916, 692, 1020, 1050, 969,
	831, 726, 456, 824, 702, 1120, 1100, 832, 764, 821, 768, 845, 864, 862, 698, 845, 744, 796, 1040, 759,
	781, 865, 845, 944, 984, 897, 822, 1010, 771, 676, 649, 846, 812, 742, 801, 1040, 860, 874, 848, 890,
	744, 749, 838, 1050, 918, 986, 797, 923, 975, 815, 1020, 906, 901, 1170, 912, 746, 919, 718, 714, 740,
}

// TestLjungBox: R 4.2.2, Box.test(Nile, lag, type = "Ljung"); and x alternating
// between 1 and -1, n even, where ρₖ = (-1)ᵏ(n-k)/n and so
// Q = (n+2)/n · Σ (n-k).
func TestLjungBox(t *testing.T) {
	for _, c := range []struct {
		h    int
		q, p float64
	}{{1, 25.593832, 4.213843e-07}, {10, 88.12687155, 1.254552018e-14}} {
		q, p := LjungBox(nile, c.h)
		// R takes p from 1, which rounds it to 1.1e-16.
		if math.Abs(q/c.q-1) > 1e-7 || math.Abs(p-c.p) > 1e-6*c.p+1.1e-16 {
			t.Errorf("lags %d: Q %.8f, p %.9g; R has %v, %v", c.h, q, p, c.q, c.p)
		}
	}
	const n, h = 40, 5
	x := make([]float64, n)
	for i := range x {
		x[i] = float64(1 - 2*(i%2))
	}
	want := 0.0
	for k := 1; k <= h; k++ {
		want += float64(n-k) * (n + 2) / n
	}
	if q, _ := LjungBox(x, h); math.Abs(q-want) > 1e-9 {
		t.Errorf("alternating: Q %v, want %v", q, want)
	}
	if q, p := LjungBox(make([]float64, 20), 3); q != 0 || p != 1 {
		t.Errorf("a constant series: Q %v, p %v", q, p)
	}
	// White noise: p is uniform; the mean of 200 is within 4 of its standard
	// deviations.
	const seed, runs = 5, 200
	rng := rand.New(rand.NewPCG(seed, 0))
	mean := 0.0
	for range runs {
		w := make([]float64, 300)
		for i := range w {
			w[i] = rng.NormFloat64()
		}
		_, p := LjungBox(w, 10)
		mean += p / runs
	}
	if tol := 4 / math.Sqrt(12*runs); math.Abs(mean-0.5) > tol {
		t.Errorf("seed %d: the mean p of white noise is %.3f, want 0.5 ± %.3f", seed, mean, tol)
	}
}

// TestBinomialInterval: R 4.2.2, binom.test(k, n)$conf.int.
func TestBinomialInterval(t *testing.T) {
	for _, c := range []struct{ k, n, low, high float64 }{
		{7, 50, 0.05819170034, 0.26739600250}, {0, 30, 0, 0.1157033082}, {30, 30, 0.8842966918, 1},
	} {
		low, high := BinomialInterval(c.k, c.n, 0.95)
		if math.Abs(low-c.low) > 1e-8 || math.Abs(high-c.high) > 1e-8 {
			t.Errorf("%v of %v: [%.10f, %.10f], R has [%v, %v]", c.k, c.n, low, high, c.low, c.high)
		}
	}
}

// TestCRPS: one standard normal at 0 is (√2-1)/√π; mixtures by R 4.2.2's
// integrate over (F - [x ≥ y])², to its twelve digits.
func TestCRPS(t *testing.T) {
	for _, c := range []struct {
		w, m, s []float64
		y, want float64
	}{
		{[]float64{1}, []float64{0}, []float64{1}, 0, (math.Sqrt2 - 1) / math.Sqrt(math.Pi)},
		{[]float64{0.3, 0.7}, []float64{-1, 2}, []float64{0.5, 1.5}, 0.7, 0.5666699254},
		{[]float64{0.5, 0.3, 0.2}, []float64{0, 4, -6}, []float64{1, 2, 0.25}, -3, 2.142360594},
		{[]float64{1}, []float64{2}, []float64{0}, 5, 3}, // a point: the distance
	} {
		if got := CRPS(c.w, c.m, c.s, c.y); math.Abs(got-c.want) > 1e-8 {
			t.Errorf("%v, %v, %v at %v: %.10f, want %.10f", c.w, c.m, c.s, c.y, got, c.want)
		}
	}
}

// TestScoresAreProper: in the mean over draws from one normal, no other normal
// has a smaller log score or CRPS.
func TestScoresAreProper(t *testing.T) {
	const seed, draws = 2, 4000
	rng := rand.New(rand.NewPCG(seed, 0))
	x := make([]float64, draws)
	for i := range x {
		x[i] = 1 + 2*rng.NormFloat64()
	}
	mean := func(m, s float64) float64 {
		sum := 0.0
		for _, y := range x {
			sum += CRPS([]float64{1}, []float64{m}, []float64{s}, y) / draws
		}
		return sum
	}
	right := mean(1, 2)
	for _, other := range [][2]float64{{1, 1}, {1, 4}, {2, 2}, {0, 2}} {
		if got := mean(other[0], other[1]); got <= right {
			t.Errorf("seed %d: N(%v, %v²) scores %.4f, the right one %.4f", seed, other[0], other[1], got, right)
		}
	}
}

// TestIndependentOf: an autoregression with coefficient a is worth n(1-a)/(1+a)
// values.
func TestIndependentOf(t *testing.T) {
	const seed, n = 11, 60000
	rng := rand.New(rand.NewPCG(seed, 0))
	for _, a := range []float64{0, 0.8, 0.95} {
		x := make([]float64, n)
		for i := 1; i < n; i++ {
			x[i] = a*x[i-1] + rng.NormFloat64()
		}
		// Thinned by three, a third of the values is left, and their correlation
		// is a³.
		b := a * a * a
		want := n / 3 * (1 - b) / (1 + b)
		if got := IndependentOf(x); math.Abs(got/want-1) > 0.25 {
			t.Errorf("seed %d, a = %v: worth %.0f, want %.0f ± 25 %%", seed, a, got, want)
		}
	}
	if got := IndependentOf([]float64{3, 3, 3}); got != 3 {
		t.Errorf("a constant: %v", got)
	}
}
