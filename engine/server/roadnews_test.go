package server

import (
	"fmt"
	"slices"
	"testing"

	"leadline/engine/client"
	"leadline/engine/sensor"
	"leadline/fixtures/scenes"
	leadlinev1 "leadline/proto/leadline/v1"
)

// nextRoads reads news of roads, as words.
func nextRoads(t *testing.T, st followStream, n int) (out []string) {
	t.Helper()
	for len(out) < n {
		m, err := st.Recv()
		if err != nil {
			t.Fatalf("after %q: %v", out, err)
		}
		if r := m.GetRoad(); r != nil {
			out = append(out, fmt.Sprintf("%s %s %v %v", m.GetVehicle(), m.GetDrive(), r.GetEnded(), r.GetGone()))
		}
	}
	return out
}

// TestFollowRoads proves that who follows with roads is told which there are, and, without
// asking again, of one that comes, ends, comes again in another drive, and is erased; and that
// who follows without is told of none.
func TestFollowRoads(t *testing.T) {
	suite, err := sensor.ParseSuite("road", []byte(scenes.TwoPosts))
	if err != nil {
		t.Fatal(err)
	}
	_, conn := serve(t, Config{NewSession: newTroubled, Suites: map[string]*sensor.Suite{"road": suite}})
	c := leadlinev1.NewPositionServiceClient(conn)
	ctx := limited(t)
	open := func(road, drive string) *client.Feed {
		t.Helper()
		f, err := client.Open(ctx, conn, client.Drive{Header: &leadlinev1.DriveHeader{Vehicle: road, Suite: "road", Traffic: true}, Name: drive})
		if err != nil {
			t.Fatal(err)
		}
		return f
	}
	follow := func(roads bool) followStream {
		t.Helper()
		st, err := c.Follow(ctx, &leadlinev1.FollowRequest{Roads: roads})
		if err != nil {
			t.Fatal(err)
		}
		return st
	}
	without := follow(false)
	early := follow(true)
	is := func(st followStream, want ...string) {
		t.Helper()
		if got := nextRoads(t, st, len(want)); !slices.Equal(got, want) {
			t.Errorf("told %q, want %q", got, want)
		}
	}
	q, r := open("q", "1"), open("r", "1")
	is(early, "q 1 false false", "r 1 false false")
	if _, err := r.Close(); err != nil {
		t.Fatal(err)
	}
	is(early, "r 1 true false")
	late := follow(true)
	is(late, "q 1 false false", "r 1 true false")
	// Whoever looks between the old drive and the new one is told that the road is gone.
	again := func(st followStream) {
		t.Helper()
		got := nextRoads(t, st, 1)
		if got[0] == "r 1 true true" {
			got = nextRoads(t, st, 1)
		}
		if got[0] != "r 2 false false" {
			t.Errorf("told %q of a road that comes again", got)
		}
	}
	defer open("r", "2").Abort()
	again(early)
	again(late)
	if _, err := c.EraseVehicle(ctx, &leadlinev1.EraseVehicleRequest{Vehicle: "q"}); err != nil {
		t.Fatal(err)
	}
	q.Abort()
	is(early, "q 1 false true")
	is(late, "q 1 false true")

	// A vehicle's news after all that are the first that the other stream has.
	f := opened(t, conn, client.Drive{Header: header("v"), Batch: 1}, sensor.Event{Time: began + 1e9, Sensor: "s", Number: 1, Measurement: sensor.Standstill{}})
	defer f.Abort()
	if m, err := without.Recv(); err != nil || m.GetVehicle() != "v" {
		t.Errorf("without roads: %v, %v", m, err)
	}
}

// TestRoadsMove: of a road that another server goes on with a reader is not told that it is
// gone, and nothing of it is kept once the readers have looked; one that is here again and
// then dropped is gone.
func TestRoadsMove(t *testing.T) {
	b := newRoadBook()
	r := b.reader()
	road := func(name string) *owner { return &owner{vehicle: name, drive: "1"} }
	take := func() (out []string) {
		for m := r.take(); m != nil; m = r.take() {
			out = append(out, fmt.Sprintf("%s %v", m.GetVehicle(), m.GetRoad().GetGone()))
		}
		return out
	}
	is := func(want ...string) {
		t.Helper()
		if got := take(); !slices.Equal(got, want) {
			t.Errorf("told %q, want %q", got, want)
		}
	}
	for _, name := range []string{"a", "b", "c"} {
		b.put(road(name), false)
	}
	is("a false", "b false", "c false")
	for i := range 100 { // as partitions come and go
		b.put(road(fmt.Sprint("d", i)), false)
		b.drop(road(fmt.Sprint("d", i)), true)
	}
	b.drop(road("a"), true)
	b.drop(road("b"), true)
	b.drop(road("c"), false)
	b.put(road("b"), false)
	b.drop(road("b"), false)
	is("b true", "c true")
	if len(r.told) > 0 || len(r.moved) > 0 || len(b.all) > 0 {
		t.Errorf("told %v, moved %v, all %v are kept", r.told, r.moved, b.all)
	}
	b.put(road("a"), false)
	is("a false")
	r.close()
	if len(b.readers) > 0 {
		t.Error("a reader that is over is kept")
	}
}
