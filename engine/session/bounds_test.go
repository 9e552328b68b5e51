package session

import (
	"fmt"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// harbour is a fix of a sensor, at a vehicle that hardly moves.
func harbour(s float64, name string, number uint64) sensor.Event {
	return sensor.Event{Time: at(s), Sensor: name, Number: number, Measurement: sensor.Fix{Position: quay.Frame().Inverse(geo.Point{N: 100}), SigmaM: 5}}
}

var quay = straight(200)

func harbourConfig() Config {
	return Config{Space: quay, Names: quay, Start: pointStart(quay, geo.Point{N: 100}, 5)}
}

// TestFullOfWaiting lets a motion sensor fall silent whose suite says to wait
// for an hour: at the bound the session stops waiting, loses nothing, and goes
// on. An event that would go back among what was given up is refused, as too
// much.
func TestFullOfWaiting(t *testing.T) {
	c := harbourConfig()
	c.Suite = &sensor.Suite{Vehicle: sensor.Vehicle{HoldS: 3600, LateWindowS: 3600, MaxSpeedMPS: 0.1}} // so that gaps cost little
	s := open(t, c)
	s.maxWaiting = 400
	displacement := func(from, to float64) sensor.Event {
		return sensor.Event{Time: at(to), Sensor: "inertial", Measurement: sensor.Displacement{Since: at(from), NorthM: 1, CovM2: [3]float64{1, 0, 1}}}
	}
	events := []sensor.Event{displacement(0, 1)}
	for i := range 1500 {
		events = append(events, harbour(1+float64(i)/10, "gps", 0))
	}
	o := outcome{s: s}
	for i, ev := range events {
		ps, err := s.Add(ev)
		if err != nil {
			t.Fatalf("event %d: %v", i, err)
		}
		o.take(t, ps)
		if n := len(s.log.events); n > s.maxWaiting {
			t.Fatalf("%d events are held", n)
		}
	}
	if n := len(o.posteriors); n < 1000 {
		t.Fatalf("%d posteriors of 1500 times: it still waits", n)
	}
	r := refusal(t, s, displacement(1, 2))
	if r.Reason != Overfull || !strings.Contains(r.Detail, "400 events") || !strings.Contains(r.Detail, "late_window_s") {
		t.Error(r)
	}
	o.take(t, s.Flush())
	if len(o.posteriors) != 1500 {
		t.Errorf("%d posteriors of 1500 times", len(o.posteriors))
	}
	// The same as without a bound.
	c.Suite = &sensor.Suite{Vehicle: sensor.Vehicle{MaxSpeedMPS: 0.1}}
	want := feed(t, open(t, c), events)
	sameState(t, want.s, s)
}

// TestFullOfLateness keeps a window that holds more events than may be held:
// the oldest are given up, the newest can still be revised.
func TestFullOfLateness(t *testing.T) {
	c := harbourConfig()
	c.Suite = &sensor.Suite{Vehicle: sensor.Vehicle{LateWindowS: 3600, MaxSpeedMPS: 0.1}}
	s := open(t, c)
	s.maxWaiting = 400
	for i := range 1000 {
		if _, err := s.Add(harbour(float64(i), "gps", 0)); err != nil {
			t.Fatal(err)
		}
		if n := len(s.snaps); len(s.log.events) > s.maxWaiting || n > 8 {
			t.Fatalf("%d events, %d snapshots", len(s.log.events), n)
		}
	}
	if _, err := s.Add(harbour(900.5, "other", 0)); err != nil {
		t.Errorf("an event among the last hundred: %v", err)
	}
	if r := refusal(t, s, harbour(400.5, "other", 0)); r.Reason != Overfull {
		t.Error(r)
	}
}

// TestManyAtOnce sends more events of one time than may be held.
func TestManyAtOnce(t *testing.T) {
	s := open(t, harbourConfig())
	s.maxWaiting = 400
	over := 0
	for i := range 1000 {
		if _, err := s.Add(harbour(1, "gps", uint64(i))); err != nil {
			r := refusal(t, s, harbour(1, "gps", uint64(i)))
			if r.Reason != Overfull {
				t.Fatalf("event %d: %v", i, r)
			}
			over++
		}
		if len(s.log.events) > s.maxWaiting {
			t.Fatalf("%d events are held", len(s.log.events))
		}
	}
	if over != 600 {
		t.Errorf("%d of 1000 events of one time are refused, 400 may be held", over)
	}
	if _, err := s.Add(harbour(2, "gps", 0)); err != nil {
		t.Errorf("the next time: %v", err)
	}
}

// TestManyNames bounds what is told apart by name.
func TestManyNames(t *testing.T) {
	s := open(t, harbourConfig())
	for i := range maxVoices {
		if _, err := s.Add(harbour(1, fmt.Sprint(i), 0)); err != nil {
			t.Fatal(err)
		}
	}
	r := refusal(t, s, harbour(1, "one more", 0))
	if r.Reason != Overfull || !strings.Contains(r.Detail, `"one more"`) || !strings.Contains(r.Detail, "same name") {
		t.Error(r)
	}
	if _, err := s.Add(harbour(2, "7", 0)); err != nil {
		t.Errorf("one that is known: %v", err)
	}
}

// size is what a session holds beside its belief.
func (s *Session) size() int {
	n := len(s.log.events) + len(s.log.voices) + len(s.recent) + len(s.superseded) + 1000*len(s.snaps) + len(s.state.evidence)
	for _, src := range s.log.sources {
		n += len(src.events)
	}
	return n
}

// TestLongRun proves that what a session holds, and what an event allocates,
// do not grow with the length of the run: late events included.
func TestLongRun(t *testing.T) {
	s := open(t, harbourConfig())
	step := 0
	drive := func() {
		for range 50 {
			from, to := float64(step)/10, float64(step+1)/10
			for _, ev := range []sensor.Event{
				{Time: at(to), Sensor: "inertial", Measurement: sensor.Displacement{Since: at(from), CovM2: [3]float64{1, 0, 1}}},
				{Time: at(to), Sensor: "log", Measurement: sensor.Speed{SigmaMPS: 1, HasCourse: true}},
				harbour(to, "gps", 0),
				harbour(to, "gps", 1),
			} {
				if _, err := s.Add(ev); err != nil {
					t.Fatal(err)
				}
			}
			if step%25 == 24 {
				if _, err := s.Add(harbour(from-0.5, "late", 0)); err != nil {
					t.Fatal(err)
				}
			}
			step++
		}
	}
	drive()
	most := 0
	for range 4 {
		drive()
		most = max(most, s.size())
	}
	early := testing.AllocsPerRun(2, drive)
	for range 10 {
		drive()
		// The log is cut in bites of 256 or more: twice that slack.
		if n := s.size(); n > most+1024 {
			t.Fatalf("after %d steps a size of %d, at the beginning %d", step, n, most)
		}
	}
	late := testing.AllocsPerRun(2, drive)
	// The bites fall differently.
	if late > 1.2*early {
		t.Errorf("%v allocations in 50 steps, at the beginning %v", late, early)
	}
}

// TestWholeDriveWaiting feeds a whole drive at 100 Hz while everything waits:
// looking up the motion of a step does not search all that waits.
func TestWholeDriveWaiting(t *testing.T) {
	work := func(n int) int {
		c := harbourConfig()
		c.Suite = &sensor.Suite{Vehicle: sensor.Vehicle{HoldS: 3600}}
		s := open(t, c)
		var events []sensor.Event
		for i := range n {
			from, to := at(float64(i)/100), at(float64(i+1)/100)
			events = append(events,
				sensor.Event{Time: to, Sensor: "a", Measurement: sensor.Displacement{Since: from, CovM2: [3]float64{1, 0, 1}}},
				sensor.Event{Time: to, Sensor: "log", Measurement: sensor.Speed{SigmaMPS: 1, HasCourse: true}})
		}
		for _, ev := range events {
			if ps, err := s.Add(ev); err != nil || len(ps) > 0 {
				t.Fatal(ps, err)
			}
		}
		// What a step looks at, for each step as if it came next.
		looked := 0
		for i := range n {
			s.spans(at(float64(i)/100), at(float64(i+1)/100), func(sensor.Event, sensor.Time) { looked++ })
		}
		if i := s.log.sources[0].after(at(float64(n) / 200)); i != n/2 {
			t.Errorf("%d events are before the middle", i)
		}
		return looked
	}
	// Two sensors, one event of each a step; the first speed covers nothing.
	if a, b := work(500), work(2000); a != 2*500-1 || b != 2*2000-1 {
		t.Errorf("%d and %d events are looked at", a, b)
	}
}
