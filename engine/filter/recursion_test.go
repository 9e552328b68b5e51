package filter_test

import (
	"math"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
)

// umbrella is a likelihood over the two charts of a two-state chain.
type umbrella [2]float64

func (umbrella) Wants() filter.Wants { return filter.WantPosition }

func (u umbrella) LogLikelihood(dst []float64, at *filter.Columns) {
	for i, e := range at.East {
		dst[i] += math.Log(u[int(e)])
	}
}

var along = []filter.Quantity{{Name: filter.Along}}

// TestTwoStateChain runs the umbrella example of Russell & Norvig, Artificial
// Intelligence (filtering and smoothing), through the filter: two lines of
// one metre, each leading to itself with weight 0.7 and to the other with
// 0.3, and a step of one metre a day. The printed values: after one and two
// days of umbrella 0.8182 and 0.8834, smoothed day 1 0.8834; for the evidence
// T,T,F,T,T the smoothed days 0…5. The filtered values of the longer series
// are computed from the printed model.
func TestTwoStateChain(t *testing.T) {
	g := filtertest.NewGraph(1, []float64{1, 1}, [][]filtertest.Link{{{To: 0, Weight: 0.7}, {To: 1, Weight: 0.3}}, {{To: 1, Weight: 0.7}, {To: 0, Weight: 0.3}}})
	yes, no := umbrella{0.9, 0.2}, umbrella{0.1, 0.8}
	for _, c := range []struct {
		evidence         []umbrella
		filtered, smooth []float64
	}{
		{[]umbrella{yes, yes}, []float64{0.8182, 0.8834}, []float64{math.NaN(), 0.8834, 0.8834}},
		{[]umbrella{yes, yes, no, yes, yes}, []float64{.8182, .8834, .1907, .7308, .8673}, []float64{.6469, .8673, .8204, .3075, .8204, .8673}},
	} {
		b, err := filter.Seed(g, filter.Anywhere{}, along, 100)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		var tape filter.Tape
		w.Record(&tape, b)
		for d, e := range c.evidence {
			step := filter.NewStep(1)
			step.Add[0] = 1
			filter.Predict(b, g, step, &w)
			if _, err := filter.Update(b, g, e, &w); err != nil {
				t.Fatal(err)
			}
			if math.Abs(b.Mass[0]-c.filtered[d]) > 5e-5 {
				t.Errorf("day %d: filtered %.5f, want %.4f", d+1, b.Mass[0], c.filtered[d])
			}
		}
		tape.Smooth(b.Clone(), &w, func(d int, h *filter.Belief) {
			if want := c.smooth[d]; math.Abs(h.Mass[0]-want) > 5e-5 {
				t.Errorf("day %d: smoothed %.5f, want %.4f", d, h.Mass[0], want)
			}
		})
	}
}

// line is one long line whose coordinate is its north less half its length.
func line(lengthM, cellM float64) *filtertest.Graph {
	return filtertest.NewGraph(cellM, []float64{lengthM}, [][]filtertest.Link{nil})
}

// scalar runs a scalar linear-Gaussian model through the filter on a line.
// It returns mean and variance after each measurement and the log evidence.
func scalar(t *testing.T, lengthM, cellM, mean0, var0, q float64, zs []float64, r float64) (mean, variance, logE []float64) {
	t.Helper()
	g := line(lengthM, cellM)
	half := lengthM / 2
	b, err := filter.Seed(g, onLine{half + mean0, math.Sqrt(var0)}, along, 1<<22)
	if err != nil {
		t.Fatal(err)
	}
	var w filter.Workspace
	for i, z := range zs {
		if i > 0 {
			step := filter.NewStep(1)
			step.Q[0] = q
			filter.Predict(b, g, step, &w)
		}
		e, err := filter.Update(b, g, filtertest.Along{Z: z + half, SigmaM: math.Sqrt(r)}, &w)
		if err != nil {
			t.Fatal(err)
		}
		_, m, v := b.Moments(g, &w)
		mean, variance, logE = append(mean, m.N-half), append(variance, v[2]), append(logE, e)
	}
	return mean, variance, logE
}

// onLine is a Gaussian prior along the lines of a test graph.
type onLine struct{ north, sigmaM float64 }

func (p onLine) Box() (b boxT) { return filter.Anywhere{}.Box() }

func (p onLine) Density(dst []float64, at *filter.Columns) {
	for i, n := range at.North {
		d := (n - p.north) / p.sigmaM
		dst[i] = math.Exp(-0.5 * d * d)
	}
}

// TestConstant is a textbook Kalman example: constant state, x0 = 60, P0 =
// 225, R = 25, ten weighings. The data are printed there, the results
// computed: 49.686 and 22.5 after one, 49.570 and 2.4725 after ten.
func TestConstant(t *testing.T) {
	zs := []float64{48.54, 47.11, 55.01, 55.15, 49.89, 40.85, 46.72, 50.05, 51.27, 49.95}
	// The posterior ends with a sigma of 1.57 m; cells beyond 2 m are too coarse
	// for that, since a cell's own share of a Gaussian is not Gaussian.
	for _, cell := range []float64{0.5, 1, 2} {
		mean, variance, _ := scalar(t, 400, cell, 60, 225, 0, zs, 25)
		for _, c := range []struct {
			n               int
			mean, variance  float64
			tolMean, tolVar float64
		}{{0, 49.686, 22.5, 5e-4, 5e-5}, {9, 49.570, 2.4725, 5e-4, 5e-5}} {
			// Printed digits, and the prior's reading at four points a cell.
			if math.Abs(mean[c.n]-c.mean) > c.tolMean+1e-3 || math.Abs(variance[c.n]/c.variance-1) > 1e-3 {
				t.Errorf("cells of %g m, after %d: mean %.4f, variance %.5f; want %.3f, %.4f", cell, c.n+1, mean[c.n], variance[c.n], c.mean, c.variance)
			}
		}
	}
}

// TestSteadyState: F = Q = R = 1 settles at the filtered variance (√5-1)/2
// and an information of (√5+1)/2 (closed form).
func TestSteadyState(t *testing.T) {
	_, variance, _ := scalar(t, 60, 0.25, 0, 1, 1, make([]float64, 40), 1)
	if got := variance[39]; math.Abs(got-0.6180339887) > 2e-4 {
		t.Errorf("filtered variance %.6f, information %.6f; want 0.618034, 1.618034", got, 1/got)
	}
}
