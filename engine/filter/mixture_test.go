package filter

import (
	"math"
	"testing"
)

// conditionOne updates a Gaussian over k quantities by one residual component
// r with the given row.
func conditionOne(g gaussian, k int, n Noise, r float64, row []float64, extra float64) (gaussian, float64) {
	w := newNoiseWork(&n, 1)
	var t Terms
	t.Reset(1, 1, k)
	t.Residual[0] = r
	copy(t.Row, row)
	t.Extra[0] = extra
	log := w.condition(&g, k, 0, &t, 0)
	return g, log
}

// TestMixtureUpdateAgainstIntegration compares evidence, mean and covariance
// after a heavy-tailed measurement with numeric integration over the two
// quantities that it depends on.
func TestMixtureUpdateAgainstIntegration(t *testing.T) {
	noises := map[string]Noise{
		"plain":          Gaussian(0.8),
		"two":            {Parts: []NoisePart{{Weight: 0.9, Cov: [3]float64{0.25}}, {Weight: 0.1, Cov: [3]float64{16}}}},
		"flat":           {Parts: []NoisePart{{Weight: 0.95, Cov: [3]float64{0.25}}}, FlatWeight: 0.05, FlatDensity: 0.01},
		"both":           {Parts: []NoisePart{{Weight: 0.8, Cov: [3]float64{0.25}}, {Weight: 0.15, Cov: [3]float64{4}}}, FlatWeight: 0.05, FlatDensity: 0.02},
		"one side":       {Parts: []NoisePart{{Weight: 0.7, Cov: [3]float64{0.25}}, {Weight: 0.25, Cov: [3]float64{1}, Mean: 3}}, FlatWeight: 0.05, FlatDensity: 0.02},
		"shared and off": {Parts: []NoisePart{{Weight: 1, Cov: [3]float64{0.25}, Mean: 1.5}}, Power: 0.3},
		"shared":         {Parts: []NoisePart{{Weight: 1, Cov: [3]float64{0.25}}}, Power: 0.3},
	}
	for name, n := range noises {
		for _, r := range []float64{0, 0.7, 3, 9} {
			g := gaussian{mass: 1}
			g.mean[0], g.mean[1] = 1, -2
			g.cov[0], g.cov[1], g.cov[2] = 1.2, 0.4, 0.9
			row := []float64{0.8, -0.5}
			const extra = 0.1
			got, log := conditionOne(g, 2, n, r, row, extra)

			power := n.Power
			if power == 0 {
				power = 1
			}
			density := func(v float64) float64 {
				p := n.FlatWeight * n.FlatDensity
				for _, part := range n.Parts {
					s := part.Cov[0] + extra
					p += part.Weight * math.Exp(-(v-part.Mean)*(v-part.Mean)/2/s) / math.Sqrt(2*math.Pi*s)
				}
				return math.Pow(p, power)
			}
			// The trapezoid rule on a smooth function converges beyond rounding
			// at steps of a sixth of its narrowest width (0.6 here); the box
			// leaves out the prior beyond 13 sigma.
			det := 1.2*0.9 - 0.16
			var sum [6]float64
			const h = 0.1
			for x := -14.0; x <= 14; x += h {
				for y := -12.0; y <= 12; y += h {
					q := (0.9*x*x - 0.8*x*y + 1.2*y*y) / det
					p := math.Exp(-q/2) / (2 * math.Pi * math.Sqrt(det)) * h * h * density(r-row[0]*x-row[1]*y)
					sum[0] += p
					sum[1] += p * x
					sum[2] += p * y
					sum[3] += p * x * x
					sum[4] += p * x * y
					sum[5] += p * y * y
				}
			}
			mx, my := sum[1]/sum[0], sum[2]/sum[0]
			have := []float64{log, got.mean[0] - 1, got.mean[1] + 2, got.cov[0], got.cov[1], got.cov[2]}
			want := []float64{math.Log(sum[0]), mx, my, sum[3]/sum[0] - mx*mx, sum[4]/sum[0] - mx*my, sum[5]/sum[0] - my*my}
			for i := range want {
				if math.Abs(have[i]-want[i]) > 1e-8*(1+math.Abs(want[i])) {
					t.Errorf("%s, residual %g: %.9v, integration gives %.9v", name, r, have, want)
					break
				}
			}
		}
	}
}

