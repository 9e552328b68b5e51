package sensor

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
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
		Travel{since, 12, 0.3}, Turn{since, 0.5, 0.1}, Displacement{since, 3, -4, [3]float64{2, 0.5, 1}},
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
	q := []float64{0.02, 0, 0.0004 + 2*qs[1].DriftVar, 0, 0, 2 * qs[2].DriftVar}
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
	if !near(st.Add[0], (10*4+11)/5.0, 1e-12) || !near(st.Q[0], 1/(1/0.01+1/0.04), 1e-14) {
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
	if err != nil || sp.F != nil || !near(sp.Add[0], 10, 1e-12) || !near(sp.Q[0], 0.01, 1e-12) {
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

func TestGroundStepOnAPlane(t *testing.T) {
	w := newWorld()
	at := geo.Point{E: 40000, N: 10000}
	st, _ := step(t, Default(2), second, nil, 2, Pose{At: at}, event(second, "ins", Displacement{0, 30, 40, [3]float64{4, 1, 2}}))
	want := w.frame.FromTrue(at, geo.Point{E: 30, N: 40})
	if !near(st.Add[0], want.E, 1e-10) || !near(st.Add[1], want.N, 1e-10) {
		t.Errorf("add %v, want %v", st.Add, want)
	}
	// R C Rᵀ keeps the determinant up to k⁴ and the trace up to k².
	_, _, k := w.frame.Rotation(at)
	if tr, det := st.Q[0]+st.Q[2], st.Q[0]*st.Q[2]-st.Q[1]*st.Q[1]; !near(tr, 6*k*k, 1e-12) || !near(det, 7*k*k*k*k, 1e-11) {
		t.Errorf("Q %v", st.Q)
	}
	// Speed with course is a displacement too.
	m := &Motion{Suite: Default(2)}
	m.Reset(0, 2*second)
	m.Add(event(2*second, "log", Speed{MPS: 5, SigmaMPS: 0.1, HasCourse: true, CourseRad: math.Pi / 2}), 0)
	st, err := m.Step(nil, 2, w.frame, Pose{})
	if err != nil || !near(st.Add[0], 10, 1e-9) || !near(st.Add[1], 0, 1e-9) || !near(st.Q[0], 0.04, 1e-9) || !near(st.Q[2], 0.04, 1e-9) {
		t.Errorf("%+v %v", st, err)
	}
	// Motion in body axes without a heading is refused.
	m.Reset(0, second)
	m.Add(event(second, "odo", Travel{0, 1, 1}), 0)
	if _, err := m.Step(nil, 2, w.frame, Pose{}); err == nil || !strings.Contains(err.Error(), "heading") {
		t.Errorf("%v", err)
	}
}

// The local motion through filter.Predict: the mean is moved by the motion at
// the mean heading, and the covariance by its derivatives, F C Fᵀ + Q.
func TestBodyMotionThroughPredict(t *testing.T) {
	w := newWorld()
	qs := planeQuantities()
	s := Default(2)
	for i := range qs {
		qs[i].DriftVar = 0
	}
	psi, scale := 0.7, 0.05
	st, _ := step(t, s, second, qs, 2, Pose{HeadingRad: psi, HeadingVar: 0.01},
		event(second, "vo", BodyDisplacement{0, 8, 0.5, 0.2, 0.1, 0.05, 0.02}))
	b := &filter.Belief{Map: w.Fingerprint(), Lattice: filter.Lattice{SpacingM: 50}, Dim: 2, Quantities: qs}
	b.Key = []uint64{filter.CellKey(0, 0)}
	b.Mass = []float64{1}
	b.Mean = []float64{1, 2, psi, scale}
	b.Cov = []float64{1, 0.1, 2, 0, 0, 0.01, 0, 0, 0, 1e-4}
	filter.Predict(b, w, st, new(filter.Workspace))
	if len(b.Key) != 1 {
		t.Fatalf("%d Gaussians", len(b.Key))
	}
	// By hand: ψ' = 0.8, forward 8·1.05, right 0.5.
	sin, cos := math.Sincos(psi + 0.1)
	f, r := 8*1.05, 0.5
	dE, dN := f*sin+r*cos, f*cos-r*sin
	want := []float64{1 + dE, 2 + dN, psi + 0.2, scale}
	for i := range want {
		if !near(b.Mean[i], want[i], 1e-9) {
			t.Errorf("mean %v, want %v", b.Mean, want)
			break
		}
	}
	// F C Fᵀ + Q against a Monte Carlo of the motion itself. 4e5 draws: a
	// variance is good to sqrt(2/4e5) = 0.22 % of itself, an off-diagonal to
	// the same of the root of its diagonals; five of those, and 1 % for the
	// bend that linearising 0.1 rad leaves out (0.1² of the rest).
	rng := rand.New(rand.NewPCG(7, 8))
	const draws = 400000
	var sum [4]float64
	var sq [4][4]float64
	for range draws {
		e := 1 + rng.NormFloat64()
		n := 2 + 0.1*(e-1) + math.Sqrt(2-0.01)*rng.NormFloat64()
		h := psi + 0.1*rng.NormFloat64()
		sc := scale + 0.01*rng.NormFloat64()
		turn := 0.2 + 0.02*rng.NormFloat64()
		fwd, right := 8*(1+sc)+0.1*rng.NormFloat64(), 0.5+0.05*rng.NormFloat64()
		sin, cos := math.Sincos(h + turn/2)
		x := [4]float64{e + fwd*sin + right*cos, n + fwd*cos - right*sin, h + turn, sc}
		for i := range x {
			d := x[i] - want[i]
			sum[i] += d
			for j := range i + 1 {
				sq[i][j] += d * (x[j] - want[j])
			}
		}
	}
	for i := range 4 {
		for j := range i + 1 {
			mc := sq[i][j]/draws - sum[i]*sum[j]/draws/draws
			size := math.Sqrt(b.Cov[filter.Packed(i, i)] * b.Cov[filter.Packed(j, j)])
			if got := b.Cov[filter.Packed(i, j)]; !near(got, mc, 0.021*size) {
				t.Errorf("cov(%d,%d) = %v, draws say %v", i, j, got, mc)
			}
		}
	}
}

// Q stays positive semi-definite whatever is known of the heading.
func TestBodySpreadIsPositive(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	for range 2000 {
		l := &bodyMotion{k: 3, heading: 2, scale: -1, frameScale: 1, b: body{
			forward: 10 * rng.NormFloat64(), right: rng.NormFloat64(), turn: rng.NormFloat64(),
			forwardVar: rng.ExpFloat64(), rightVar: 0.01 * rng.ExpFloat64(), turnVar: rng.ExpFloat64(),
		}}
		q := make([]float64, 6)
		q[5] = l.b.turnVar
		v := 3 * rng.ExpFloat64()
		if rng.IntN(4) == 0 {
			v = NoHeading
		}
		l.spread(q, Pose{HeadingRad: rng.NormFloat64(), HeadingVar: v})
		a, b, c, d, e, f := q[0], q[1], q[2], q[3], q[4], q[5]
		minor := a*c - b*b
		det := a*(c*f-e*e) - b*(b*f-e*d) + d*(b*e-c*d)
		if a < 0 || minor < -1e-12*a*c || det < -1e-9*a*c*f {
			t.Fatalf("Q %v: minors %v %v %v", q, a, minor, det)
		}
	}
}

// A ground displacement on roads goes along the road: on an arc, the chord's
// length in the right direction, forwards or backwards.
func TestDisplacementAlongARoad(t *testing.T) {
	w := newWorld()
	one := []filter.Quantity{{Name: filter.Along}}
	from, to := w.road(filter.WantPosition, []float64{100}), w.road(filter.WantPosition, []float64{104})
	for _, back := range []bool{false, true} {
		a, b, want := from, to, 4.0
		if back {
			a, b, want = to, from, -4.0
		}
		dE, dN := b.East[0]-a.East[0], b.North[0]-a.North[0]
		st, m := step(t, Default(1), second, one, 1, Pose{}, event(second, "ins", Displacement{0, dE, dN, [3]float64{0.01, 0, 0.01}}))
		if st.Local == nil {
			t.Fatal("no local motion")
		}
		s0 := 100.0
		if back {
			s0 = 104
		}
		cols := w.road(st.Local.Wants(), []float64{s0})
		add, f := []float64{0}, []float64{0}
		st.Local.Local(add, f, cols, []float64{0})
		// The chord is short by s³/24R² = 7e-5 m, and the frame is turned by
		// the convergence at its middle, 0.
		if !near(add[0], want, 2e-4) || !near(f[0], 1, 2e-2) {
			t.Errorf("back %v: moved %v, want %v; f %v", back, add[0], want, f[0])
		}
		// Afterwards nothing is left across the road: the direction of the
		// chord is that of the road half way back, to (κs)³/24.
		ct, ok := m.CrossTrack(w.frame, Pose{})
		if !ok {
			t.Fatal("no cross track")
		}
		tm := terms(1, 1, 1)
		ct.Linearize(tm, w.road(ct.Wants(), []float64{s0 + add[0]}), one, []float64{0})
		if !near(tm.Residual[0], 0, 1e-4) || !near(tm.Extra[0], 0.01+0.03*16, 1e-3) || !near(ct.Noise().Power, 0.8, 1e-4) {
			t.Errorf("back %v: across %v, variance %v, power %v", back, tm.Residual[0], tm.Extra[0], ct.Noise().Power)
		}
	}
	m := &Motion{Suite: Default(1)}
	m.Reset(0, second)
	m.Add(event(second, "odo", Travel{0, 1, 1}), 0)
	if _, ok := m.CrossTrack(w.frame, Pose{}); ok {
		t.Error("a travel has no cross component")
	}
}

// An odometer on the right wheel runs short in a right turn: reduced to the
// reference point, the distance is that of the middle.
func TestMountedOdometer(t *testing.T) {
	s := &Suite{Sensors: []Sensor{{Name: "wheel", Kind: KindTravel, Mounting: Mounting{RightM: 1}}}}
	s = s.For(1)
	qs := Default(1).Quantities(1)
	st, _ := step(t, s, second, qs, 1, Pose{}, event(second, "wheel", Travel{0, 9, 0.1}), event(second, "gyro", Turn{0, 0.5, 0.01}))
	if !near(st.Add[0], 9.5, 1e-12) { // radius 18 m inside, 19 m in the middle
		t.Errorf("add %v, want 9.5", st.Add[0])
	}
}

// Cutting a body displacement in parts of one segment gives the same motion.
func TestBodyPartsCompose(t *testing.T) {
	m := &Motion{Suite: Default(2)}
	m.Reset(0, second)
	// An arc of radius 20 m, 1 rad, in ten chords, each in its own middle axes.
	const n = 10
	chord := 2 * 20 * math.Sin(0.05)
	for i := range n {
		a, b := Time(i)*second/n, Time(i+1)*second/n
		m.Add(event(b, "vo", BodyDisplacement{a, chord, 0, 0.1, 0.01, 0.01, 0.01}), 0)
	}
	b := m.body()
	if want := 2 * 20 * math.Sin(0.5); !near(b.forward, want, 1e-9) || !near(b.right, 0, 1e-9) || !near(b.turn, 1, 1e-12) {
		t.Errorf("forward %v (want %v), right %v, turn %v", b.forward, want, b.right, b.turn)
	}
}
