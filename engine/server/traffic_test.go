package server

import (
	"context"
	"strings"
	"testing"

	"google.golang.org/protobuf/proto"

	"leadline/engine/client"
	"leadline/engine/sensor"
	"leadline/engine/traffic"
	"leadline/engine/wire"
	"leadline/fixtures/scenes"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestTraffic: a road is fed like a vehicle and asked for as a road; what comes of
// it is what comes of a file, whatever is asked meanwhile; an unknown post is
// refused, said, and the rest goes on; vehicles' calls know no roads.
func TestTraffic(t *testing.T) {
	suite, err := sensor.ParseSuite("road", []byte(scenes.TwoPosts))
	if err != nil {
		t.Fatal(err)
	}
	_, conn := serve(t, Config{Suites: map[string]*sensor.Suite{"road": suite}})
	ctx := context.Background()
	c := leadlinev1.NewPositionServiceClient(conn)
	h := &leadlinev1.DriveHeader{Vehicle: "r", Suite: "road", Traffic: true}
	feed, err := client.Open(ctx, conn, client.Drive{Header: h, Batch: 16})
	if err != nil {
		t.Fatal(err)
	}
	alone, err := traffic.Open(suite)
	if err != nil {
		t.Fatal(err)
	}
	for i, ev := range scenes.PastTwoPosts(began) {
		if i == 50 {
			b := ev.Measurement.(sensor.AcousticBearing)
			b.Post = "p9"
			ev.Measurement = b
		}
		if ev, err = wire.ToEvent(wire.FromEvent(ev)); err != nil { // degrees have fewer bits
			t.Fatal(err)
		}
		if err := alone.Take(ev); (err != nil) != (i == 50) {
			t.Fatal(i, err)
		}
		if err := feed.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	told := make(chan *leadlinev1.TrafficPicture, 1)
	go func() {
		var last *leadlinev1.TrafficPicture
		_ = client.FollowTraffic(ctx, conn, &leadlinev1.FollowTrafficRequest{Traffic: &leadlinev1.TrafficRequest{Road: "r", Shape: true}}, func(m *leadlinev1.FollowTrafficResponse) error {
			last = m.GetPicture()
			return nil
		})
		told <- last
	}()
	if _, err := c.Traffic(ctx, &leadlinev1.TrafficRequest{Road: "r"}); err != nil {
		t.Fatal(err)
	}
	closed, err := feed.Close()
	if err != nil {
		t.Fatal(err)
	}
	if err := alone.Flush(); err != nil {
		t.Fatal(err)
	}
	r, err := c.Traffic(ctx, &leadlinev1.TrafficRequest{Road: "r", Parts: 4, Shape: true})
	if err != nil {
		t.Fatal(err)
	}
	p, last := r.GetPicture(), <-told
	for what, got := range map[string]string{"asked": p.GetStateSha256(), "closed": closed.GetTraffic().GetStateSha256(), "followed": last.GetStateSha256()} {
		if got != alone.Hash() {
			t.Errorf("%s: %s, and a file gives %s", what, got, alone.Hash())
		}
	}
	if !p.GetEnded() || len(p.GetVehicles()) != 1 || p.GetLines()[0].GetForward() != 1 || len(p.GetIntensityPerKm()) != 4 || p.GetAccepted() != 239 || p.GetRefused() != 1 {
		t.Errorf("picture: %v", p)
	}
	if d := p.GetDoubts(); len(d) != 1 || d[0].GetKind() != leadlinev1.TrafficDoubtKind_TRAFFIC_DOUBT_KIND_UNKNOWN_POST || d[0].GetPost() != "p9" {
		t.Errorf("doubts: %v", d)
	}
	if s := r.GetShape(); len(s.GetCentreline()) != 2 || len(s.GetPosts()) != 2 || len(s.GetLines()) != 1 {
		t.Errorf("shape: %v", s)
	}
	w, err := c.Where(ctx, &leadlinev1.WhereRequest{Vehicles: []string{"r"}})
	if err != nil || w.GetAnswers()[0].GetFailure().GetReason() != leadlinev1.Reason_REASON_NOT_OFFERED {
		t.Errorf("where: %v, %v", w, err)
	}
	for roads, want := range map[bool]int{false: 0, true: 1} {
		if l, err := c.ListVehicles(ctx, &leadlinev1.ListVehiclesRequest{Traffic: roads}); err != nil || len(l.GetVehicles()) != want {
			t.Errorf("listed with traffic %v: %v, %v", roads, l, err)
		}
	}
	for words, req := range map[string]*leadlinev1.TrafficRequest{
		"road is missing": {}, "no road \"x\" here": {Road: "x"}, "least_existence is 2": {Road: "r", LeastExistence: proto.Float64(2)},
		"flow_s is 1": {Road: "r", FlowS: proto.Float64(1)}, "1001 parts": {Road: "r", Parts: 1001},
	} {
		if _, err := c.Traffic(ctx, req); err == nil || !strings.Contains(err.Error(), words) {
			t.Errorf("%v: %v", req, err)
		}
	}
	for words, h := range map[string]*leadlinev1.DriveHeader{
		"no map and no start": {Vehicle: "q", Suite: "road", Traffic: true, Map: "sea"}, "name one": {Vehicle: "q", Traffic: true},
	} {
		if _, err := client.Open(ctx, conn, client.Drive{Header: h}); err == nil || !strings.Contains(err.Error(), words) {
			t.Errorf("%v: %v", h, err)
		}
	}
}
