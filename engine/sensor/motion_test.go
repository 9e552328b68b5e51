package sensor

import (
	"fmt"
	"math"
	"testing"

	"leadline/engine/filter"
)

func event(at Time, name string, m Measurement) Event {
	return Event{Time: at, Sensor: name, Measurement: m}
}

// step makes the step of one segment (0, to] of some events.
func step(t *testing.T, s *Suite, to Time, qs []filter.Quantity, dim int, pose Pose, events ...Event) (filter.Step, *Motion) {
	t.Helper()
	m := &Motion{Suite: s}
	m.Reset(0, to)
	for _, ev := range events {
		m.Add(ev, 0)
	}
	st, err := m.Step(qs, dim, newWorld().frame, pose)
	if err != nil {
		t.Fatal(err)
	}
	return st, m
}

// The parts of an increment add up to it, in value and variance.
func TestSplitAddsUp(t *testing.T) {
	at, since := 10*second, 4*second
	for _, m := range []Measurement{
		Travel{since, 12, 0.3},
		Turn{since, 0.5, 0.1},
		Displacement{since, 3, -4, [3]float64{2, 0.5, 1}},
		BodyDisplacement{since, 12, 1, 0.5, 0.3, 0.2, 0.1},
	} {
		sum := make([]float64, 6)
		values := func(m Measurement) []float64 {
			switch m := m.(type) {
			case Travel:
				return []float64{m.DistanceM, m.SigmaM * m.SigmaM, 0, 0, 0, 0}
			case Turn:
				return []float64{m.AngleRad, m.SigmaRad * m.SigmaRad, 0, 0, 0, 0}
			case Displacement:
				return []float64{m.EastM, m.NorthM, m.CovM2[0], m.CovM2[1], m.CovM2[2], 0}
			case BodyDisplacement:
				return []float64{m.ForwardM, m.RightM, m.TurnRad, m.SigmaForwardM * m.SigmaForwardM, m.SigmaRightM * m.SigmaRightM, m.SigmaTurnRad * m.SigmaTurnRad}
			}
			return nil
		}
		end := since
		for _, cut := range []Time{0, 3 * second, 5 * second, 5.5e9, 9e9, 20 * second} {
			part, a, b, ok := Split(m, at, end, cut)
			if (cut <= since) == ok {
				t.Errorf("%T up to %v: overlap %v", m, cut, ok)
			}
			if !ok {
				continue
			}
			if begin, _ := Since(part); begin != a || a != end || b != min(cut, at) {
				t.Errorf("%T: part from %v to %v, want %v to %v", m, a, b, end, cut)
			}
			end = b
			for i, v := range values(part) {
				sum[i] += v
			}
		}
		for i, want := range values(m) {
			if !near(sum[i], want, 1e-14*(1+math.Abs(want))) {
				t.Errorf("%T: component %d adds up to %v, want %v", m, i, sum[i], want)
			}
		}
		if whole, _, _, ok := Split(m, at, 0, at); !ok || whole != m {
			t.Errorf("%T: uncut, it became %v", m, whole)
		}
		if _, _, _, ok := Split(m, at, at, at+1); ok {
			t.Errorf("%T: overlaps what comes after", m)
		}
	}
	if _, _, _, ok := Split(Standstill{}, at, 0, at); ok {
		t.Error("a standstill has no beginning of its own")
	}
}

func TestRoadStep(t *testing.T) {
	s := Default(1)
	qs := s.Quantities(1) // along, heading, scale
	st, m := step(t, s, 2*second, qs, 1, Pose{},
		event(4*second, "odo", Travel{0, 20, 0.2}), event(2*second, "gyro", Turn{0, 0.3, 0.02}))
	// Half of the travel falls into the segment.
	want := []float64{10, 0.3, 0}
	for i := range want {
		if !near(st.Add[i], want[i], 1e-14) {
			t.Errorf("add %v, want %v", st.Add, want)
		}
	}
	wantF := []float64{1, 0, 10, 0, 1, 0, 0, 0, 1}
	if fmt.Sprint(st.F) != fmt.Sprint(wantF) {
		t.Errorf("F %v, want %v", st.F, wantF)
	}
	// The map's stretch over 10 m, and the corner: 0.3 rad are surely more than
	// the gyro's noise.
	turned := Bend{}.turned(10, 0.3, 0.02*0.02)
	q := []float64{0.02 + 0.15*0.15*10 + 2*2*turned/(math.Pi/2), 0, 0.0004 + 2*qs[1].DriftVar, 0, 0, 2 * qs[2].DriftVar}
	for i := range q {
		if !near(st.Q[i], q[i], 1e-15) {
			t.Errorf("Q %v, want %v", st.Q, q)
			break
		}
	}
	if m.GapS() != 0 || !near(m.TravelledM(), 10, 1e-14) || st.Local != nil {
		t.Errorf("gap %v s, travelled %v m", m.GapS(), m.TravelledM())
	}
}

