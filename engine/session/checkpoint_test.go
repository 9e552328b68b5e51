package session

import (
	"bytes"
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"strings"
	"testing"

	"leadline/engine/exact"
	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// again is a session in another place: from its checkpoint, which is looked at
// closely now and then.
func again(t testing.TB, c Config, s *Session, closely bool) *Session {
	t.Helper()
	b := s.Checkpoint()
	r, err := Restore(c, b)
	if err != nil {
		t.Fatal(err)
	}
	if closely && !bytes.Equal(r.Checkpoint(), b) {
		t.Fatal("what was restored has another checkpoint")
	}
	return r
}

// lostEvents is a vehicle that stands for minutes and then drives where no
// street fits, so that the whole map is searched.
func lostEvents() []sensor.Event {
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
	return events
}

// swapped has some events come after the one that follows them.
func swapped(events []sensor.Event) []sensor.Event {
	late := slices.Clone(events)
	for i := 1; i+1 < len(late); i += 4 {
		if late[i].Time != at(320) && late[i+1].Time != at(320) {
			late[i], late[i+1] = late[i+1], late[i]
		}
	}
	return late
}

// TestCheckpoint proves that a session which is written and restored again and
// again, some events in a row, and after its end, is the one that was not: late
// events, a plane with and without quantities, and a search of the whole map on its
// way included. In between it gets whole snapshots again.
func TestCheckpoint(t *testing.T) {
	town, road := crossing(), straight(1000)
	for _, c := range []struct {
		name   string
		config Config
		events []sensor.Event
	}{
		{"roads", Config{Space: town, Names: town, Start: pointStart(town, geo.Point{E: 10, N: 30}, 30), MaxCells: 20000}, shuffled(roadEvents(1), 1, rand.New(rand.NewPCG(1, 1)))[:450]},
		{"plane", Config{Space: sea(), Start: pointStart(sea(), geo.Point{E: 5, N: 5}, 40), MaxCells: 500}, shuffled(planeEvents(1), 1, rand.New(rand.NewPCG(2, 1)))},
		{"search", Config{Space: road, Names: road, Start: pointStart(road, geo.Point{N: 100}, 3)}, swapped(lostEvents())},
	} {
		t.Run(c.name, func(t *testing.T) {
			c.config.Vehicle = "v"
			want := feed(t, open(t, c.config), c.events)
			s, searching := open(t, c.config), 0
			o := outcome{}
			for i, ev := range c.events {
				ps, err := s.Add(ev)
				if err != nil {
					t.Fatal(err)
				}
				o.s = s
				o.take(t, ps)
				if s.state.aside.search != nil {
					searching++
				}
				if i%60 < 8 || c.name == "search" {
					s = again(t, c.config, s, i%5 == 0)
				}
			}
			last := s.Flush()
			o.s = s
			o.take(t, last)
			s = again(t, c.config, s, true)
			sameState(t, want.s, s)
			samePosteriors(t, want.posteriors, o.posteriors)
			a, r := s.Counts()
			if wa, wr := want.s.Counts(); a != wa || r != wr {
				t.Errorf("%d accepted and %d refused, without restoring %d and %d", a, r, wa, wr)
			}
			if (searching > 0) != (c.name == "search") {
				t.Errorf("a search was on its way %d times", searching)
			}
		})
	}
}

// TestMeasurementsOfCheckpoints proves that checkpoints know all kinds.
func TestMeasurementsOfCheckpoints(t *testing.T) {
	var kinds []string
	for _, m := range measurements {
		kinds = append(kinds, m.Kind())
	}
	want := sensor.Kinds()
	slices.Sort(kinds)
	slices.Sort(want)
	if !slices.Equal(kinds, want) {
		t.Errorf("checkpoints know %v, and there are %v", kinds, want)
	}
}

// TestFieldsOfCheckpoints has whoever gives a session another field decide
// whether checkpoints need it: code goes through these types by hand.
func TestFieldsOfCheckpoints(t *testing.T) {
	for _, c := range []struct {
		v      any
		fields int
	}{
		{Session{}, 57},
		{state{}, 23},
		{aside{}, 12},
		{snapshot{}, 3},
		{log{}, 7},
		{source{}, 3},
		{spoken{}, 2},
		{voice{}, 3},
		{lastEvent{}, 3},
		{lead{}, 8},
		{pace{}, 1},
		{search{}, 5},
	} {
		if typ := reflect.TypeOf(c.v); typ.NumField() != c.fields {
			t.Errorf("%v has %d fields and had %d: see whether its code (checkpoint.go) must go through the new one, then write the number here", typ, typ.NumField(), c.fields)
		}
	}
}

// TestWrongCheckpoints: what is no checkpoint of this session is an error that
// says so.
func TestWrongCheckpoints(t *testing.T) {
	town := crossing()
	c := Config{Vehicle: "v", Space: town, Names: town, Start: pointStart(town, geo.Point{E: 10, N: 30}, 30), MaxCells: 20000}
	s := open(t, c)
	for _, ev := range roadEvents(1)[:200] {
		if _, err := s.Add(ev); err != nil {
			t.Fatal(err)
		}
	}
	good := s.Checkpoint()
	flipped := slices.Clone(good)
	flipped[len(good)/3] ^= 4
	value, err := exact.Open(checkpointMagic, layout, good)
	if err != nil {
		t.Fatal(err)
	}
	within := func(f func(value []byte) []byte) []byte {
		return exact.Seal(checkpointMagic, layout, f(slices.Clone(value)))
	}
	elsewhere := c
	elsewhere.Vehicle = "w"
	road := straight(100)
	other := Config{Vehicle: "v", Space: road, Names: road, Start: pointStart(road, geo.Point{N: 50}, 3), MaxCells: 20000}
	for _, w := range []struct {
		name string
		c    Config
		b    []byte
		want string
	}{
		{"nothing", c, nil, "no checkpoint"},
		{"another file", c, []byte("GIF89a and so on, for a while"), "no checkpoint"},
		{"cut off", c, good[:len(good)/2], "checksum"},
		{"a flipped bit", c, flipped, "checksum"},
		{"a sealed flipped length", c, within(func(b []byte) []byte { b[0] ^= 0x40; return b }), "damaged"},
		{"another vehicle", elsewhere, good, `of vehicle "v"`},
		{"another map", other, good, "damaged"},
		{"bytes left over", c, within(func(b []byte) []byte { return append(b, 0, 0, 0, 0) }), "left over"},
	} {
		if _, err := Restore(w.c, w.b); err == nil || !strings.Contains(err.Error(), w.want) {
			t.Errorf("%s: %v, want %q", w.name, err, w.want)
		}
	}
	if _, err := Restore(c, exact.Seal(checkpointMagic, layout+1, value)); !errors.Is(err, exact.ErrLayout) {
		t.Errorf("another layout: %v", err)
	}
}

// FuzzRestore gives Restore bytes that pass the checksum and the layout: it must
// return an error or a session, and never panic.
func FuzzRestore(f *testing.F) {
	town := crossing()
	c := Config{Vehicle: "v", Space: town, Names: town, Start: pointStart(town, geo.Point{E: 10, N: 30}, 2), MaxCells: 2000}
	s := open(f, c)
	for i, ev := range inOrder(roadEvents(1))[:40] {
		if _, err := s.Add(ev); err != nil {
			f.Fatal(err)
		}
		if i%13 == 0 {
			value, err := exact.Open(checkpointMagic, layout, s.Checkpoint())
			if err != nil {
				f.Fatal(err)
			}
			f.Add(value)
		}
	}
	f.Fuzz(func(t *testing.T, body []byte) {
		r, err := Restore(c, exact.Seal(checkpointMagic, layout, body))
		if err != nil {
			return
		}
		r.Checkpoint()
	})
}
