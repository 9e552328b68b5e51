package filter_test

import (
	"math"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
)

// TestSpeedThroughJunctions: a speed that wanders carries a belief over a graph with a
// fork; the distance along the present edge is measured. Edge probabilities, mean
// position and mean speed are those of a grid over position and speed along each way,
// by sums over all pairs.
func TestSpeedThroughJunctions(t *testing.T) {
	const (
		dt, q    = 2.0, 0.6
		sigma    = 4.0
		ds, dv   = 0.5, 0.4
		steps    = 5
		first    = 40.0
		leastV   = -1.2
		ns, nv   = 260, 44
		sideEdge = 15.0
	)
	lengths := []float64{first, 90, sideEdge, 75}
	g := filtertest.NewGraph(1, lengths, [][]filtertest.Link{{{To: 1, Weight: 0.6}, {To: 2, Weight: 0.4}}, nil, {{To: 3, Weight: 1}}, nil})
	qs := []filter.Quantity{{Name: filter.Along}, {Name: filter.Speed, PriorMean: 7, PriorVar: 2.25, DriftVar: q}}
	b, err := filter.Seed(g, onFirst{10, 4}, qs, 1<<16)
	if err != nil {
		t.Fatal(err)
	}
	var w filter.Workspace

	// Ways 0 → 1 and 0 → 2 → 3: masses over (s, v).
	ways := [][]int{{0, 1}, {0, 2, 3}}
	edge := func(way int, s float64) (chart int, along float64) {
		for _, c := range ways[way] {
			if s < lengths[c] {
				return c, s
			}
			s -= lengths[c]
		}
		return ways[way][len(ways[way])-1], math.Inf(1)
	}
	at := func(i int) float64 { return (float64(i) + 0.5) * ds }
	speed := func(j int) float64 { return leastV + float64(j)*dv }
	mass := make([][]float64, len(ways))
	for k, share := range []float64{0.6, 0.4} {
		mass[k] = make([]float64, ns*nv)
		for i := range ns {
			for j := range nv {
				if at(i) < first {
					x, y := (at(i)-10)/4, (speed(j)-7)/1.5
					mass[k][i*nv+j] = share * math.Exp(-0.5*(x*x+y*y))
				}
			}
		}
	}
	truth := []float64{24.5, 38, 51.5 - first, 66 - first - sideEdge, 80.5 - first - sideEdge}
	for n := range steps {
		step := filter.NewStep(2)
		step.SetF(0, 1, dt)
		step.Q[0], step.Q[1], step.Q[2] = q*dt*dt*dt/3, q*dt*dt/2, q*dt
		filter.Predict(b, g, step, &w)
		if _, err := filter.Update(b, g, filtertest.Along{Z: truth[n], SigmaM: sigma}, &w); err != nil {
			t.Fatal(err)
		}
		total := 0.0
		for k := range ways {
			next := make([]float64, ns*nv)
			beside := math.Sqrt(q * dt * dt * dt / 12)
			for i := range ns {
				for j := range nv {
					m := mass[k][i*nv+j]
					if m < 1e-12 {
						continue
					}
					for j2 := range nv {
						u := speed(j2) - speed(j)
						p := m * math.Exp(-0.5*u*u/(q*dt))
						mean := at(i) + dt*speed(j) + dt/2*u
						for i2 := max(0, int((mean-5*beside)/ds)); i2 <= min(ns-1, int((mean+5*beside)/ds)); i2++ {
							z := (at(i2) - mean) / beside
							next[i2*nv+j2] += p * math.Exp(-0.5*z*z)
						}
					}
				}
			}
			for i := range ns {
				_, along := edge(k, at(i))
				z := (truth[n] - along) / sigma
				for j := range nv {
					next[i*nv+j] *= math.Exp(-0.5 * z * z)
					total += next[i*nv+j]
				}
			}
			mass[k] = next
		}
		var want, got [4]float64
		var wantV, wantV2, wantAlong float64
		for k := range ways {
			for i := range ns {
				c, along := edge(k, at(i))
				for j := range nv {
					m := mass[k][i*nv+j] / total
					mass[k][i*nv+j] = m
					if m == 0 {
						continue
					}
					want[c] += m
					wantAlong += m * along
					wantV += m * speed(j)
					wantV2 += m * speed(j) * speed(j)
				}
			}
		}
		var c filter.Cloud
		b.Read(&c, g, &w)
		gotAlong := 0.0
		for i, m := range c.Mass {
			got[c.Chart[i]] += m
			gotAlong += m * c.AlongM[i]
		}
		v, variance, ok := b.Moment(filter.Speed)
		sigmaV := math.Sqrt(wantV2 - wantV*wantV)
		if !ok || math.Abs(v-wantV) > 0.04*sigmaV || math.Abs(math.Sqrt(variance)/sigmaV-1) > 0.04 || math.Abs(gotAlong-wantAlong) > 0.25 {
			t.Errorf("step %d: speed %.3f, sigma %.3f, along %.2f; want %.3f, %.3f, %.2f", n, v, math.Sqrt(variance), gotAlong, wantV, sigmaV, wantAlong)
		}
		for e := range want {
			if math.Abs(got[e]-want[e]) > 0.015 {
				t.Errorf("step %d: edges %.4f, want %.4f", n, got, want)
				break
			}
		}
	}
	if p := b.Cells(); p == 0 {
		t.Error("nothing is left")
	}
}

// onFirst is a normal prior along chart 0 of a Graph, whose East is the chart.
type onFirst struct{ along, sigmaM float64 }

func (onFirst) Box() geo.Box {
	return geo.Box{Min: geo.Point{E: -0.5, N: -1e3}, Max: geo.Point{E: 0.5, N: 1e3}}
}

func (p onFirst) Density(dst []float64, at *filter.Columns) {
	for i := range dst {
		dst[i] = 0
		if at.East[i] < 0.5 {
			z := (at.North[i] - p.along) / p.sigmaM
			dst[i] = math.Exp(-0.5 * z * z)
		}
	}
}
