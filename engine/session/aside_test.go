package session

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// broken is a street that runs north, stops for 200 m beside which another one
// leads off to the west, and goes on.
func broken() town {
	r := filtertest.NewRoad(1, []filtertest.Course{
		{Arcs: []filtertest.Arc{{LengthM: 300}}},
		{Start: geo.Point{N: 300}, HeadingRad: -math.Pi / 2, Arcs: []filtertest.Arc{{LengthM: 600}}},
		{Start: geo.Point{N: 500}, Arcs: []filtertest.Arc{{LengthM: 600}}},
	}, [][]filtertest.Link{{{To: 1, Weight: 1}}, nil, nil})
	return town{r, []string{"South Street", "West Street", "North Street"}}
}

// northward drives straight north from 100 m on the first street at 10 m/s.
func northward(seconds int) []sensor.Event {
	var events []sensor.Event
	for i := range seconds {
		s := float64(i)
		events = append(events,
			sensor.Event{Time: at(s + 1), Sensor: "odo", Number: uint64(i), Measurement: sensor.Travel{Since: at(s), DistanceM: 10, SigmaM: 0.1}},
			sensor.Event{Time: at(s + 1), Sensor: "gyro", Number: uint64(i), Measurement: sensor.Turn{Since: at(s), SigmaRad: 0.002}})
	}
	return events
}

// TestMissingStreet crosses 200 m that the map lacks: off map is said within
// 100 m, with the place, and the street beyond is taken again. The shares make 1
// all the way, and every posterior is the same for other orders of arrival.
func TestMissingStreet(t *testing.T) {
	streets := broken()
	c := Config{Space: streets, Names: streets, Start: pointStart(streets, geo.Point{N: 100}, 3)}
	events := northward(70)
	s := open(t, c)
	s.Watch(func(Change) {
		a, mass := &s.state.aside, 0.0
		for _, m := range s.state.belief.Mass {
			mass += m
		}
		loose := 0.0
		for _, m := range a.loose.Mass {
			loose += m
		}
		if a.off < 0 || a.lost < 0 || a.on() < 0.9*leastOn || math.Abs(mass-1) > 1e-9 || a.off > 0 && math.Abs(loose-1) > 1e-9 || a.loose.Len() > mostLoose {
			t.Fatalf("on %v (of it %v), off %v (of it %v in %d), lost %v", a.on(), mass, a.off, loose, a.loose.Len(), a.lost)
		}
	})
	o := feed(t, s, events)
	for _, p := range o.posteriors {
		way := 100 + 10*float64(p.TimeNS-int64(at(0)))/1e9
		if e := math.Abs(p.MeanFrame.N - way); e > 25 {
			t.Errorf("at %.0f m: the mean is at %v", way, p.MeanFrame)
		}
		switch off := p.Status == summary.OffMap; {
		case way > 400 && way < 495 && !off:
			t.Errorf("at %.0f m: %v, off the map %v", way, p.Status, p.OffMap)
		case (way < 300 || way > 560 && way < 640) && p.Status != summary.Located:
			t.Errorf("at %.0f m: %v, off the map %v", way, p.Status, p.OffMap)
		}
	}
	if last := o.posteriors[len(o.posteriors)-1]; last.Edges[0].Name != "North Street" || last.Edges[0].Probability < 0.99 {
		t.Errorf("at the end: %+v", last.Edges[0])
	}
	for seed := range uint64(3) {
		rng := rand.New(rand.NewPCG(seed, 0))
		late := append([]sensor.Event(nil), events...)
		for i := 1; i+1 < len(late); i += 2 { // at most a second late
			if rng.IntN(2) == 0 {
				late[i], late[i+1] = late[i+1], late[i]
			}
		}
		if again := feed(t, open(t, c), late); again.hash != o.hash {
			t.Errorf("seed %d: another order of arrival gives another hash", seed)
		}
	}
}

// TestBeyondTheEnd drives over the end of the last street of a map: all of the
// mass leaves the roads and is followed.
func TestBeyondTheEnd(t *testing.T) {
	road := straight(200)
	c := Config{Space: road, Names: road, Start: pointStart(road, geo.Point{N: 100}, 3)}
	o := feed(t, open(t, c), northward(30))
	last := o.posteriors[len(o.posteriors)-1]
	if last.Status != summary.OffMap || last.MeanFrame.Sub(geo.Point{N: 400}).Norm() > 25 || last.Counts.LeftMap != 0 {
		t.Errorf("%v at %v, counts %+v", last.Status, last.MeanFrame, last.Counts)
	}
	if !last.Protection.Bounded || last.Protection.RadiusM < last.Radius99M {
		t.Errorf("protection %+v, the 99 %% radius is %v", last.Protection, last.Radius99M)
	}
}

// TestRatesOfNothing: a suite without these hypotheses keeps nothing of them, and
// a session with them that has none yet has the same belief.
func TestRatesOfNothing(t *testing.T) {
	road := straight(400)
	with := Config{Space: road, Names: road, Start: pointStart(road, geo.Point{N: 100}, 3)}
	without := with
	without.Suite = onRoads()
	a, b := feed(t, open(t, with), northward(5)).s, feed(t, open(t, without), northward(5)).s
	if x := b.state.aside; x.off != 0 || x.lost != 0 || x.loose.Len() != 0 {
		t.Errorf("%+v", x)
	}
	if a.state.aside.off == 0 || a.state.aside.lost == 0 {
		t.Errorf("%+v", a.state.aside)
	}
	var p, q filter.Cloud
	a.ReadBelief(&p)
	b.ReadBelief(&q)
	for i := range q.Mass {
		if p.Mass[i] != q.Mass[i] || p.North[i] != q.North[i] {
			t.Fatalf("entry %d differs", i)
		}
	}
}

