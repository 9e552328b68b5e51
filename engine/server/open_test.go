package server

import (
	"errors"
	"io"
	"math"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"google.golang.org/grpc/codes"

	"leadline/engine/client"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestBadOpen proves that each way to open wrongly has its own answer.
func TestBadOpen(t *testing.T) {
	_, conn := serve(t, Config{Suites: map[string]*sensor.Suite{"boat": {}}})
	long := strings.Repeat("x", wire.MaxName+1)
	with := func(change func(o *leadlinev1.Open)) *leadlinev1.Open {
		o := &leadlinev1.Open{Header: header("v"), Drive: "d"}
		change(o)
		return o
	}
	point := func(lon, lat, sigma float64) *leadlinev1.Start {
		return &leadlinev1.Start{Place: &leadlinev1.Start_Point{Point: &leadlinev1.StartPoint{Lon: &lon, Lat: &lat, SigmaM: sigma}}}
	}
	for _, c := range []struct {
		what  string
		open  *leadlinev1.Open
		code  codes.Code
		words string
	}{
		{"nothing", &leadlinev1.Open{}, codes.InvalidArgument, "vehicle is missing"},
		{"no drive", with(func(o *leadlinev1.Open) { o.Drive = "" }), codes.InvalidArgument, "drive is missing"},
		{"long drive", with(func(o *leadlinev1.Open) { o.Drive = long }), codes.InvalidArgument, "drive is 257 bytes long"},
		{"long vehicle", with(func(o *leadlinev1.Open) { o.Header.Vehicle = long }), codes.InvalidArgument, "vehicle is 257 bytes long"},
		{"no map", with(func(o *leadlinev1.Open) { o.Header.Map = "" }), codes.NotFound, `no map "" here: known are "sea"`},
		{"unknown map", with(func(o *leadlinev1.Open) { o.Header.Map = "moon" }), codes.NotFound, `no map "moon" here: known are "sea"`},
		{"unknown suite", with(func(o *leadlinev1.Open) { o.Header.Suite = "tank" }), codes.NotFound, `no suite "tank" here: known are "boat"`},
		{"posteriors too seldom", with(func(o *leadlinev1.Open) { o.Header.PosteriorIntervalS = session.MaxPosteriorS + 1 }), codes.InvalidArgument, "posterior_interval_s is 3601: it must be from 0 to 3600 seconds"},
		{"posteriors never", with(func(o *leadlinev1.Open) { o.Header.PosteriorIntervalS = math.NaN() }), codes.InvalidArgument, "posterior_interval_s is NaN: it must be from 0 to 3600 seconds"},
		{"start without sigma", with(func(o *leadlinev1.Open) { o.Header.Start = point(5, 53, 0) }), codes.InvalidArgument, "start: point: sigma_m is 0"},
		{"start with endless sigma", with(func(o *leadlinev1.Open) { o.Header.Start = point(5, 53, math.Inf(1)) }), codes.InvalidArgument, "start: point: sigma_m is +Inf"},
		{"start nowhere", with(func(o *leadlinev1.Open) { o.Header.Start = point(math.NaN(), 53, 5) }), codes.InvalidArgument, "is not on the globe"},
		{"start with lon and lat swapped", with(func(o *leadlinev1.Open) { o.Header.Start = point(53, 153, 5) }), codes.InvalidArgument, "are they swapped"},
		{"start off the map", with(func(o *leadlinev1.Open) { o.Header.Start = point(-70, 10, 5) }), codes.InvalidArgument, "does not touch the map"},
	} {
		st := raw(t, conn)
		if err := st.Send(opening(c.open)); err != nil {
			t.Fatal(err)
		}
		_, err := st.Recv()
		wantStatus(t, c.what, err, c.code, c.words)
	}
}

// TestOtherDrive proves that an unfinished drive is not thrown away by
// accident, and is when asked.
func TestOtherDrive(t *testing.T) {
	_, conn := serve(t, Config{NewSession: newTally})
	first, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "one"})
	_, err := client.Open(limited(t), conn, client.Drive{Header: header("v"), Name: "two"})
	wantStatus(t, "another drive", err, codes.AlreadyExists, `unfinished drive "one"`)
	h := header("v")
	h.Start = nil
	_, err = client.Open(limited(t), conn, client.Drive{Header: h, Name: "one"})
	wantStatus(t, "another header", err, codes.FailedPrecondition, "another header")
	f, err := client.Open(limited(t), conn, client.Drive{Header: header("v"), Name: "two", Replace: true})
	if err != nil {
		t.Fatal(err)
	}
	wantStatus(t, "the first stream", ends(first), codes.Aborted, "in place of drive")
	if _, err := f.Close(); err != nil {
		t.Fatal(err)
	}
	// An ended one makes way unasked.
	if _, err := fed(limited(t), conn, client.Drive{Header: header("v"), Name: "three"}, nil); err != nil {
		t.Error(err)
	}
}

