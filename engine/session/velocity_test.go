package session

import (
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
)

// coasting is a suite of a vehicle that reports no motion and has fixes.
func coasting(driftMPS float64, grid bool) *sensor.Suite {
	none := 0.0
	return &sensor.Suite{
		Vehicle: sensor.Vehicle{
			MaxSpeedMPS: 30, VelocityDriftMPSPerSqrtS: driftMPS, VelocitySigmaMPS: 6, VelocityGrid: grid,
			OffMapPerM: &none, OnMapPerM: &none, LostPerS: &none, MovedPerS: &none, LateralSigmaM: 0.001,
		},
		Sensors: []sensor.Sensor{{Name: "fix", Kind: sensor.KindFix, OutlierProbability: &none, CorrelationS: &none}},
	}
}

// eastward is a straight road from the frame's origin.
func eastward(lengthM float64) *filtertest.Road {
	return filtertest.NewRoad(1, []filtertest.Course{{HeadingRad: math.Pi / 2, Arcs: []filtertest.Arc{{LengthM: lengthM}}}}, [][]filtertest.Link{nil})
}

// TestVelocityOnAStraightRoad: fixes now and then along a straight road. Position and
// speed are those of the Kalman filter over both, within 2 % of sigma.
func TestVelocityOnAStraightRoad(t *testing.T) {
	const seed, drift, sigma = 4, 0.7, 8.0
	rng := rand.New(rand.NewPCG(seed, 0))
	road := eastward(3000)
	frame := road.Frame()
	begin := geo.Point{E: 400}
	s, err := New(Config{Space: road, Suite: coasting(drift, false), Start: Start{Kind: AtPoint, Point: frame.Inverse(begin), SigmaM: 10}})
	if err != nil {
		t.Fatal(err)
	}
	x := [2]float64{403, 14} // along, speed
	mean, cov := mat.NewVecDense(2, []float64{400, 15}), mat.NewDense(2, 2, []float64{100, 0, 0, 36})
	at := sensor.Time(1e18)
	last := at
	for i := range 25 {
		if i > 0 {
			at += sensor.Time([]float64{1, 4, 0.5}[i%3] * 1e9)
		}
		dt := at.Seconds(last)
		last = at
		q := drift * drift
		x[0] += dt * x[1]
		x[1] += drift * math.Sqrt(dt) * rng.NormFloat64()
		z := x[0] + sigma*rng.NormFloat64()
		ev := sensor.Event{Time: at, Sensor: "fix", Number: uint64(i), Measurement: sensor.Fix{Position: frame.Inverse(geo.Point{E: z}), SigmaM: sigma}}
		if _, err := s.Add(ev); err != nil {
			t.Fatal(err)
		}
		s.Flush()
		// The Kalman filter.
		f := mat.NewDense(2, 2, []float64{1, dt, 0, 1})
		var fm mat.VecDense
		fm.MulVec(f, mean)
		var fp, p mat.Dense
		fp.Mul(f, cov)
		p.Mul(&fp, f.T())
		p.Add(&p, mat.NewDense(2, 2, []float64{q * dt * dt * dt / 3, q * dt * dt / 2, q * dt * dt / 2, q * dt}))
		gain := [2]float64{p.At(0, 0) / (p.At(0, 0) + sigma*sigma), p.At(1, 0) / (p.At(0, 0) + sigma*sigma)}
		r := z - fm.AtVec(0)
		mean = mat.NewVecDense(2, []float64{fm.AtVec(0) + gain[0]*r, fm.AtVec(1) + gain[1]*r})
		for a := range 2 {
			for b := range 2 {
				cov.Set(a, b, p.At(a, b)-gain[a]*p.At(0, b))
			}
		}
		got := s.Latest()
		if i < 3 {
			continue // the prior of the speed has a tail below 0, which is cut off
		}
		sx, sv := math.Sqrt(cov.At(0, 0)), math.Sqrt(cov.At(1, 1))
		if off := (got.MeanFrame.E - mean.AtVec(0)) / sx; math.Abs(off) > 0.03 {
			t.Errorf("seed %d, fix %d: the position is %.3f of a sigma off", seed, i, off)
		}
		if off := (got.Speed.MPS - mean.AtVec(1)) / sv; math.Abs(off) > 0.03 || math.Abs(got.Speed.SigmaMPS/sv-1) > 0.03 {
			t.Errorf("seed %d, fix %d: the speed %.3f of a sigma off, its sigma %.3f instead of %.3f m/s", seed, i, off, got.Speed.SigmaMPS, sv)
		}
	}
}

