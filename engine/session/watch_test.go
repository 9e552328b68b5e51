package session

import (
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// TestWatch proves that a session that is watched computes what another one
// does, that the moves cover its time without a hole, and that the weighings,
// the road's included, are all of the evidence.
func TestWatch(t *testing.T) {
	c := newCar(winding(1), 7, func(s float64) float64 { return 30 + 8*s })
	c.odometer("odo", 0, 0.1, 20)
	c.gyro("gyro", 0, 0.13, 20)
	c.fixes("fix", 0.5, 1, 20, 6)
	config := Config{Space: c.road, Names: c.road, Start: pointStart(c.road, c.road.charted(30), 10)}
	alone := feed(t, open(t, config), inOrder(c.list))

	s := open(t, config)
	sum, roads, fixes := 0.0, 0, 0
	var now sensor.Time
	s.Watch(func(w Change) {
		switch {
		case w.Likelihood == nil:
			if now != 0 && w.From != now || w.Time <= w.From {
				t.Fatalf("a move from %d to %d comes after one to %d", w.From, w.Time, now)
			}
			now = w.Time
		case w.Event.Sensor == roadSensor:
			roads++
		default:
			fixes++
		}
		if w.Time != now && now != 0 {
			t.Fatalf("a change at %d of a belief at %d", w.Time, now)
		}
		sum += w.LogEvidence
	})
	watched := feed(t, s, inOrder(c.list))
	if watched.hash != alone.hash {
		t.Error("watching changed the posteriors")
	}
	if got := s.Latest().LogEvidence; sum != got || fixes != 19 || roads == 0 {
		t.Errorf("%d fixes and %d comparisons with the road were seen, with evidence %v; the session has %v", fixes, roads, sum, got)
	}
}

// TestRest proves that a session that gives its memory back now and then
// computes what another one does.
func TestRest(t *testing.T) {
	c := newCar(winding(1), 7, func(s float64) float64 { return 30 + 8*s })
	c.odometer("odo", 0, 0.1, 20)
	c.gyro("gyro", 0, 0.13, 20)
	c.fixes("fix", 0.5, 1, 20, 6)
	config := Config{Space: c.road, Names: c.road, Start: pointStart(c.road, c.road.charted(30), 10)}
	alone := feed(t, open(t, config), inOrder(c.list))
	s := open(t, config)
	for i, ev := range inOrder(c.list) {
		if _, err := s.Add(ev); err != nil {
			t.Fatal(err)
		}
		if i%7 == 0 {
			s.Rest()
		}
	}
	s.Flush()
	if s.Hash() != alone.hash {
		t.Error("resting changed the posteriors")
	}
	s.Rest()
	if p, err := s.Inside([][]geo.LonLat{{geo.FromDegrees(-180, -89), geo.FromDegrees(180, -89), geo.FromDegrees(180, 89), geo.FromDegrees(-180, 89)}}); err != nil {
		t.Errorf("asked after a rest: %v, %v", p, err)
	}
}

// TestDesks proves that sessions of different maps and sizes which work by turns with
// the same memory compute what each alone does.
func TestDesks(t *testing.T) {
	c := newCar(winding(1), 7, func(s float64) float64 { return 30 + 8*s })
	c.odometer("odo", 0, 0.1, 20)
	c.gyro("gyro", 0, 0.13, 20)
	c.fixes("fix", 0.5, 1, 20, 6)
	var desks Desks
	var all []*Session
	var hashes []string
	var events [][]sensor.Event
	for _, of := range []struct {
		config Config
		events []sensor.Event
	}{
		{Config{Space: c.road, Names: c.road, Start: pointStart(c.road, c.road.charted(30), 10)}, inOrder(c.list)},
		{Config{Space: c.road, Names: c.road}, inOrder(c.list)},
		{Config{Space: sea(), Start: pointStart(sea(), geo.Point{E: 5, N: 5}, 40), MaxCells: 500}, inOrder(planeEvents(1))},
		{Config{Space: sea(), Start: pointStart(sea(), geo.Point{E: 5, N: 5}, 400), MaxCells: 5000}, inOrder(planeEvents(2))},
	} {
		hashes = append(hashes, feed(t, open(t, of.config), of.events).hash)
		of.config.Desks = &desks
		all, events = append(all, open(t, of.config)), append(events, of.events)
	}
	for i := 0; ; i++ {
		left := false
		for k, s := range all {
			if i < len(events[k]) {
				left = true
				if _, err := s.Add(events[k][i]); err != nil {
					t.Fatal(err)
				}
				s.Rest()
			}
		}
		if !left {
			break
		}
	}
	for k, s := range all {
		s.Flush()
		s.Rest()
		if s.Hash() != hashes[k] {
			t.Errorf("session %d: working by turns changed the posteriors", k)
		}
	}
}
