package traffic

import (
	"errors"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"

	"leadline/engine/exact"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/fixtures/scenes"
)

const checkpointSuite = "vehicle: {late_window_s: 1}" + scenes.TwoPosts

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
	events := scenes.PastTwoPosts(1e18)[:160]
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

// TestLayout: a checkpoint of a version whose watches are made differently is told
// from one that is damaged.
func TestLayout(t *testing.T) {
	suite, err := sensor.ParseSuite("roadside", []byte(checkpointSuite))
	if err != nil {
		t.Fatal(err)
	}
	w, err := Open(suite)
	if err != nil {
		t.Fatal(err)
	}
	good := w.Checkpoint()
	value, err := exact.Open(checkpointMagic, madeAs, good)
	if err != nil {
		t.Fatal(err)
	}
	damaged := slices.Clone(good)
	damaged[5] ^= 1
	for what, c := range map[string]struct {
		b    []byte
		want bool
	}{
		"another layout":                 {exact.Seal(checkpointMagic, madeAs+1, value), true},
		"from before there were layouts": {exact.Seal(withoutLayout, 0, value), true},
		"a damaged layout":               {damaged, false},
		"another file":                   {[]byte("GIF89a and so on, for a while"), false},
		"nothing within":                 {exact.Seal(checkpointMagic, madeAs, nil), false},
	} {
		if _, err := Restore(suite, c.b); err == nil || errors.Is(err, exact.ErrLayout) != c.want {
			t.Errorf("%s: %v", what, err)
		}
	}
}

// TestFieldsOfCheckpoints has whoever gives a watch another field decide whether
// checkpoints need it: code goes through these types by hand.
func TestFieldsOfCheckpoints(t *testing.T) {
	for typ, fields := range map[reflect.Type]int{
		reflect.TypeFor[Watch](): 14, reflect.TypeFor[hearing](): 3, reflect.TypeFor[ahead](): 1, reflect.TypeFor[Filter](): 13,
		reflect.TypeFor[track](): 6, reflect.TypeFor[grid](): 6, reflect.TypeFor[slice](): 2, reflect.TypeFor[line](): 4, reflect.TypeFor[unseen](): 4,
	} {
		if typ.NumField() != fields {
			t.Errorf("%v has %d fields and had %d: see whether its code (checkpoint.go) must go through the new one, then write the number here", typ, typ.NumField(), fields)
		}
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

// FuzzRestore: whatever the bytes behind a right layout and checksum, there is an error or a watch that can be written.
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
	value, err := exact.Open(checkpointMagic, madeAs, w.Checkpoint())
	if err != nil {
		f.Fatal(err)
	}
	f.Add(value)
	f.Fuzz(func(t *testing.T, body []byte) {
		if w, err := Restore(suite, exact.Seal(checkpointMagic, madeAs, body)); err == nil {
			w.Checkpoint()
		}
	})
}
