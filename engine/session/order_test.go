package session

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/kernel"
	"leadline/engine/sensor"
)

// roadEvents is a drive of sensors of different phases and rates: two of them
// under one name, one slow, one that says now and then that the car stands,
// and one that stops halfway.
func roadEvents(seed uint64) []sensor.Event {
	c := newCar(crossing(), seed, func(s float64) float64 {
		switch { // drives, stands for 4 s, drives on
		case s < 10:
			return 30 + 8*s
		case s < 14:
			return 110
		}
		return 110 + 6*(s-14)
	})
	c.odometer("odo", 0, 0.1, 20)
	c.gyro("gyro", 0.013, 0.04, 20)
	c.odometer("wheel", 0.5, 1, 11) // 1 s long, to 10.5
	c.fixes("gps", 0, 1, 20, 4)
	c.speeds("gps", 0.3, 0.7, 20)
	for s := 11.2; s < 14; s += 0.9 {
		c.put(s, "handbrake", sensor.Standstill{})
	}
	c.put(5.5, "driver", sensor.Sighting{Road: "Long Street", Mistaken: 0.1})
	return c.list
}

// planeEvents is a boat with a slow log, ranges and fixes.
func planeEvents(seed uint64) []sensor.Event {
	rng := rand.New(rand.NewPCG(seed, 78))
	frame := sea().Frame()
	where := func(s float64) geo.Point { return geo.Point{E: 3 * s, N: 20 * math.Sin(s/6)} }
	var out []sensor.Event
	n := uint64(0)
	put := func(s float64, name string, m sensor.Measurement) {
		n++
		out = append(out, sensor.Event{Time: at(s), Sensor: name, Number: n, Measurement: m})
	}
	times(0.05, 0.2, 16, func(from, to float64) {
		d := where(to).Sub(where(from))
		v := 0.02 * (to - from)
		put(to, "inertial", sensor.Displacement{
			Since: at(from), EastM: d.E + math.Sqrt(v)*rng.NormFloat64(), NorthM: d.N + math.Sqrt(v)*rng.NormFloat64(), CovM2: [3]float64{v, 0, v},
		})
	})
	times(0, 0.8, 16, func(_, to float64) {
		d := where(to + 0.1).Sub(where(to - 0.1))
		put(to, "log", sensor.Speed{MPS: d.Norm() / 0.2, SigmaMPS: 0.3, HasCourse: true, CourseRad: kernel.Atan2(d.E, d.N)})
	})
	times(0.1, 0.5, 16, func(_, to float64) {
		b := geo.Point{E: 300, N: -200}
		put(to, "beacon", sensor.Range{Beacon: sensor.Beacon{Position: frame.Inverse(b)}, RangeM: where(to).Sub(b).Norm() + rng.NormFloat64(), SigmaM: 1})
	})
	times(0, 2, 16, func(_, to float64) {
		p := where(to).Add(geo.Point{E: 5 * rng.NormFloat64(), N: 5 * rng.NormFloat64()})
		put(to, "gps", sensor.Fix{Position: frame.Inverse(p), SigmaM: 5})
	})
	return out
}

// TestOrderOfArrivalDoesNotMatter feeds the same events in many orders, each
// event late by up to a second of the window's two, so that also an increment
// of a second reaches back no farther than the window: the beliefs, the
// posteriors and their hash are the same bits.
func TestOrderOfArrivalDoesNotMatter(t *testing.T) {
	roads := func(t *testing.T) *Session {
		c := crossing()
		return open(t, Config{Space: c, Names: c, Start: pointStart(c, geo.Point{E: 10, N: 30}, 30), MaxCells: 20000})
	}
	water := func(t *testing.T) *Session {
		p := sea()
		return open(t, Config{Space: p, Start: pointStart(p, geo.Point{E: 5, N: 5}, 40), MaxCells: 3000})
	}
	wide := func(t *testing.T) *Session {
		c := crossing()
		s := open(t, Config{Space: c, Names: c, MaxCells: 20000})
		s.wideSize, s.hugeSize, s.strideM = 14, 300, 0 // it starts with 450 cells; located it has 10 to 35
		return s
	}
	for _, c := range []struct {
		name   string
		open   func(t *testing.T) *Session
		events func(seed uint64) []sensor.Event
		orders uint64
	}{
		{"roads", roads, roadEvents, 3},
		{"plane", water, planeEvents, 4},
		{"wide", wide, roadEvents, 6},
	} {
		events := c.events(1)
		want := feed(t, c.open(t), inOrder(events))
		distinct := map[sensor.Time]bool{}
		for _, ev := range events {
			distinct[ev.Time] = true
		}
		if n := len(want.posteriors); c.name != "wide" && n != len(distinct) || c.name == "wide" && (n > len(distinct)*2/3 || n < 20) {
			t.Errorf("%s: %d posteriors of %d times", c.name, n, len(distinct))
		}
		revised, withdrawn := 0, 0
		for seed := range c.orders {
			t.Run(fmt.Sprintf("%s/seed=%d", c.name, seed), func(t *testing.T) {
				rng := rand.New(rand.NewPCG(seed, 1))
				arriving := shuffled(events, 1, rng)
				// A few come twice.
				for range 20 {
					i := rng.IntN(len(arriving) - 8)
					arriving = append(arriving[:i+8], append([]sensor.Event{arriving[i]}, arriving[i+8:]...)...)
				}
				got := feed(t, c.open(t), arriving)
				sameState(t, want.s, got.s)
				samePosteriors(t, want.posteriors, got.posteriors)
				if got.follow() != got.hash {
					t.Error("one who follows what is released, revised and withdrawn comes to another hash")
				}
				revised, withdrawn = revised+got.revised, withdrawn+got.withdrawn
				if accepted, refused := got.s.Counts(); accepted != uint64(len(events)+20) || refused != 0 {
					t.Errorf("%d accepted, %d refused", accepted, refused)
				}
				if n := got.s.Latest().Counts.Accepted; n != uint64(len(events)) {
					t.Errorf("the posterior counts %d measurements, %d were different", n, len(events))
				}
			})
		}
		t.Logf("%s: %d revised, %d withdrawn", c.name, revised, withdrawn)
		if revised == 0 || (withdrawn > 0) != (c.name == "wide") {
			t.Errorf("%s: %d were revised and %d withdrawn: late events should do both to a wide belief, and the first to another", c.name, revised, withdrawn)
		}
	}
}

