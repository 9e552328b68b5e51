package session

import (
	"errors"
	"math"
	"slices"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// TestAnswersAreOfThePresent asks a session after each event, also after late
// ones and while posteriors are passed over: what it answers is what the
// present belief says.
func TestAnswersAreOfThePresent(t *testing.T) {
	c := crossing()
	s := open(t, Config{Space: c, Names: c, MaxCells: 20000})
	s.wideSize, s.hugeSize, s.strideM = 14, 300, 0
	f := c.Frame()
	area := [][]geo.LonLat{{f.Inverse(geo.Point{E: -50, N: -50}), f.Inverse(geo.Point{E: 200, N: -50}), f.Inverse(geo.Point{E: 30, N: 105}), f.Inverse(geo.Point{E: -50, N: 105})}}
	if _, err := s.Region(0.5); !errors.Is(err, summary.ErrNothing) {
		t.Errorf("a region before there is anything: %v", err)
	}
	v := s.suite.Vehicle
	fresh, err := summary.New(summary.Options{AlertLimitM: v.AlertLimitM, IntegrityRisk: v.IntegrityRisk, LateralSigmaM: v.LateralSigmaM})
	if err != nil {
		t.Fatal(err)
	}
	passed, rewound := 0, 0
	events := inOrder(roadEvents(5))
	latest := sensor.Time(0)
	for i := range events {
		if i%40 == 35 { // this one comes 0.7 s late, after 35 others
			copy(events[i-35:], append(slices.Clone(events[i-34:i+1]), events[i-35]))
		}
	}
	for i, ev := range events {
		if s.state.begun && ev.Time <= s.state.time {
			rewound++
		}
		if _, err := s.Add(ev); err != nil {
			t.Fatal(err)
		}
		if p := s.Latest(); p != nil {
			// A late event may take the latest posterior back to before it if
			// times are passed over since, by less than one step's second.
			if back := latest.Seconds(sensor.Time(p.TimeNS)); back > 1 {
				t.Fatalf("event %d: the latest posterior goes back by %v s", i, back)
			}
			latest = max(latest, sensor.Time(p.TimeNS))
			if s.state.time != sensor.Time(p.TimeNS) {
				passed++
			}
		}
		if i%3 != 0 || !s.state.begun {
			continue
		}
		before := s.state.clone()
		var want summary.Posterior
		if err := s.read(fresh, &want); err != nil {
			t.Fatal(err)
		}
		wantIn, err := fresh.Inside(area)
		if err != nil {
			t.Fatal(err)
		}
		wantRegion, _ := fresh.Region(0.95)
		in, err1 := s.Inside(area)
		region, err2 := s.Region(0.95)
		prot, err3 := s.Protection(v.IntegrityRisk)
		if err1 != nil || err2 != nil || err3 != nil {
			t.Fatal(err1, err2, err3)
		}
		// The same functions of the same belief.
		if in != wantIn || region.Holds != wantRegion.Holds || region.AreaM2 != wantRegion.AreaM2 || prot != want.Protection {
			t.Fatalf("event %d: inside %v, region %v, protection %v; the belief says %v, %v, %v", i, in, region.Holds, prot, wantIn, wantRegion.Holds, want.Protection)
		}
		if s.state.time != before.time || s.state.pose != before.pose || s.state.unread != before.unread || len(s.state.evidence) != len(before.evidence) {
			t.Fatal("asking has changed the session")
		}
	}
	if passed < 20 || rewound < 8 {
		t.Errorf("%d times were passed over, %d events late: the test asks nothing", passed, rewound)
	}
	if _, err := s.Protection(0.5); err == nil {
		t.Error("a risk of 0.5 is taken")
	}
}

// TestWideBeliefsStayFresh drives with a belief that stays wide: the latest
// posterior is at most 5 s of event time old, counting from what is computed,
// and strides do not let it become older.
func TestWideBeliefsStayFresh(t *testing.T) {
	road := straight(2000)
	for _, c := range []struct {
		name        string
		wide, huge  int
		mostS       float64
		count, step int
	}{
		// 30 s at 10 Hz: posteriors every second, and every five.
		{"wide", 100, 1 << 30, widePosteriorS, 30, 1},
		{"huge", 50, 100, hugePosteriorS, 6, 5},
	} {
		s := open(t, Config{Space: road, Names: road})
		s.wideSize, s.hugeSize = c.wide, c.huge
		car := newCar(road, 1, func(s float64) float64 { return 100 + 2*s })
		car.odometer("odo", 0, 0.1, 30)
		o := outcome{s: s}
		steps := map[sensor.Time]bool{}
		for _, ev := range car.list {
			ps, err := s.Add(ev)
			if err != nil {
				t.Fatal(err)
			}
			o.take(t, ps)
			steps[s.state.time] = true
			// 0.1 s from event to event.
			if p := s.Latest(); p != nil && s.state.time.Seconds(sensor.Time(p.TimeNS)) > c.mostS {
				t.Fatalf("%s: at %v s the latest posterior is of %v s", c.name, s.state.time.Seconds(at(0)), sensor.Time(p.TimeNS).Seconds(at(0)))
			}
		}
		o.take(t, s.Flush())
		// The first is that of 0.1 s, and Flush makes the last one.
		if n := len(o.posteriors); math.Abs(float64(n-c.count-1)) > 1 {
			t.Errorf("%s: %d posteriors in 30 s", c.name, n)
		}
		// A quarter of a cell (1 m) at 2 m/s is 0.125 s: every second event.
		if n := len(steps); n > 170 {
			t.Errorf("%s: %d steps for 300 events: no stride", c.name, n)
		}
		if p := s.Latest(); p.TimeNS != int64(at(30)) {
			t.Errorf("%s: Flush ends with the posterior of %v s", c.name, sensor.Time(p.TimeNS).Seconds(at(0)))
		}
		// The strides have moved it as far as single steps would: the
		// odometer errs by 0.05·√60 + 0.001·√300 = 0.4 m, three of which.
		if d := s.state.odometerM; math.Abs(d-60) > 1.2 {
			t.Errorf("%s: %v m driven", c.name, d)
		}
	}
}

// TestFlushGoesOn adds events after a Flush: what was is final, what comes
// continues, also for what began before.
func TestFlushGoesOn(t *testing.T) {
	road := straight(600)
	s := open(t, Config{Space: road, Names: road, Start: pointStart(road, geo.Point{N: 100}, 5)})
	fix := func(sec float64, number uint64) sensor.Event {
		return sensor.Event{Time: at(sec), Sensor: "gps", Number: number, Measurement: sensor.Fix{Position: road.Frame().Inverse(geo.Point{N: 100 + 4*sec}), SigmaM: 4}}
	}
	travel := func(from, to float64) sensor.Event {
		return sensor.Event{Time: at(to), Sensor: "odo", Measurement: sensor.Travel{Since: at(from), DistanceM: 4 * (to - from), SigmaM: 0.1}}
	}
	speed := func(sec float64) sensor.Event {
		return sensor.Event{Time: at(sec), Sensor: "log", Measurement: sensor.Speed{MPS: 4, SigmaMPS: 0.2}}
	}
	feed(t, s, []sensor.Event{fix(0, 0), travel(0, 1), speed(0.5), speed(1.2), fix(1.5, 0)})
	hash, last := s.Hash(), s.Latest()
	if last.TimeNS != int64(at(1.5)) {
		t.Fatalf("the last posterior is of %d", last.TimeNS)
	}
	if len(s.Flush()) != 0 || s.Hash() != hash {
		t.Error("a second Flush changes something")
	}
	for _, ev := range []sensor.Event{fix(1, 1), fix(1.5, 1), travel(1, 1.4)} {
		if r := refusal(t, s, ev); r.Reason != TooLate {
			t.Error(r)
		}
	}
	if s.Hash() != hash || s.Latest() != last {
		t.Error("a refused event changes something")
	}
	o := outcome{}
	for _, ev := range []sensor.Event{
		travel(1, 2), speed(1.9), // both from before
		{Time: at(2.1), Sensor: "handbrake", Measurement: sensor.Standstill{}},
		fix(2.5, 0), fix(2, 7), travel(2.1, 3), fix(4, 0),
	} {
		ps, err := s.Add(ev)
		if err != nil {
			t.Fatalf("%s: %v", ev.Sensor, err)
		}
		o.take(t, ps)
	}
	o.take(t, s.Flush())
	if len(o.posteriors) != 6 || o.posteriors[0].TimeNS != int64(at(1.9)) || s.Hash() == hash {
		t.Errorf("%d posteriors from %d on", len(o.posteriors), o.posteriors[0].TimeNS)
	}
	for _, p := range o.posteriors[:3] { // 1.9, 2, 2.1
		if p.GapS != 0 {
			t.Errorf("at %d a gap of %v s: the increment across the end of the drive covers it", p.TimeNS, p.GapS)
		}
	}
	if empty := open(t, Config{Space: road}); len(empty.Flush()) != 0 || empty.Latest() != nil {
		t.Error("a drive without events has posteriors")
	}
}

// TestOneNameTwoKinds sends speeds and fixes under one name, and the bearings
// of two posts: a fix does not count as a repetition of the speed before it,
// nor one post's bearing of the other's.
func TestOneNameTwoKinds(t *testing.T) {
	road := straight(600)
	f := road.Frame()
	deg := func(p geo.Point) (lon, lat *float64) {
		a, b := f.Inverse(p).Degrees()
		return &a, &b
	}
	suite := &sensor.Suite{}
	for i, p := range []geo.Point{{E: 30, N: 90}, {E: -40, N: 120}} {
		lon, lat := deg(p)
		suite.Posts = append(suite.Posts, sensor.Post{ID: []string{"a", "b"}[i], LonDeg: lon, LatDeg: lat})
	}
	run := func(split bool, kinds ...sensor.Measurement) *summary.Posterior {
		s := open(t, Config{Space: road, Suite: suite, Start: pointStart(road, geo.Point{N: 100}, 20)})
		var events []sensor.Event
		for i, m := range kinds {
			name := "one"
			if split {
				name = string(rune('a' + i))
			}
			events = append(events, sensor.Event{Time: at(1), Sensor: name, Number: uint64(i), Measurement: m})
		}
		return feed(t, s, events).posteriors[0]
	}
	for _, pair := range [][]sensor.Measurement{
		{sensor.Speed{MPS: 3, SigmaMPS: 1}, sensor.Fix{Position: f.Inverse(geo.Point{N: 110}), SigmaM: 3}},
		{sensor.AcousticBearing{Post: "a", BearingRad: -1.2, SigmaRad: 0.05}, sensor.AcousticBearing{Post: "b", BearingRad: 1.9, SigmaRad: 0.05}},
	} {
		one, two := run(false, pair...), run(true, pair...)
		if one.CovFrame != two.CovFrame || one.MeanFrame != two.MeanFrame {
			t.Errorf("%s, %s: under one name %v, %v; under two %v, %v", pair[0].Kind(), pair[1].Kind(), one.MeanFrame, one.CovFrame, two.MeanFrame, two.CovFrame)
		}
	}
	// The same post twice does share its error.
	b := sensor.AcousticBearing{Post: "a", BearingRad: -1.2, SigmaRad: 0.05}
	once, twice := run(false, b), run(false, b, b)
	if math.Abs(twice.CovFrame.NN/once.CovFrame.NN-1) > 1e-3 {
		t.Errorf("one bearing twice: variance %v, once %v", twice.CovFrame.NN, once.CovFrame.NN)
	}
}
