package traffic

import (
	"fmt"
	"math"
	"testing"

	"leadline/engine/kernel"
)

// bell is a normal density of position and speed on a grid.
func bell(stepM, stepMPS, atM, mps, sigmaM, sigmaMPS, correlation float64) *grid {
	g := &grid{stepM: stepM, stepMPS: stepMPS}
	half := int(math.Ceil(9 * sigmaMPS / stepMPS))
	g.firstMPS = mps - float64(half)*stepMPS
	given := sigmaM * math.Sqrt(1-correlation*correlation)
	for k := range 2*half + 1 {
		mean := atM + correlation*sigmaM/sigmaMPS*(g.speed(k)-mps)
		n := int(math.Ceil(9 * given / stepM))
		s := slice{fromM: mean - float64(n)*stepM + 0.37*stepM*float64(k%3)}
		for i := range 2*n + 1 {
			x := (s.fromM + float64(i)*stepM - mean) / given
			v := (g.speed(k) - mps) / sigmaMPS
			s.mass = append(s.mass, kernel.NormalDensity(x)*kernel.NormalDensity(v))
		}
		g.slices = append(g.slices, s)
	}
	g.scale(1 / g.total())
	g.trim()
	g.scale(1 / g.total())
	return g
}

func sameMoments(t *testing.T, what string, got, want moments, tolerance float64) {
	t.Helper()
	sM, sV := math.Sqrt(want.varM2), math.Sqrt(want.varSpeed)
	for _, c := range []struct {
		name      string
		got, want float64
		unit      float64
	}{
		{"mass", got.mass, want.mass, 1},
		{"mean position", got.positionM, want.positionM, sM},
		{"mean speed", got.speedMPS, want.speedMPS, sV},
		{"var position", got.varM2, want.varM2, want.varM2},
		{"covariance", got.cov, want.cov, sM * sV},
		{"var speed", got.varSpeed, want.varSpeed, want.varSpeed},
	} {
		if e := math.Abs(c.got-c.want) / c.unit; !(e <= tolerance) {
			t.Errorf("%s: %s is %.12g, want %.12g: off by %.2g", what, c.name, c.got, c.want, e)
		}
	}
}

// TestMoveIsExact: mean, variance and covariance after two seconds are those of a
// random walk of the speed, whatever the step and the spacing: to rounding where
// nothing spreads, else but for the tails beyond 6.8 sigma, which each step cuts
// off: 200 times in the worst case here.
func TestMoveIsExact(t *testing.T) {
	for _, q := range []float64{0, 0.01, 0.5} {
		tolerance := 5e-7
		if q == 0 {
			tolerance = 1e-9
		}
		for _, dt := range []float64{1, 0.2, 0.01} {
			for _, fine := range []float64{1, 2} {
				g := bell(0.8/fine, 0.4/fine, 100, -7, 2.5, 1, 0.5)
				m := g.moments()
				want := m
				const after = 2.0
				want.positionM += after * m.speedMPS
				want.varM2 += 2*after*m.cov + after*after*m.varSpeed + q*after*after*after/3
				want.cov += after*m.varSpeed + q*after*after/2
				want.varSpeed += q * after
				var w work
				for range int(math.Round(after / dt)) {
					g.move(&w, dt, q)
				}
				sameMoments(t, fmt.Sprintf("q %g, dt %g, fine %g", q, dt, fine), g.moments(), want, tolerance)
			}
		}
	}
}

// TestRegridKeepsMoments: halving and doubling spacings keeps mass, means and
// covariance, of an oblique density, too.
func TestRegridKeepsMoments(t *testing.T) {
	var w work
	for _, correlation := range []float64{0, 0.8, -0.8} {
		for name, change := range map[string]func(g *grid){
			"refine": (*grid).refine, "coarsen": (*grid).coarsen,
			"refine speed":  func(g *grid) { g.refineSpeed(&w) },
			"coarsen speed": func(g *grid) { g.coarsenSpeed(&w) },
		} {
			g := bell(0.5, 0.2, 40, 3, 2.5/math.Sqrt(1-correlation*correlation), 1, correlation)
			m := g.moments()
			change(g)
			sameMoments(t, fmt.Sprintf("%s, correlation %g", name, correlation), g.moments(), m, 1e-7)
			sM, sV := g.widths()
			if math.Abs(sM/2.5-1) > 1e-3 || math.Abs(sV-1) > 1e-3 {
				t.Errorf("%s, correlation %g: widths %v, %v, want 2.5, 1", name, correlation, sM, sV)
			}
		}
	}
}

// TestAdapt: a grid comes to fit its density, and stays within its budget.
func TestAdapt(t *testing.T) {
	var w work
	for _, spacing := range []float64{0.3, 1.2} {
		g := bell(spacing*2.5, spacing, 40, 3, 2.5, 1, 0)
		m := g.moments()
		g.adapt(&w, 1, 1, 8192)
		if g.stepM > coarsest*2.5 || g.stepMPS > coarsest*1 || g.stepM < finest*2.5/2 {
			t.Errorf("spacings %v, %v", g.stepM, g.stepMPS)
		}
		if spacing < 1 {
			sameMoments(t, "adapt", g.moments(), m, 1e-6)
		}
	}
	g := bell(0.2, 0.1, 40, 3, 25, 10, 0)
	if g.adapt(&w, 1, 1, 600); g.count() > 1200 {
		t.Errorf("%d cells, the budget is 600", g.count())
	}
}

// TestBinomial: kernels have the variance that was asked for, far below a cell
// and far above.
func TestBinomial(t *testing.T) {
	for _, v := range []float64{0, 1e-9, 0.01, 0.4999, 0.5, 0.77, 3, 40} {
		k := binomial(nil, v)
		mass, variance := k[0], 0.0
		for i, p := range k[1:] {
			if p < 0 {
				t.Errorf("variance %v: weight %v", v, p)
			}
			mass += 2 * p
			variance += 2 * p * float64((i+1)*(i+1))
		}
		if math.Abs(mass-1) > 1e-12 || math.Abs(variance-v) > 1e-12*(1+v) {
			t.Errorf("variance %v: got %v, mass %v", v, variance, mass)
		}
	}
}

// TestBeyond: what is beyond a place, and forward, by the normal distribution.
func TestBeyond(t *testing.T) {
	g := bell(0.25, 0.1, 40, 1, 2.5, 1, 0)
	for _, x := range []float64{35, 40, 41.3, 60} {
		if want := kernel.NormalUpper((x - 40) / 2.5); math.Abs(g.beyond(x)-want) > 2e-3 {
			t.Errorf("beyond %v: %v, want %v", x, g.beyond(x), want)
		}
	}
	if want := kernel.NormalUpper(-1); math.Abs(g.forward()-want) > 2e-3 {
		t.Errorf("forward %v, want %v", g.forward(), want)
	}
}