// TestTwoRowsAgainstOneByOne: two independent components at once equal one
// after the other; a correlated pair has the density of a bivariate normal.
func TestTwoRowsAgainstOneByOne(t *testing.T) {
	g := gaussian{mass: 1}
	g.cov[0], g.cov[1], g.cov[2], g.cov[3], g.cov[4], g.cov[5] = 2, 0.3, 1.5, -0.2, 0.1, 0.7
	rows := []float64{1, 0.2, 0, -0.3, 1, 0.5}
	n := Noise{Parts: []NoisePart{{Weight: 1, Cov: [3]float64{0.5, 0, 0.8}}}}
	w := newNoiseWork(&n, 2)
	var terms Terms
	terms.Reset(1, 2, 3)
	copy(terms.Residual, []float64{1.1, -0.6})
	copy(terms.Row, rows)
	terms.Extra[0] = 0.05
	both := g
	log := w.condition(&both, 3, 0, &terms, 0)
	one, log1 := conditionOne(g, 3, Noise{Parts: []NoisePart{{Weight: 1, Cov: [3]float64{0.5}}}}, 1.1, rows[:3], 0.05)
	moved := rows[3]*one.mean[0] + rows[4]*one.mean[1] + rows[5]*one.mean[2]
	one, log2 := conditionOne(one, 3, Noise{Parts: []NoisePart{{Weight: 1, Cov: [3]float64{0.8}}}}, -0.6-moved, rows[3:], 0.05)
	if math.Abs(log-log1-log2) > 1e-13 {
		t.Errorf("log evidence %v at once, %v one by one", log, log1+log2)
	}
	for i := range 3 {
		for j := 0; j <= i; j++ {
			if math.Abs(both.at(i, j)-one.at(i, j)) > 1e-14 || math.Abs(both.mean[i]-one.mean[i]) > 1e-14 {
				t.Errorf("at once %v %v, one by one %v %v", both.mean[:3], both.cov[:6], one.mean[:3], one.cov[:6])
			}
		}
	}
	// N((1,2); 0, [2 .5; .5 1]): q = (1·1 - 2·.5·2 + 2·4)/1.75 = 4.
	want := -2 - 0.5*math.Log(1.75) - math.Log(2*math.Pi)
	n = Noise{Parts: []NoisePart{{Weight: 1, Cov: [3]float64{2, 0.5, 1}}}}
	w = newNoiseWork(&n, 2)
	terms.Reset(1, 2, 2)
	copy(terms.Residual, []float64{1, 2})
	if got := w.condition(&gaussian{}, 2, 0, &terms, 0); math.Abs(got-want) > 1e-14 {
		t.Errorf("log density %v, want %v", got, want)
	}
}

// TestTempering: a measurement taken n times with power 1/n counts as one, in
// what is learnt and in the summed log evidence, where nothing is learnt (the
// variance of g(x) is zero) and where each piece is predicted by those before.
func TestTempering(t *testing.T) {
	for _, n := range []int{2, 10, 100} {
		once := gaussian{mass: 1}
		once.mean[0], once.cov[0], once.cov[1], once.cov[2] = 3, 4, 1, 2
		again := once
		row := []float64{1, 0.5}
		once, _ = conditionOne(once, 2, Gaussian(1.5), 2, row, 0)
		noise := Gaussian(1.5)
		noise.Power = 1 / float64(n)
		for range n {
			r := 2 - (again.mean[0] - 3) - 0.5*again.mean[1]
			again, _ = conditionOne(again, 2, noise, r, row, 0)
		}
		for i := range 3 {
			// n updates of relative rounding 1e-16, amplified by nothing.
			if math.Abs(once.cov[i]-again.cov[i]) > 1e-14*float64(n) || i < 2 && math.Abs(once.mean[i]-again.mean[i]) > 1e-14*float64(n) {
				t.Errorf("n %d: once %v %v, in pieces %v %v", n, once.mean[:2], once.cov[:3], again.mean[:2], again.cov[:3])
			}
		}
		known := gaussian{mass: 1}
		_, want := conditionOne(known, 1, Gaussian(1.5), 2, []float64{1}, 0)
		sum := 0.0
		for range n {
			_, log := conditionOne(known, 1, noise, 2, []float64{1}, 0)
			sum += log
		}
		if math.Abs(sum-want) > 1e-14*float64(n) {
			t.Errorf("n %d: log evidence %v in pieces, %v at once", n, sum, want)
		}
		// The product of the pieces' densities is the density itself, also
		// where a Gaussian learns: the sum of their log evidences telescopes.
		g, sum := gaussian{mass: 1}, 0.0
		g.cov[0] = 4
		_, want = conditionOne(g, 1, Gaussian(1.5), 2, []float64{1}, 0)
		for range n {
			var log float64
			g, log = conditionOne(g, 1, noise, 2-g.mean[0], []float64{1}, 0)
			sum += log
		}
		if math.Abs(sum-want) > 1e-13*float64(n) {
			t.Errorf("n %d: log evidence %v in pieces while learning, %v at once", n, sum, want)
		}
	}
}
