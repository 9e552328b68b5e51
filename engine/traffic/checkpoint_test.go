package traffic

import (
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

const checkpointSuite = `
vehicle: {late_window_s: 1}
posts:
  - {id: p1, lon: -30, lat: 45.0004, sigma_deg: 3}
  - {id: p2, lon: -29.998, lat: 45.0004, sigma_deg: 3}
traffic:
  road: [{lon: -30.003, lat: 45}, {lon: -29.995, lat: 45}]
  lines: [{name: middle, at_m: 300}]
`

// TestCheckpoint: what is restored in the middle, with bearings that wait, goes on
// to the same bits; what is damaged, or of another road, is refused.
func TestCheckpoint(t *testing.T) {
	suite, err := sensor.ParseSuite("roadside", []byte(checkpointSuite))
	if err != nil {
		t.Fatal(err)
	}
	open := func() *Watch {
		w, err := Open(suite)
		if err != nil {
			t.Fatal(err)
		}
		return w
	}
	var events []sensor.Event
	for i := range 80 { // a vehicle at 14 m/s past both
		x := 100 + 14*0.2*float64(i)
		for k, foot := range []float64{236, 394} {
			bearing := geo.Heading(geo.Point{E: x - foot, N: -44.5})
			events = append(events, sensor.Event{Time: sensor.Time(1e18) + sensor.Time(i)*200e6, Sensor: "posts", Number: uint64(2*i + k), Measurement: sensor.AcousticBearing{Post: []string{"p1", "p2"}[k], BearingRad: geo.WrapCompass(bearing), SigmaRad: geo.Rad(3)}})
		}
	}
	take := func(w *Watch, evs []sensor.Event) {
		for _, ev := range evs {
			if err := w.Take(ev); err != nil {
				t.Fatal(err)
			}
		}
	}
	whole, half := open(), open()
	take(whole, events)
	take(half, events[:91])
	state := half.Checkpoint()
	again, err := Restore(suite, state)
	if err != nil {
		t.Fatal(err)
	}
	if again.Hash() != half.Hash() || !slices.Equal(again.Checkpoint(), state) || len(again.pending) == 0 {
		t.Error("what was restored is not what was written")
	}
	take(again, events[91:])
	for _, w := range []*Watch{whole, again} {
		if err := w.Flush(); err != nil {
			t.Fatal(err)
		}
	}
	if again.Hash() != whole.Hash() {
		t.Error("it did not go on to the same bits")
	}
	if vs := whole.Filter().Picture(0.5).Vehicles; len(vs) != 1 || vs[0].SpeedMPS < 10 {
		t.Errorf("vehicles: %+v", vs)
	}
	for i := 0; i < len(state); i += 97 {
		bad := slices.Clone(state)
		bad[i] ^= 1
		if _, err := Restore(suite, bad); err == nil {
			t.Errorf("byte %d is damaged and nobody noticed", i)
		}
	}
	other, err := sensor.ParseSuite("roadside", []byte(strings.Replace(checkpointSuite, "45.0004", "45.0005", 1)))
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Restore(other, state); err == nil || !strings.Contains(err.Error(), "of another road") {
		t.Errorf("of another road: %v", err)
	}
}

// TestClockAhead: one post's clock does not carry the road away; a pause does.
func TestClockAhead(t *testing.T) {
	suite, err := sensor.ParseSuite("roadside", []byte(checkpointSuite))
	if err != nil {
		t.Fatal(err)
	}
	w, err := Open(suite)
	if err != nil {
		t.Fatal(err)
	}
	say := func(post string, s float64) {
		t.Helper()
		if err := w.Add(Said{Time: sensor.Time(1e18) + seconds(s), Post: post, Number: 1, Bearing: Bearing{3, geo.Rad(3)}}); err != nil {
			t.Fatal(err)
		}
	}
	say("p1", 0)
	say("p2", 3600)
	say("p1", 0.2)
	say("p2", 0.4)
	if w.Dropped() != 1 || w.newest != sensor.Time(1e18)+seconds(0.4) {
		t.Errorf("dropped %d, newest %d", w.Dropped(), w.newest)
	}
	say("p1", 7200) // a pause, and both go on
	say("p2", 7200.2)
	if w.Dropped() != 1 || w.newest != sensor.Time(1e18)+seconds(7200.2) {
		t.Errorf("after a pause: dropped %d, newest %d", w.Dropped(), w.newest)
	}
	for s := 10000.0; s <= 10010; s += 0.5 { // one alone
		say("p1", s)
	}
	if w.Dropped() != 1 || w.newest != sensor.Time(1e18)+seconds(10010) {
		t.Errorf("alone: dropped %d, newest %d", w.Dropped(), w.newest)
	}
}

// FuzzRestore: whatever the bytes, there is an error or a watch that can be written.
func FuzzRestore(f *testing.F) {
	suite, err := sensor.ParseSuite("roadside", []byte(checkpointSuite))
	if err != nil {
		f.Fatal(err)
	}
	if found, err := filepath.Glob("testdata/fuzz/FuzzRestore/*"); err != nil || len(found) == 0 {
		f.Fatal("the corpus is empty")
	}
	w, err := Open(suite)
	if err != nil {
		f.Fatal(err)
	}
	f.Add(w.Checkpoint())
	f.Fuzz(func(t *testing.T, b []byte) {
		if w, err := Restore(suite, b); err == nil {
			w.Checkpoint()
		}
	})
}
