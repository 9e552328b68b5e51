package session

import (
	"math"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// everywhere is a sighting that says nothing: as likely there as elsewhere.
func everywhere(f geo.Frame, s float64, i int) sensor.Event {
	p := func(e, n float64) geo.LonLat { return f.Inverse(geo.Point{E: e, N: n}) }
	return sensor.Event{Time: at(s), Sensor: "nobody", Number: uint64(i), Measurement: sensor.Sighting{
		Area: [][]geo.LonLat{{p(-1e5, -1e5), p(1e5, -1e5), p(1e5, 1e5), p(-1e5, 1e5)}}, Mistaken: 0.5,
	}}
}

// ouVariance and ouMean are what the documented gap prior gives for s seconds
// from a known velocity v: an Ornstein-Uhlenbeck velocity with variance w and
// time tau, integrated (Gillespie, Phys. Rev. E 54, 1996, eq. 2.9b and 3.x with
// a velocity known at the start).
func ouVariance(w, tau, s float64) float64 {
	x := s / tau
	return w * tau * tau * (2*x - 3 + 4*math.Exp(-x) - math.Exp(-2*x))
}

func ouMean(v, tau, s float64) float64 { return v * tau * (1 - math.Exp(-s/tau)) }

const gapTau = 40.0 / 3 // max_speed_mps / max_accel_mps2

// TestGap stops measuring for 5 s: the belief moves on and spreads as the
// prior says, and the posterior says for how long, on roads and on a plane,
// whether or not other measurements come in between.
func TestGap(t *testing.T) {
	road, water := straight(3000), sea()
	for _, c := range []struct {
		name   string
		config Config
		move   func(from, to float64) sensor.Measurement
		w      float64 // variance of the velocity along an axis
		tol    float64
	}{
		// The speed is uniform within ±40 m/s. Moments on roads are exact, but
		// for pruning at 1e-12.
		{"roads", Config{Space: road, Suite: onRoads(), Start: pointStart(road, geo.Point{N: 1000}, 5)}, func(from, to float64) sensor.Measurement {
			return sensor.Travel{Since: at(from), DistanceM: 10 * (to - from), SigmaM: 0.5}
		}, 40. * 40 / 3, 1e-6},
		// Uniform in a disc. The lattice is coarsened on the way, which keeps
		// the moments up to a surplus that the summary adds within the cell:
		// h²/12 with h at most 0.4 sigma, 1.3 %.
		{"plane", Config{Space: water, Start: pointStart(water, geo.Point{}, 5), MaxCells: 20000}, func(from, to float64) sensor.Measurement {
			return sensor.Displacement{Since: at(from), NorthM: 10 * (to - from), CovM2: [3]float64{0.25, 0, 0.25}}
		}, 40. * 40 / 4, 0.014},
	} {
		t.Run(c.name, func(t *testing.T) {
			before := open(t, c.config)
			f := c.config.Space.Frame()
			moved := sensor.Event{Time: at(1), Sensor: "motion", Measurement: c.move(0, 1)}
			feed(t, before, []sensor.Event{moved})
			p0 := before.Latest()
			for _, cuts := range [][]float64{nil, {2, 2.5, 5}, {1.001, 4}} {
				s := open(t, c.config)
				events := []sensor.Event{moved}
				for i, cut := range cuts {
					events = append(events, everywhere(f, cut, i))
				}
				o := feed(t, s, append(events, everywhere(f, 6, 99)))
				p := s.Latest()
				variance, mean := p.CovFrame.NN-p0.CovFrame.NN, p.MeanFrame.N-p0.MeanFrame.N
				wantV, wantM := ouVariance(c.w, gapTau, 5), ouMean(10, gapTau, 5)
				if math.Abs(variance/wantV-1) > c.tol {
					t.Errorf("cut at %v: the variance grows by %v m², the prior says %v", cuts, variance, wantV)
				}
				if math.Abs(mean-wantM) > c.tol*math.Sqrt(wantV) {
					t.Errorf("cut at %v: the mean moves by %v m, the prior says %v", cuts, mean, wantM)
				}
				gap := 0.0
				for _, q := range o.posteriors {
					gap += q.GapS
				}
				// Each is a float64 in seconds.
				if math.Abs(gap-5) > 1e-12 || len(o.posteriors) != len(cuts)+2 {
					t.Errorf("cut at %v: gaps of %v s in %d posteriors", cuts, gap, len(o.posteriors))
				}
				if p.Speed.Known {
					t.Error("the speed is known in a gap")
				}
			}
		})
	}
}

// TestGapsAreCutAtTheirEnds leaves parts of stretches unmeasured, some between
// two sensors: where other measurements cut them changes neither mean nor
// variance. The second gap starts anew, with the velocity of the piece before.
func TestGapsAreCutAtTheirEnds(t *testing.T) {
	road := straight(3000)
	run := func(cuts ...float64) *Session {
		s := open(t, Config{Space: road, Suite: onRoads(), Start: pointStart(road, geo.Point{N: 1000}, 5)})
		var events []sensor.Event
		for _, x := range [][3]float64{{0, 1, 10}, {3.5, 4.5, 20}, {6, 7, 5}} {
			events = append(events, sensor.Event{Time: at(x[1]), Sensor: "odo", Measurement: sensor.Travel{Since: at(x[0]), DistanceM: x[2], SigmaM: 0.5}})
		}
		events = append(events, sensor.Event{Time: at(8.2), Sensor: "second", Measurement: sensor.Travel{Since: at(6.5), DistanceM: 8.5, SigmaM: 0.5}})
		for i, cut := range cuts {
			events = append(events, everywhere(road.Frame(), cut, i))
		}
		return feed(t, s, append(inOrder(events), everywhere(road.Frame(), 9, 99))).s
	}
	want := run()
	// Gaps: 1 to 3.5, 4.5 to 6, 8.2 to 9.
	w := 40. * 40 / 3
	variance := ouVariance(w, gapTau, 2.5) + ouVariance(w, gapTau, 1.5) + ouVariance(w, gapTau, 0.8)
	// Measured: 0.5² three times, but from 6.5 to 7 s both are there, with
	// half of 0.25 and 0.5/1.7 of it; the odometer's scale of 2 %, common to
	// all that is measured, and growing by 1e-10 a second; the start 5².
	// The way stretches by 0.15²·d.
	both := 1 / (1/0.125 + 1/(0.25*0.5/1.7))
	measured := 0.25 + 0.25 + 0.125 + both + 0.25*1.2/1.7
	d := 10 + 20 + 2.5 + 2.5 + 6.0
	variance += measured + 0.02*0.02*d*d + 0.15*0.15*d
	start := open(t, Config{Space: road, Suite: onRoads(), Start: pointStart(road, geo.Point{N: 1000}, 5)})
	_, _, cov := start.state.belief.Moments(road, &start.desk().work)
	_, _, got := want.state.belief.Moments(road, &want.desk().work)
	// The scale's drift gives 1e-10·d²·9 = 2e-6 m², of 800.
	if math.Abs(got[2]-cov[2]-variance) > 1e-5*variance {
		t.Errorf("the variance grows by %v m², want %v", got[2]-cov[2], variance)
	}
	wantM := 1000 + d + ouMean(10, gapTau, 2.5) + ouMean(20, gapTau, 1.5) + ouMean(5, gapTau, 0.8)
	if m := want.Latest().MeanFrame.N; math.Abs(m-wantM) > 1e-5*math.Sqrt(variance) {
		t.Errorf("the mean is at %v, want %v", m, wantM)
	}
	for _, cuts := range [][]float64{{2}, {3.5}, {4}, {4.5, 5}, {6, 6.5, 7.5}, {0.5, 1, 1.5, 3, 3.6, 5.5, 6.2, 8.1, 8.3}} {
		s := run(cuts...)
		p, q := s.Latest(), want.Latest()
		// Rounding in a few dozen steps, and pruning at 1e-12.
		if math.Abs(p.CovFrame.NN/q.CovFrame.NN-1) > 1e-6 || math.Abs(p.MeanFrame.N-q.MeanFrame.N) > 1e-6*math.Sqrt(variance) {
			t.Errorf("cut at %v: mean %v, variance %v; uncut %v, %v", cuts, p.MeanFrame.N, p.CovFrame.NN, q.MeanFrame.N, q.CovFrame.NN)
		}
	}
}

// TestLongGaps measures nothing for 100 s, and takes increments with a large
// spread or length, over a small town of loops and over open water: the belief
// spreads over all of it at a bounded cost, and finds back with a fix.
func TestLongGaps(t *testing.T) {
	town, water := crossing(), sea()
	f := func(c Config, s float64, n uint64) sensor.Event {
		p := c.Start.Point
		return sensor.Event{Time: at(s), Sensor: "gps", Number: n, Measurement: sensor.Fix{Position: p, SigmaM: 3}}
	}
	roads := Config{Space: town, Names: town, Start: pointStart(town, town.charted(60), 10)}
	open1 := Config{Space: water, Start: pointStart(water, geo.Point{}, 10), MaxCells: 20000}
	for _, c := range []struct {
		name   string
		config Config
		m      sensor.Measurement // over 100 s
	}{
		{"roads", roads, nil},
		{"roads spread", roads, sensor.Travel{Since: at(0), SigmaM: 800}},
		{"roads far", roads, sensor.Travel{Since: at(0), DistanceM: 3000, SigmaM: 1}},
		{"water", open1, nil},
		{"water spread", open1, sensor.Displacement{Since: at(0), CovM2: [3]float64{1e9, 0, 1e8}}},
	} {
		t.Run(c.name, func(t *testing.T) {
			s := open(t, c.config)
			events := []sensor.Event{f(c.config, 0, 0)}
			if c.m != nil {
				events = append(events, sensor.Event{Time: at(100), Sensor: "odo", Measurement: c.m})
			}
			events = append(events, everywhere(c.config.Space.Frame(), 100, 1), f(c.config, 100.001, 1))
			o := feed(t, s, events)
			gap, back := o.posteriors[1], o.posteriors[2]
			wide := math.Sqrt(gap.CovFrame.EE + gap.CovFrame.NN)
			// The ways cover an area of some 150 m by 250 m: uniform over that
			// is a spread of 84 m.
			switch c.name {
			case "roads", "roads spread":
				if wide < 50 {
					t.Errorf("after 100 s without motion a spread of %.0f m", wide)
				}
			case "water":
				if w := math.Sqrt(2 * ouUnknown(400, gapTau, 100)); math.Abs(wide/w-1) > 0.01 {
					t.Errorf("a spread of %.0f m, want %.0f", wide, w)
				}
			case "water spread":
				if math.Abs(wide/math.Sqrt(1.1e9)-1) > 0.01 {
					t.Errorf("a spread of %.3g m, want %.3g", wide, math.Sqrt(1.1e9))
				}
			}
			if back.CovFrame.EE+back.CovFrame.NN >= gap.CovFrame.EE+gap.CovFrame.NN && c.name != "roads far" {
				t.Errorf("a fix leaves %v of %v", back.CovFrame, gap.CovFrame)
			}
			if n := s.Size(); n > 100000 {
				t.Errorf("%d cells", n)
			}
		})
	}
}

// ouUnknown is the variance of a displacement whose velocity was unknown at
// the start: w·tau²·2(x - 1 + e^-x), x = s/tau.
func ouUnknown(w, tau, s float64) float64 {
	x := s / tau
	return 2 * w * tau * tau * (x - 1 + math.Exp(-x))
}

// TestSilenceOnAPlane: a vehicle that needs its heading on a plane is fixed, then
// silent for 16 s, then fixed again. The belief spreads as the prior says and
// the cells grow and shrink with it: with cells that stayed as they were it took
// minutes and hundreds of thousands of Gaussians.
func TestSilenceOnAPlane(t *testing.T) {
	suite, err := sensor.ParseSuite("craft", []byte("sensors:\n- {name: odo, kind: travel}\n- {name: gyro, kind: turn}\n"))
	if err != nil {
		t.Fatal(err)
	}
	water := sea()
	c := Config{Space: water, Suite: suite, Start: pointStart(water, geo.Point{}, 10)}
	s := open(t, c)
	fix := func(at sensor.Time, n uint64) sensor.Event {
		return sensor.Event{Time: at, Sensor: "gps", Number: n, Measurement: sensor.Fix{Position: c.Start.Point, SigmaM: 5}}
	}
	o := feed(t, s, []sensor.Event{fix(at(0), 0)})
	before := o.posteriors[0].CovFrame
	for i, x := range []float64{4, 16} {
		feed(t, s, []sensor.Event{everywhere(water.Frame(), x, i)})
		p := s.Latest()
		want := before.EE + ouUnknown(400, gapTau, x)
		if math.Abs(p.CovFrame.EE/want-1) > 0.01 || math.Abs(p.CovFrame.NN/want-1) > 0.01 {
			t.Errorf("after %g s a covariance of %+v, want %g", x, p.CovFrame, want)
		}
		if n, h := s.Size(), s.CellM()/math.Sqrt(want); n > 15_000 || h < 0.2 || h > 0.9 {
			t.Errorf("after %g s: %d Gaussians in cells of %.2f sigma", x, n, h)
		}
	}
	feed(t, s, []sensor.Event{fix(at(16.1), 1)})
	// The fix leaves 25 m² and, as an outlier, 9e-5 of what was.
	if p := s.Latest(); p.CovFrame.EE < 24 || p.CovFrame.EE > 36 || s.CellM() > 4.5 || s.Size() > 25_000 {
		t.Errorf("after a fix a covariance of %+v, %d Gaussians in cells of %g m", p.CovFrame, s.Size(), s.CellM())
	}
}
