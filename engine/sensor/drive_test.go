package sensor

import (
	"math"
	"testing"

	"leadline/engine/filter"
)

// model is F and Q of a step as full matrices.
type model struct{ f, q [][]float64 }

func modelOf(s filter.Step) model {
	k := len(s.Add)
	m := model{square2(k), square2(k)}
	for i := range k {
		for j := range k {
			m.q[i][j] = s.Q[filter.Packed(max(i, j), min(i, j))]
			if s.F != nil {
				m.f[i][j] = s.F[i*k+j]
			} else if i == j {
				m.f[i][j] = 1
			}
		}
	}
	return m
}

func square2(k int) [][]float64 {
	m := make([][]float64, k)
	for i := range m {
		m[i] = make([]float64, k)
	}
	return m
}

// then is this step and another one after it: F2 F1, F2 Q1 F2ᵀ + Q2.
func (m model) then(n model) model {
	k := len(m.f)
	out := model{square2(k), square2(k)}
	for i := range k {
		for j := range k {
			out.q[i][j] = n.q[i][j]
			for a := range k {
				out.f[i][j] += n.f[i][a] * m.f[a][j]
				for b := range k {
					out.q[i][j] += n.f[i][a] * m.q[a][b] * n.f[j][b]
				}
			}
		}
	}
	return out
}

// What a drifting nuisance does to the motion of a second does not depend on how
// the second is cut: F and Q of 10 and of 100 steps are those of one.
func TestDriftDoesNotDependOnRate(t *testing.T) {
	s := everyNuisance()
	for _, c := range []struct {
		dim  int
		pick []int
		ev   func(a, b Time) Event
	}{
		{1, []int{0}, func(a, b Time) Event {
			return event(b, "gyro", Turn{a, 0.1 * b.Seconds(a), 0.01 * math.Sqrt(b.Seconds(a))})
		}},
		{2, []int{4}, func(a, b Time) Event {
			d := b.Seconds(a)
			return event(b, "ins", Displacement{a, 30 * d, -40 * d, [3]float64{4 * d, 1 * d, 2 * d}})
		}},
	} {
		one := &Suite{}
		for _, i := range c.pick {
			one.Sensors = append(one.Sensors, s.Sensors[i])
		}
		qs := one.Quantities(c.dim)
		parts := func(n Time) (m model) {
			for i := range n {
				mo := &Motion{Suite: one.For(c.dim)}
				mo.Reset(i*second/n, (i+1)*second/n)
				mo.Add(c.ev(i*second/n, (i+1)*second/n), 0)
				if c.dim == 1 { // or there is a gap
					mo.Add(event((i+1)*second/n, "odo", Travel{i * second / n, 0, 1e-3}), 0)
				}
				st, err := mo.Step(qs, c.dim, newWorld().frame, Pose{})
				if err != nil {
					t.Fatal(err)
				}
				if i == 0 {
					m = modelOf(st)
				} else {
					m = m.then(modelOf(st))
				}
			}
			return m
		}
		whole := parts(1)
		for _, n := range []Time{10, 100} {
			got := parts(n)
			for i := range whole.f {
				for j := range whole.f {
					size := math.Sqrt(whole.q[i][i] * whole.q[j][j])
					if !near(got.f[i][j], whole.f[i][j], 1e-9) || i+j > 0 && !near(got.q[i][j], whole.q[i][j], 1e-9*size) {
						t.Errorf("dim %d, %d steps, %s on %s: F %v and Q %v, one step %v and %v", c.dim, n, qs[i].Name, qs[j].Name, got.f[i][j], got.q[i][j], whole.f[i][j], whole.q[i][j])
					}
				}
			}
		}
	}
}