// Two odometers measure one motion: inverse variance, no sum. The order in
// which they come does not matter.
func TestSensorsAreCombined(t *testing.T) {
	s := Default(1)
	qs := s.Quantities(1)
	a, b := event(second, "a", Travel{0, 10, 0.1}), event(second, "b", Travel{0, 11, 0.2})
	st, _ := step(t, s, second, qs, 1, Pose{}, a, b)
	if !near(st.Add[0], (10*4+11)/5.0, 1e-12) || !near(st.Q[0], 1/(1/0.01+1/0.04)+0.15*0.15*st.Add[0], 1e-14) {
		t.Errorf("add %v, Q %v", st.Add[0], st.Q[0])
	}
	st2, _ := step(t, s, second, qs, 1, Pose{}, b, a)
	if fmt.Sprintf("%x %x", st.Add, st.Q) != fmt.Sprintf("%x %x", st2.Add, st2.Q) {
		t.Error("the order of two sensors changes bits")
	}
	// A speed has no odometer scale.
	m := &Motion{Suite: s}
	m.Reset(0, second)
	m.Add(event(second, "log", Speed{MPS: 10, SigmaMPS: 0.1}), 0)
	sp, err := m.Step(qs, 1, newWorld().frame, Pose{})
	if err != nil || sp.F != nil || !near(sp.Add[0], 10, 1e-12) || !near(sp.Q[0], 0.01+0.15*0.15*10, 1e-12) {
		t.Errorf("%+v %v", sp, err)
	}
	// The first speed covers nothing.
	m.Reset(0, second)
	m.Add(event(second, "log", Speed{MPS: 10, SigmaMPS: 0.1}), second)
	if m.GapS() != 1 {
		t.Errorf("gap %v s after a first speed", m.GapS())
	}
	// A shorter one does not dilute one that covers the segment.
	st, _ = step(t, s, second, qs, 1, Pose{}, a, event(second, "b", Travel{second / 2, 50, 0.01}))
	if !near(st.Add[0], 10, 1e-12) {
		t.Errorf("add %v", st.Add[0])
	}
	// Standstill overrules drift.
	st, m = step(t, s, second, qs, 1, Pose{}, a, event(second, "gyro", Turn{0, 0.1, 0.001}), event(second, "still", Standstill{}))
	if st.Add[0] != 0 || st.Add[1] != 0 || !near(st.Q[0], 1e-4, 1e-15) || m.TravelledM() != 0 {
		t.Errorf("standstill: add %v Q %v", st.Add, st.Q[0])
	}
}

// Speed's variance grows alike at every rate up to its correlation time.
func TestSpeedVariance(t *testing.T) {
	sp := Speed{MPS: 10, SigmaMPS: 0.1}
	for _, n := range []int{1, 10, 100} {
		sum := 0.0
		for range n {
			sum += square(sp.SigmaM(1/float64(n), 1))
		}
		if !near(sum, 0.01, 1e-12) {
			t.Errorf("%d Hz: %v m² a second, want 0.01", n, sum)
		}
	}
	if got := sp.SigmaM(4, 1); !near(got, 0.4, 1e-12) {
		t.Errorf("over 4 s: %v m, want 0.4", got)
	}
}

// A gap is the same however it is cut, never shrinks, and follows the closed
// forms at both ends: (v·t)² early, 2v²τ·t late.
func TestGap(t *testing.T) {
	v := Default(1).Vehicle
	g := v.gap(1)
	if !near(g.speedVar, 1600.0/3, 1e-12) || !near(g.tauS, 40.0/3, 1e-12) {
		t.Fatalf("%+v", g)
	}
	for _, known := range []bool{false, true} {
		for _, total := range []float64{1e-3, 0.1, 1, 30, 600} {
			meanWhole, whole := g.step(0, total, known)
			for _, n := range []int{2, 7, 100} {
				sum, mean := 0.0, 0.0
				for i := range n {
					m, x := g.step(total*float64(i)/float64(n), total/float64(n), known)
					if x < 0 {
						t.Errorf("known %v: a part of %v s has variance %v", known, total, x)
					}
					sum += x
					mean += m
				}
				// Differences of the closed form lose 1e-16·x²/h(x) at worst,
				// below 1e-9 from x = 0.02 on.
				if !near(sum, whole, 1e-8*whole) || !near(mean, meanWhole, 1e-12*(1+meanWhole)) {
					t.Errorf("known %v: %v s in %d parts: %v, whole %v; mean %v, %v", known, total, n, sum, whole, mean, meanWhole)
				}
			}
		}
	}
	if got, want := g.variance(0.01, false), g.speedVar*1e-4; !near(got, want, 1e-3*want) {
		t.Errorf("early: %v, want %v", got, want)
	}
	if got, want := g.variance(0.01, true), g.speedVar/g.tauS*2/3*1e-6; !near(got, want, 1e-3*want) {
		t.Errorf("early, known: %v, want %v", got, want)
	}
	if got, want := g.variance(1e6, true), 2*g.speedVar*g.tauS*1e6; !near(got, want, 1e-4*want) {
		t.Errorf("late: %v, want %v", got, want)
	}
	// The series meet the closed forms where they change over: the next
	// terms are x³/8 and x³/60 of the result.
	for _, c := range []struct {
		known    bool
		x, share float64
	}{{true, 0.02, 1.1e-6}, {false, 0.001, 1e-9}} {
		a, b := g.variance(g.tauS*c.x*(1-1e-12), c.known), g.variance(g.tauS*c.x*(1+1e-12), c.known)
		if !near(a, b, c.share*b) {
			t.Errorf("known %v: %v and %v at the change-over", c.known, a, b)
		}
	}

	s := Default(2)
	m := &Motion{Suite: s}
	m.Reset(0, 2*second)
	m.HasVelocity, m.VelocityMPS = true, [2]float64{3, -4}
	st, err := m.Step(nil, 2, newWorld().frame, Pose{})
	mean, varM2 := s.Vehicle.gap(2).step(0, 2, true)
	if err != nil || !near(st.Add[0], 3*mean, 1e-12) || !near(st.Add[1], -4*mean, 1e-12) || st.Q[0] != varM2 || st.Q[1] != 0 || st.Q[2] != varM2 || m.GapS() != 2 {
		t.Errorf("%+v %v, mean %v var %v", st, err, mean, varM2)
	}
}