// TestSpeedDoesNotTurnRound: a vehicle that stands and is let go does not come back.
func TestSpeedDoesNotTurnRound(t *testing.T) {
	road := eastward(2000)
	frame := road.Frame()
	start := Start{Kind: AtPoint, Point: frame.Inverse(geo.Point{E: 1000}), SigmaM: 5}
	s, err := New(Config{Space: road, Suite: coasting(0.5, false), Start: start})
	if err != nil {
		t.Fatal(err)
	}
	at := sensor.Time(1e18)
	for i := range 12 {
		ev := sensor.Event{Time: at, Sensor: "fix", Number: uint64(i), Measurement: sensor.Fix{Position: frame.Inverse(geo.Point{E: 1000}), SigmaM: 5}}
		if i == 11 {
			ev.Time += 20e9
			ev.Measurement = sensor.Fix{Position: frame.Inverse(geo.Point{E: 1000}), SigmaM: 1e4} // tells nothing
		}
		if _, err := s.Add(ev); err != nil {
			t.Fatal(err)
		}
		s.Flush()
		at += 2e9
	}
	var c filter.Cloud
	s.ReadBelief(&c)
	behind, all := 0.0, 0.0
	for i, m := range c.Mass {
		all += m
		if c.East[i] < 985 {
			behind += m
		}
	}
	if p := s.Latest(); behind > 0.02*all || p.MeanFrame.E < 1005 || !(p.Speed.MPS > 0) {
		t.Errorf("after 20 s without a fix %.3f is behind, the mean at %.1f m with %.2f m/s", behind/all, p.MeanFrame.E, p.Speed.MPS)
	}
}

// TestVelocityOnAPlane: by fixes alone a session has speed and course, of either form;
// goes on from a checkpoint bit for bit; and remembers the velocity that a log measured.
func TestVelocityOnAPlane(t *testing.T) {
	open := plane.Open(geo.FromDegrees(10, 50), 5000, 50)
	frame := open.Frame()
	for _, grid := range []bool{false, true} {
		suite := coasting(0.4, grid)
		suite.Sensors = append(suite.Sensors, sensor.Sensor{Name: "log", Kind: sensor.KindDisplacement})
		cfg := Config{Space: open, Suite: suite, MaxCells: 10_000, Start: Start{Kind: AtPoint, Point: frame.Inverse(geo.Point{}), SigmaM: 20}}
		s, err := New(cfg)
		if err != nil {
			t.Fatal(err)
		}
		other := s
		at := sensor.Time(1e18)
		truth := geo.Point{}
		for i := range 14 {
			ev := sensor.Event{Time: at, Sensor: "fix", Number: uint64(i), Measurement: sensor.Fix{Position: frame.Inverse(truth), SigmaM: 10}}
			if i == 10 { // the log says the velocity, and no fix does
				ev = sensor.Event{Time: at, Sensor: "log", Number: uint64(i), Measurement: sensor.Displacement{Since: at - 2e9, EastM: 6, NorthM: 8, CovM2: [3]float64{0.04, 0, 0.04}}}
			}
			for _, one := range slices.Compact([]*Session{s, other}) {
				if _, err := one.Add(ev); err != nil {
					t.Fatal(err)
				}
			}
			if i == 6 {
				if other, err = Restore(cfg, s.Checkpoint()); err != nil {
					t.Fatal(err)
				}
			}
			at += 2e9
			truth = truth.Add(geo.Point{E: 6, N: 8})
		}
		s.Flush()
		other.Flush()
		p := s.Latest()
		if other.Hash() != s.Hash() {
			t.Errorf("grid %v: from a checkpoint it goes on otherwise", grid)
		}
		g, _ := frame.Convergence(p.MeanFrame)
		if !p.Speed.Course.Known || math.Abs(p.Speed.MPS-5) > 3*p.Speed.SigmaMPS || math.Abs(geo.WrapPi(p.Speed.Course.TrueRad-g-math.Atan2(6, 8))) > 3*p.Speed.Course.SigmaRad || p.Speed.SigmaMPS > 1 {
			t.Errorf("grid %v: speed %+v, want 5 m/s", grid, p.Speed)
		}
		if err := LookBack(cfg, List{{Time: at, Sensor: "fix", Measurement: sensor.Fix{Position: frame.Inverse(truth), SigmaM: 10}}}, HindsightOptions{Give: func(Hindsight) error { return nil }}); grid != (err != nil && strings.Contains(err.Error(), "velocity_grid")) {
			t.Errorf("grid %v: looking back: %v", grid, err)
		}
	}
}

// TestVelocityIsRefused: what cannot be is said.
func TestVelocityIsRefused(t *testing.T) {
	for want, change := range map[string]func(*sensor.Suite){
		"mean nothing without it": func(s *sensor.Suite) { s.Vehicle.VelocityDriftMPSPerSqrtS = 0 },
		"no room for a heading": func(s *sensor.Suite) {
			s.Sensors = append(s.Sensors, sensor.Sensor{Name: "gyro", Kind: sensor.KindTurn})
		},
		"must be a number": func(s *sensor.Suite) { s.Vehicle.VelocityDriftMPSPerSqrtS = -1 },
	} {
		s := coasting(0.5, true)
		change(s)
		if err := s.Validate(); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v, want %q", err, want)
		}
	}
	_, err := New(Config{Space: plane.Open(geo.LonLat{}, 1e3, 10), Suite: coasting(0, true), Start: Start{Kind: AtPoint, SigmaM: 1}})
	if err == nil || errors.Is(err, filter.ErrNowhere) {
		t.Errorf("a suite that is wrong: %v", err)
	}
}
