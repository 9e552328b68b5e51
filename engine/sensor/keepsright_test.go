package sensor

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/engine/filter"
)

// TestKeepsRight: in the place that a vehicle would have if it kept to the line,
// y = x - o·heading, a step with keeps_right_m is the step without it: so it is
// that step in other coordinates, mean, noise and all, also in parts, and whatever
// is known of turns.
func TestKeepsRight(t *testing.T) {
	const o = -1.75
	nuisances := []Nuisance{{Name: NuisanceHeading, Sigma: 10, DriftPerSqrtS: 0.3}, {Name: NuisanceGyroBias, Sigma: 0.03, DriftPerSqrtS: 0.01}}
	plain := (&Suite{Sensors: []Sensor{{Name: "odo", Kind: KindTravel}, {Name: "gyro", Kind: KindTurn, Nuisances: nuisances}}}).For(1)
	beside := *plain
	beside.Vehicle.KeepsRightM = o
	qs := plain.Quantities(1)
	k, h := len(qs), filter.Index(qs, filter.Heading)
	other := mat.NewDense(k, k, nil) // x, … to y, …
	for i := range k {
		other.Set(i, i, 1)
	}
	other.Set(0, h, -o)
	var back mat.Dense
	if err := back.Inverse(other); err != nil {
		t.Fatal(err)
	}
	full := func(s filter.Step) (f, q *mat.Dense, add *mat.VecDense) {
		f, q = mat.NewDense(k, k, nil), mat.NewDense(k, k, nil)
		for i := range k {
			for j := range k {
				q.Set(i, j, s.Q[filter.Packed(max(i, j), min(i, j))])
				if i == j {
					f.Set(i, j, 1)
				}
				if s.F != nil {
					f.Set(i, j, s.F[i*k+j])
				}
			}
		}
		return f, q, mat.NewVecDense(k, s.Add)
	}
	for name, events := range map[string][]Event{
		"turn":              {event(second, "odo", Travel{0, 9, 0.1}), event(second, "gyro", Turn{0, 0.5, 0.01})},
		"part of a turn":    {event(second, "odo", Travel{0, 9, 0.1}), event(second, "gyro", Turn{second / 2, -0.2, 0.01})},
		"turn on the spot":  {event(second, "gyro", Turn{0, 0.5, 0.01})},
		"unknown turn":      {event(second, "odo", Travel{0, 9, 0.1})},
		"backward and left": {event(second, "odo", Travel{0, -3, 0.1}), event(second, "gyro", Turn{0, -0.3, 0.01})},
	} {
		without, _ := step(t, plain, second, qs, 1, Pose{}, events...)
		with, _ := step(t, &beside, second, qs, 1, Pose{}, events...)
		f, q, add := full(without)
		f1, q1, add1 := full(with)
		var want, half mat.Dense
		half.Mul(&back, f)
		want.Mul(&half, other)
		if !mat.EqualApprox(&want, f1, 1e-12) {
			t.Errorf("%s: F\n%v\nwant\n%v", name, mat.Formatted(f1), mat.Formatted(&want))
		}
		half.Mul(&back, q)
		want.Mul(&half, back.T())
		if !mat.EqualApprox(&want, q1, 1e-12) {
			t.Errorf("%s: Q\n%v\nwant\n%v", name, mat.Formatted(q1), mat.Formatted(&want))
		}
		var wantAdd mat.VecDense
		wantAdd.MulVec(&back, add)
		if !mat.EqualApprox(&wantAdd, add1, 1e-12) {
			t.Errorf("%s: add %v, want %v", name, add1.RawVector().Data, wantAdd.RawVector().Data)
		}
	}
	// A quarter circle to the right of radius 20 m, kept 1.75 m right of: the line is
	// π/2·1.75 m longer than what is driven.
	beside.Vehicle.KeepsRightM = 1.75
	arc := math.Pi / 2
	st, _ := step(t, &beside, second, qs, 1, Pose{}, event(second, "odo", Travel{0, arc * (20 - 1.75), 0.1}), event(second, "gyro", Turn{0, arc, 0.01}))
	if !near(st.Add[0], arc*20, 1e-12) {
		t.Errorf("a quarter of a circle of 20 m: %v along it, want %v", st.Add[0], arc*20)
	}
}
