package server

import (
	"errors"
	"io"
	"math"
	"strings"
	"testing"

	"leadline/engine/client"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/wire"
	"leadline/fixtures/scenes"
	leadlinev1 "leadline/proto/leadline/v1"
)

// narrowSuite has a post in line with the road, and follows one vehicle at most.
var narrowSuite = strings.NewReplacer(
	"traffic:\n", "  - {id: p3, lon: -29.9985, lat: 45, sigma_deg: 3}\ntraffic:\n  max_vehicles: 1\n",
).Replace(scenes.TwoPosts)

// narrowEvents are of two vehicles that meet, each heard by two posts, and one of
// them by a post in line with the road; and what cannot be used.
func narrowEvents() (out []sensor.Event) {
	say := func(i int, post string, at geo.Point, m sensor.Measurement) {
		if m == nil {
			m = sensor.AcousticBearing{Post: post, BearingRad: geo.WrapCompass(geo.Heading(at)), SigmaRad: geo.Rad(3)}
		}
		out = append(out, sensor.Event{Time: began + sensor.Time(i)*200e6, Sensor: "posts", Number: uint64(len(out)), Measurement: m})
	}
	for i := range 100 {
		x := []float64{120 + 2.8*float64(i), 500 - 2.8*float64(i)}
		for k, foot := range []float64{236, 394} {
			for _, v := range x {
				say(i, []string{"p1", "p2"}[k], geo.Point{E: v - foot, N: -44.5}, nil)
			}
		}
		if i%4 == 0 {
			say(i, "p3", geo.Point{E: x[0] - 354.5}, nil)
		}
	}
	say(50, "p9", geo.Point{N: 1}, nil)
	say(50, "", geo.Point{}, sensor.AcousticBearing{Post: "p1", BearingRad: 1, SigmaRad: geo.Rad(40)})
	say(50, "", geo.Point{}, sensor.Standstill{})
	return out
}

// TestTrafficBadInput proves that what posts say wrongly, where one stands badly and
// what is beyond the budget are each said, with what to do, while the rest goes on;
// and that who follows a road is bounded in number and in how often they are told,
// but for the end, which they are told at once.
func TestTrafficBadInput(t *testing.T) {
	suite, err := sensor.ParseSuite("narrow", []byte(narrowSuite))
	if err != nil {
		t.Fatal(err)
	}
	_, conn := serve(t, Config{Suites: map[string]*sensor.Suite{"narrow": suite}, Limits: Limits{Followers: 1}})
	c := leadlinev1.NewPositionServiceClient(conn)
	ctx := limited(t)
	var refusals []string
	feed, err := client.Open(ctx, conn, client.Drive{
		Header: &leadlinev1.DriveHeader{Vehicle: "r", Suite: "narrow", Traffic: true}, Batch: 16,
		OnRefusal: func(r *leadlinev1.Refusal) { refusals = append(refusals, r.GetDetail()) },
	})
	if err != nil {
		t.Fatal(err)
	}
	follow := func(intervalS float64) (*leadlinev1.FollowTrafficResponse, func() (*leadlinev1.FollowTrafficResponse, error), error) {
		st, err := c.FollowTraffic(ctx, &leadlinev1.FollowTrafficRequest{Traffic: &leadlinev1.TrafficRequest{Road: "r"}, MinIntervalS: intervalS})
		if err != nil {
			t.Fatal(err)
		}
		m, err := st.Recv()
		return m, st.Recv, err
	}
	for _, s := range []float64{-1, 3600.5, math.NaN(), math.Inf(1)} {
		if _, _, err := follow(s); saidBy(err).reason != leadlinev1.Reason_REASON_BAD_FIELD || saidBy(err).about["field"] != "min_interval_s" {
			t.Errorf("min_interval_s %v: %v", s, err)
		}
	}
	first, next, err := follow(maxIntervalS)
	if err != nil || first.GetPicture().GetEnded() {
		t.Fatalf("the first picture: %v, %v", first, err)
	}
	if _, _, err := follow(0); saidBy(err).reason != leadlinev1.Reason_REASON_SERVER_FULL || saidBy(err).about["limit"] != "followers" || saidBy(err).about["most"] != "1" {
		t.Errorf("a second follower: %v", err)
	}
	evs := narrowEvents()
	for _, ev := range evs {
		if err := feed.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	if _, err := feed.Close(); err != nil {
		t.Fatal(err)
	}
	last, err := next() // the second: none came between
	if err != nil || !last.GetPicture().GetEnded() {
		t.Fatalf("the next picture after an interval of an hour: %v, %v", last, err)
	}
	if _, err := next(); !errors.Is(err, io.EOF) {
		t.Errorf("after the last picture: %v", err)
	}
	p := last.GetPicture()
	if p.GetAccepted() != uint64(len(evs)-3) || p.GetRefused() != 3 || len(p.GetVehicles()) > 1 || p.GetUnlabelled() < 0.3 || p.GetLines()[0].GetForward()+p.GetLines()[0].GetBackward() == 0 {
		t.Errorf("the rest: %v", p)
	}
	words := strings.Join(refusals, "\n")
	for _, want := range []string{`post "p9" is none of this road's: name one of its posts`, "sigma", "posts alone count here"} {
		if !strings.Contains(words, want) {
			t.Errorf("nothing was refused for %q: %s", want, words)
		}
	}
	for kind, want := range map[leadlinev1.TrafficDoubtKind]string{
		leadlinev1.TrafficDoubtKind_TRAFFIC_DOUBT_KIND_UNKNOWN_POST: `"p9"`,
		leadlinev1.TrafficDoubtKind_TRAFFIC_DOUBT_KIND_IN_LINE:      `post "p3" stands in line with the road`,
		leadlinev1.TrafficDoubtKind_TRAFFIC_DOUBT_KIND_OVER_BUDGET:  "raise traffic.max_vehicles",
	} {
		found := false
		for _, d := range p.GetDoubts() {
			found = found || d.GetKind() == kind && strings.Contains(d.GetDetail(), want)
		}
		if !found {
			t.Errorf("no doubt %v with %q: %v", kind, want, p.GetDoubts())
		}
	}
	if m, _, err := follow(0); err != nil || !m.GetPicture().GetEnded() { // there is room again
		t.Errorf("after the first has gone: %v, %v", m, err)
	}
}