// TestAllAtOnce holds everything back to the end: waiting does not change the
// posteriors either.
func TestAllAtOnce(t *testing.T) {
	events := roadEvents(2)
	c := crossing()
	start := pointStart(c, geo.Point{E: 10, N: 30}, 30)
	want := feed(t, open(t, Config{Space: c, Names: c, Start: start}), inOrder(events))
	s := open(t, Config{Space: c, Names: c, Start: start})
	rng := rand.New(rand.NewPCG(3, 3))
	for _, i := range rng.Perm(len(events)) {
		ev := events[i]
		at, found := s.log.find(ev)
		if found {
			t.Fatal("an event is there twice")
		}
		s.log.insert(at, ev, s.suite) // as if hold_s had no end
	}
	got := outcome{s: s}
	got.take(t, s.Flush())
	sameState(t, want.s, got.s)
	samePosteriors(t, want.posteriors, got.posteriors)
}

// TestBeforeTheStart sends an increment, and an event, that begin before the
// session's first time after that has been computed.
func TestBeforeTheStart(t *testing.T) {
	c := straight(400)
	config := Config{Space: c, Names: c, Start: pointStart(c, geo.Point{N: 100}, 5)}
	fix := func(s, n float64) sensor.Event {
		return sensor.Event{Time: at(s), Sensor: "gps", Measurement: sensor.Fix{Position: c.Frame().Inverse(geo.Point{N: n}), SigmaM: 3}}
	}
	travel := func(from, to, d float64) sensor.Event {
		return sensor.Event{Time: at(to), Sensor: "odo", Measurement: sensor.Travel{Since: at(from), DistanceM: d, SigmaM: 0.1}}
	}
	events := []sensor.Event{
		fix(0, 100), fix(0.6, 106), fix(1.2, 112), // 0 is computed now: more than hold_s has passed
		travel(-0.4, 0.4, 8), fix(-0.3, 98), travel(0.4, 1.2, 8), travel(1.2, 2, 8), fix(2, 120),
	}
	got := feed(t, open(t, config), events)
	want := feed(t, open(t, config), inOrder(events))
	sameState(t, want.s, got.s)
	samePosteriors(t, want.posteriors, got.posteriors)
	if got.posteriors[0].TimeNS != int64(at(-0.3)) {
		t.Errorf("the first posterior is of %d", got.posteriors[0].TimeNS)
	}
	if gap := got.s.Latest().GapS; gap != 0 {
		t.Errorf("a gap of %v s where everything is measured", gap)
	}
}

// TestLateSpeed sends a speed after what it covers has been computed without
// it.
func TestLateSpeed(t *testing.T) {
	c := straight(400)
	config := Config{Space: c, Start: pointStart(c, geo.Point{N: 100}, 2)}
	fix := func(s float64) sensor.Event {
		return sensor.Event{Time: at(s), Sensor: "gps", Measurement: sensor.Fix{Position: c.Frame().Inverse(geo.Point{N: 100 + 5*s}), SigmaM: 3}}
	}
	speed := func(s float64) sensor.Event {
		return sensor.Event{Time: at(s), Sensor: "log", Measurement: sensor.Speed{MPS: 5, SigmaMPS: 0.1}}
	}
	events := []sensor.Event{speed(0)}
	for s := 0.1; s < 1.95; s += 0.1 {
		events = append(events, fix(s))
	}
	late := append(events, speed(1), fix(2), fix(3.2)) // at 1.1 hold_s was over
	got := feed(t, open(t, config), late)
	want := feed(t, open(t, config), inOrder(late))
	sameState(t, want.s, got.s)
	for _, p := range got.posteriors {
		if s := float64(p.TimeNS-int64(at(0))) / 1e9; (p.GapS == 0) != (s < 1.05) {
			t.Errorf("at %.1f s a gap of %v s: the speed of 1 s covers what was since 0 s", s, p.GapS)
		}
	}
}