// TestLimits proves that every bound has its answer, and that an idle vehicle
// makes room.
func TestLimits(t *testing.T) {
	var clock atomic.Int64
	clock.Store(int64(began))
	s, conn := serve(t, Config{
		NewSession: newTally,
		Limits:     Limits{Vehicles: 2, Streams: 3, MessageBytes: 4096, IdleTimeout: time.Minute},
		Now:        func() time.Time { return time.Unix(0, clock.Load()) },
	})
	a, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("a"), Drive: "d"})
	b, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("b"), Drive: "d"})
	_, err := client.Open(limited(t), conn, client.Drive{Header: header("c")})
	wantStatus(t, "a third vehicle", err, codes.ResourceExhausted, "its 2 vehicles")

	big := voyage(8, 200)
	if err := b.Send(batch(1, big...)); err != nil && !errors.Is(err, io.EOF) {
		t.Fatal(err)
	}
	wantStatus(t, "a message too large", ends(b), codes.ResourceExhausted, "larger than max (")

	// gRPC tells this one itself, before the handler knows and the vehicle is
	// idle: only then may the clock go on.
	for ctx := limited(t); s.streams.Load() > 1; time.Sleep(time.Millisecond) {
		if ctx.Err() != nil {
			t.Fatal("the stream of a message too large does not end at the server")
		}
	}
	clock.Add(int64(59 * time.Second))
	_, err = client.Open(limited(t), conn, client.Drive{Header: header("c")})
	wantStatus(t, "a vehicle not idle for long", err, codes.ResourceExhausted, "its 2 vehicles")
	clock.Add(int64(2 * time.Second))
	f, err := client.Open(limited(t), conn, client.Drive{Header: header("c")})
	if err != nil {
		t.Fatalf("no room after a minute: %v", err)
	}
	_, err = where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"b"}})
	wantStatus(t, "the vehicle that made room", err, codes.NotFound, `no vehicle "b"`)
	if _, err := f.Close(); err != nil {
		t.Error(err)
	}
	// The vehicle with a stream was kept.
	if err := a.Send(ending); err != nil {
		t.Fatal(err)
	}
	if err := ends(a); !errors.Is(err, io.EOF) {
		t.Errorf("the vehicle with a stream: %v", err)
	}
}

// TestBadConfig proves that a configuration's mistakes are all named at once.
func TestBadConfig(t *testing.T) {
	_, err := New(Config{Maps: []Map{{}, {Name: "a", Space: sea().Space}, {Name: "a", Space: sea().Space}}, Limits: Limits{Streams: -1}})
	for _, want := range []string{"map 1 has no name", `map "" has no space`, `two maps are called "a"`, "limit Streams is -1"} {
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want %q in it", err, want)
		}
	}
	if _, err := New(Config{}); err == nil {
		t.Error("a server without a map was made")
	}
}
