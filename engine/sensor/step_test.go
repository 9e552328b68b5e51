package sensor

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

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

// The local motion through filter.Predict: the mean is moved by the mean motion
// over the headings, and the covariance by its derivatives, F C Fᵀ + Q.
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
	// By hand: ψ' = 0.8, forward 8·1.05, right 0.5; a normal heading of variance
	// 0.01 takes 0.5 % off the way.
	sin, cos := math.Sincos(psi + 0.1)
	sin, cos = sin*math.Exp(-0.005), cos*math.Exp(-0.005)
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
	for i := range 2 {
		// The mean of the draws, whose sigma is 2 m/√4e5; the noise of half of the
		// turn, 1e-4 of variance, is left out: 4e-4 m.
		if m := sum[i] / draws; math.Abs(m) > 4*2/math.Sqrt(draws)+1e-3 {
			t.Errorf("mean %d is %v off the draws'", i, m)
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
		st.Local.Local(add, f, cols, []float64{0}, []float64{0})
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