// TestSearchesPause: a vehicle that stays lost is searched for after ever longer pauses,
// up to a bound; once it has been located, or drives on after a long stop, as at first.
func TestSearchesPause(t *testing.T) {
	road := straight(1000)
	c := Config{Space: road, Names: road, Start: pointStart(road, geo.Point{N: 100}, 3)}
	begun := 0
	c.Begin = func(func()) (wait func()) { begun++; return func() {} }
	s := open(t, c)
	a := &s.state.aside
	pauses := func(seconds int) (out []int) { // between one that is let in and the next
		last := 0
		for i := range seconds {
			s.state.time = s.state.time + at(1) - at(0)
			a.lost = 0.5
			was, n := a.search, begun
			s.look()
			if begun > n && last > 0 {
				out = append(out, i-last)
			}
			if was != nil && a.search == nil {
				last = i
			}
		}
		return out
	}
	s.state.time = at(0)
	if got, want := pauses(2400), []int{60, 120, 240, 480, 480, 480, 480}; !slices.Equal(got, want) {
		t.Errorf("pauses of %v s, want %v", got, want)
	}
	a.alarm = a.raise(&summary.Posterior{Status: summary.Located})
	s.state.time += sensor.Time(searchMostS * 1e9)
	if got, want := pauses(400), []int{60, 120}; !slices.Equal(got, want) {
		t.Errorf("once it was located: pauses of %v s, want %v", got, want)
	}
	a.quietS = 2 * quietAfterS
	s.lose(1, true)
	s.state.time += sensor.Time(searchMostS * 1e9)
	if got, want := pauses(400), []int{60, 120}; !slices.Equal(got, want) {
		t.Errorf("after a stop: pauses of %v s, want %v", got, want)
	}
}

// TestLostInSilence: a vehicle stands for five minutes and then drives where no
// street fits: that it was moved outweighs that it left the map, and the alarm is
// raised, with protection unbounded for the reason.
func TestLostInSilence(t *testing.T) {
	road := straight(1000)
	c := Config{Space: road, Names: road, Start: pointStart(road, geo.Point{N: 100}, 3)}
	events := northward(20)
	events = append(events,
		sensor.Event{Time: at(320), Sensor: "odo", Number: 100, Measurement: sensor.Travel{Since: at(20), SigmaM: 0.01}},
		sensor.Event{Time: at(320), Sensor: "gyro", Number: 100, Measurement: sensor.Turn{Since: at(20), SigmaRad: 0.002}})
	for i := range 20 {
		s, angle := 320+float64(i), 0.0
		if i == 5 {
			angle = math.Pi / 2
		}
		events = append(events,
			sensor.Event{Time: at(s + 1), Sensor: "odo", Number: uint64(200 + i), Measurement: sensor.Travel{Since: at(s), DistanceM: 10, SigmaM: 0.1}},
			sensor.Event{Time: at(s + 1), Sensor: "gyro", Number: uint64(200 + i), Measurement: sensor.Turn{Since: at(s), AngleRad: angle, SigmaRad: 0.002}})
	}
	o := feed(t, open(t, c), events)
	said := false
	for _, p := range o.posteriors {
		since := float64(p.TimeNS-int64(at(0))) / 1e9
		said = said || p.LostAlarm && p.Lost >= alarmFrom && p.Protection.Reason == summary.ReasonLost
		if since < 300 && p.Lost > 1e-6 || since > 320 && since < 325 && (p.Lost < 1e-4 || p.Lost > 1e-2) {
			t.Errorf("after %v s lost is %v", since, p.Lost)
		}
		if p.Lost > 1e-5 && p.Protection.Bounded {
			t.Errorf("after %v s: lost %v, protection %+v", since, p.Lost, p.Protection)
		}
		if since < 325 && p.LostAlarm {
			t.Errorf("after %v s an alarm", since)
		}
	}
	// The search that follows finds no street either: the vehicle is off the map.
	if last := o.posteriors[len(o.posteriors)-1]; !said || !last.LostAlarm || last.Status != summary.OffMap {
		t.Errorf("alarm %v, at the end %v: lost is %v, off %v, protection %+v", said, last.LostAlarm, last.Lost, last.OffMap, last.Protection)
	}
	// Half of the events come with the one after them, from the alarm to beyond
	// where the search enters.
	late := append([]sensor.Event(nil), events...)
	for i := 1; i+1 < len(late); i += 4 {
		if late[i].Time != at(320) && late[i+1].Time != at(320) {
			late[i], late[i+1] = late[i+1], late[i]
		}
	}
	if again := feed(t, open(t, c), late); again.hash != o.hash {
		t.Error("another order of arrival gives another hash")
	}
	elsewhere := c
	elsewhere.Begin = func(work func()) (wait func()) {
		done := make(chan struct{})
		go func() { work(); close(done) }()
		return func() { <-done }
	}
	if again := feed(t, open(t, elsewhere), events); again.hash != o.hash {
		t.Error("a search in another goroutine gives another hash")
	}
}
