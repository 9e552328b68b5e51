package session

import (
	"math"
	"reflect"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// aheadCases are drives that stop being measured.
func aheadCases() map[string]struct {
	config Config
	events []sensor.Event
} {
	road, water := crossing(), sea()
	return map[string]struct {
		config Config
		events []sensor.Event
	}{
		"roads": {Config{Space: road, Names: road, Start: pointStart(road, geo.Point{E: 10, N: 30}, 10)}, roadEvents(4)},
		"plane": {Config{Space: water, Start: pointStart(water, geo.Point{E: 5, N: 5}, 40), MaxCells: 3000}, planeEvents(4)},
	}
}

// TestAheadIsAGap carries a belief on: mean, variance and gap are those that
// an event which says nothing gives at that time.
func TestAheadIsAGap(t *testing.T) {
	for name, c := range aheadCases() {
		for _, seconds := range []float64{0.3, 2, 7} {
			s := feed(t, open(t, c.config), inOrder(c.events)).s
			a, err := s.Ahead()
			if err != nil {
				t.Fatal(err)
			}
			present := s.Latest()
			to := s.state.time + sensor.Time(seconds*1e9)
			got, err := a.Carry(to)
			if err != nil {
				t.Fatal(err)
			}
			ev := everywhere(c.config.Space.Frame(), 0, 1)
			ev.Time = to
			want := feed(t, s, []sensor.Event{ev}).posteriors[0]
			sigma := math.Sqrt(want.CovFrame.EE + want.CovFrame.NN)
			// On a plane the same but for rounding, since that event divides by
			// its evidence; on roads cells are wider, and each
			// second is a step of its own: moments stay up to what is pruned
			// and, at forks, up to which places share a cell.
			tol := map[string]float64{"roads": 0.02, "plane": 1e-9}[name]
			if d := got.MeanFrame.Sub(want.MeanFrame).Norm(); d > tol*sigma ||
				math.Abs(got.CovFrame.EE-want.CovFrame.EE)+math.Abs(got.CovFrame.NN-want.CovFrame.NN) > 2*tol*sigma*sigma ||
				math.Abs(got.Radius95M/want.Radius95M-1) > 2*tol {
				t.Errorf("%s, %v s ahead: mean %v, covariance %v, radius %.2f m; over a gap %v, %v, %.2f m",
					name, seconds, got.MeanFrame, got.CovFrame, got.Radius95M, want.MeanFrame, want.CovFrame, want.Radius95M)
			}
			if got.TimeNS != int64(to) || math.Abs(got.GapS-want.GapS) > 1e-9 || got.Speed.Known || len(got.Evidence) > 0 || got.LogEvidence != present.LogEvidence {
				t.Errorf("%s, %v s ahead: time %d, gap %v s (want %v), %+v, %v", name, seconds, got.TimeNS, got.GapS, want.GapS, got.Speed, got.Evidence)
			}
		}
	}
}

// TestAheadLeavesTheSession looks ahead after every few events: the session's
// releases and its hash are those without.
func TestAheadLeavesTheSession(t *testing.T) {
	for name, c := range aheadCases() {
		c.events = inOrder(c.events)
		want := feed(t, open(t, c.config), c.events)
		s := open(t, c.config)
		if _, err := s.Ahead(); err == nil {
			t.Errorf("%s: a belief before anything was computed can be carried on", name)
		}
		got := outcome{s: s}
		for i, ev := range c.events {
			ps, err := s.Add(ev)
			if err != nil {
				t.Fatal(err)
			}
			got.take(t, ps)
			if i%20 != 5 || !s.state.begun {
				continue
			}
			a, err := s.Ahead()
			if err != nil {
				t.Fatal(err)
			}
			before := s.state.clone()
			if _, err := a.Carry(s.state.time + 1e9); err != nil {
				t.Fatal(err)
			}
			if !reflect.DeepEqual(before.belief, s.state.belief) || before.time != s.state.time || before.gapS != s.state.gapS {
				t.Fatalf("%s: event %d: looking ahead changes the session", name, i)
			}
		}
		got.take(t, s.Flush())
		sameState(t, want.s, s)
		samePosteriors(t, want.posteriors, got.posteriors)
	}
}

// TestAheadOffTheRoads carries a belief on for longer than it can be followed
// along roads: it comes to no less spread than following gives, says nothing
// about edges, and its answers agree with one another.
func TestAheadOffTheRoads(t *testing.T) {
	c := aheadCases()["roads"]
	c.config.Suite = onRoads()
	s := feed(t, open(t, c.config), inOrder(c.events)).s
	carry := func(seconds, budget float64) (*Ahead, *summary.Posterior) {
		a, err := s.Ahead()
		if err != nil {
			t.Fatal(err)
		}
		a.s.maxCarried = budget
		p, err := a.Carry(s.state.time + sensor.Time(seconds*1e9))
		if err != nil {
			t.Fatal(err)
		}
		return a, p
	}
	for _, seconds := range []float64{1, 5, 20, 3600, 86400} {
		a, off := carry(seconds, 0)
		if off.EdgeCount != 0 || off.Heading.Known || off.Map != c.config.Space.Fingerprint() || math.Abs(off.GapS-seconds) > 1e-9 {
			t.Errorf("%v s ahead: %d edges, heading %v, map %q, a gap of %v s", seconds, off.EdgeCount, off.Heading, off.Map, off.GapS)
		}
		// The documented prior: mean and variance of the way; no axis gains
		// less than one that runs along a straight road.
		w := 40. * 40 / 3
		v := s.state.velocity[0]
		present := s.Latest().CovFrame
		add := ouVariance(w, gapTau, seconds) + math.Pow(ouMean(v, gapTau, seconds), 2)
		if grown := off.CovFrame.EE - present.EE; grown < add || grown > add*1.001+20 {
			t.Errorf("%v s ahead: the variance grows by %v m², the prior's mean square is %v", seconds, grown, add)
		}
		if seconds <= 20 {
			if _, on := carry(seconds, math.Inf(1)); off.Radius95M < on.Radius95M || off.CovFrame.EE < on.CovFrame.EE || off.CovFrame.NN < on.CovFrame.NN {
				t.Errorf("%v s ahead: off the roads 95 %% within %.1f m, along them %.1f m", seconds, off.Radius95M, on.Radius95M)
			}
		}
		disc := circle(c.config.Space.Frame(), off.MeanFrame, off.Radius95M)
		// Corners of a polygon of 60 lie on the circle: it is 0.2 % smaller.
		in, err := a.Inside(disc)
		if err != nil || math.Abs(in-0.95) > 0.01 {
			t.Errorf("%v s ahead: %v inside the 95 %% radius, %v", seconds, in, err)
		}
		if r, err := a.Region(0.9); err != nil || r.Holds < 0.9 || r.Holds > 0.95 {
			t.Errorf("%v s ahead: region %+v, %v", seconds, r, err)
		}
		if p, err := a.Protection(0.01); err != nil || math.Abs(p.RadiusM/off.Radius99M-1) > 0.04 {
			t.Errorf("%v s ahead: protection at 1 %% %+v, %v; the 99 %% radius is %v", seconds, p, err, off.Radius99M)
		}
		if want := 0.5 * math.Log(math.Pow(2*math.Pi*math.E, 2)*(off.CovFrame.EE*off.CovFrame.NN-off.CovFrame.EN*off.CovFrame.EN)); math.Abs(off.EntropyNats-want) > 1e-9 {
			t.Errorf("%v s ahead: entropy %v, want %v", seconds, off.EntropyNats, want)
		}
	}
	a, err := s.Ahead()
	if err != nil {
		t.Fatal(err)
	}
	if _, err := a.Carry(s.state.time + 86401e9); err == nil || !strings.Contains(err.Error(), "86401 s") || !strings.Contains(err.Error(), "a day") {
		t.Errorf("more than a day ahead: %v", err)
	}
	// What has been computed is not carried back.
	if p, err := a.Carry(s.state.time - 5e9); err != nil || p.TimeNS != int64(s.state.time) || p.MeanFrame != s.Latest().MeanFrame {
		t.Errorf("backwards: %+v, %v", p, err)
	}
}

// circle is a polygon of 60 corners.
func circle(f geo.Frame, middle geo.Point, radiusM float64) [][]geo.LonLat {
	var ring []geo.LonLat
	for i := range 60 {
		sin, cos := math.Sincos(float64(i) / 60 * 2 * math.Pi)
		ring = append(ring, f.Inverse(middle.Add(geo.Point{E: radiusM * cos, N: radiusM * sin})))
	}
	return [][]geo.LonLat{ring}
}
