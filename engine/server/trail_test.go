package server

import (
	"math"
	"testing"
	"time"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"

	"leadline/engine/client"
	"leadline/engine/sensor"
	"leadline/engine/summary"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestTrailThins compares a trail with all posteriors: it has each of its points
// from there, in order, evenly, and few enough of them; and what is revised or
// withdrawn is so in it, too.
func TestTrailThins(t *testing.T) {
	for _, n := range []int{0, 1, maxTrail, maxTrail + 1, 5000} {
		var tr trail
		for i := range n {
			tr.take([]*summary.Posterior{{TimeNS: int64(i), Radius95M: float64(i)}}, nil)
		}
		if len(tr.points) > maxTrail || n <= maxTrail && len(tr.points) != n || n > maxTrail && len(tr.points) < maxTrail/2 {
			t.Fatalf("%d posteriors: %d points", n, len(tr.points))
		}
		for i, p := range tr.points {
			if p.radius95M != float64(p.timeNS) || i > 0 && p.timeNS-tr.points[i-1].timeNS != int64(max(tr.every, 1)) {
				t.Fatalf("%d posteriors: point %d is %+v, every %d", n, i, p, tr.every)
			}
		}
	}
	var tr trail
	at := func(ns int64, r float64) *summary.Posterior { return &summary.Posterior{TimeNS: ns, Radius95M: r} }
	tr.take([]*summary.Posterior{at(1, 1), at(2, 2), at(4, 4)}, nil)
	tr.take([]*summary.Posterior{at(2, 20), at(3, 3)}, []sensor.Time{1, 7})
	var got []float64
	for _, p := range tr.points {
		got = append(got, p.radius95M)
	}
	if len(got) != 3 || got[0] != 20 || got[1] != 3 || got[2] != 4 {
		t.Errorf("revised: %v", got)
	}
}

// TestTrailAndRecent proves that who looks at a drive is told its past and its
// last measurements, refused ones with the reason.
func TestTrailAndRecent(t *testing.T) {
	_, conn := serve(t, Config{})
	c := leadlinev1.NewPositionServiceClient(conn)
	evs := voyage(3, 20)
	f, err := client.Open(limited(t), conn, client.Drive{Header: header("v"), Name: "d", Batch: 1})
	if err != nil {
		t.Fatal(err)
	}
	early := wire.FromEvent(evs[0])
	early.Time = timestamppb.New(time.Unix(0, int64(began)-1e12))
	early.GetMeasurement().GetDisplacement().Since = timestamppb.New(time.Unix(0, int64(began)-2e12))
	for _, ev := range evs {
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	if err := f.Send(early); err != nil {
		t.Fatal(err)
	}
	if _, err := f.Close(); err != nil {
		t.Fatal(err)
	}
	tr, err := c.Trail(limited(t), &leadlinev1.TrailRequest{Vehicle: "v"})
	if err != nil {
		t.Fatal(err)
	}
	if n := len(tr.GetPoints()); n != 20 || tr.GetDrive() != "d" {
		t.Errorf("%d points of drive %q", n, tr.GetDrive())
	}
	st, err := c.Follow(limited(t), &leadlinev1.FollowRequest{Vehicles: []string{"v"}, Detail: leadlinev1.Detail_DETAIL_BELIEF})
	if err != nil {
		t.Fatal(err)
	}
	m, err := st.Recv()
	if err != nil {
		t.Fatal(err)
	}
	if p, last := m.GetPosterior(), tr.GetPoints()[19]; !proto.Equal(p.GetMean(), last.GetMean()) || p.GetRadii().GetRadius95M() != last.GetRadius95M() || p.GetAlertLimitM() != 556 {
		t.Errorf("the trail ends at %v, the posterior is %v", last, p)
	}
	r := m.GetRecent()
	if len(r) != maxRecent || r[maxRecent-1].GetRefusal().GetReason() != leadlinev1.Reason_REASON_TOO_LATE || r[maxRecent-2].GetRefusal() != nil {
		t.Errorf("%d recent, the last ones %v", len(r), r[max(len(r)-2, 0):])
	}
}

// TestSighting proves that what somebody says enters the drive as a measurement
// of the vehicle's would, and that it is told what it did.
func TestSighting(t *testing.T) {
	_, conn := serve(t, Config{})
	c := leadlinev1.NewPositionServiceClient(conn)
	f, err := client.Open(limited(t), conn, client.Drive{Header: header("v"), Name: "d", Batch: 1})
	if err != nil {
		t.Fatal(err)
	}
	add := func(s *leadlinev1.Sighting) *leadlinev1.AddSightingResponse {
		r, err := c.AddSighting(limited(t), &leadlinev1.AddSightingRequest{Vehicle: "v", Drive: "d", Sighting: s})
		if err != nil {
			t.Fatal(err)
		}
		return r
	}
	_, err = c.AddSighting(limited(t), &leadlinev1.AddSightingRequest{Vehicle: "v", Sighting: box(0, 200)})
	if got := saidBy(err); got.reason != leadlinev1.Reason_REASON_NO_POSTERIOR {
		t.Errorf("before the first posterior: %v", err)
	}
	for _, ev := range voyage(4, 4) { // no fix yet: only the start says where
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	if err := f.Flush(); err != nil {
		t.Fatal(err)
	}
	for {
		a, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"v"}})
		if err == nil && a.GetPosterior().GetCounts().GetAccepted() == 4 {
			break
		}
	}
	r := add(box(0, 200))
	if r.GetRefusal() != nil || r.GetAfter().GetCounts().GetAccepted() != 5 || r.GetMeasurement().GetMeasurement().GetSighting().GetWho() != "Ada" {
		t.Fatalf("entered: %v", r)
	}
	if before, after := r.GetBefore().GetRadii().GetRadius95M(), r.GetAfter().GetRadii().GetRadius95M(); !(after < before) {
		t.Errorf("the radius was %v and is %v", before, after)
	}
	closed, err := f.Close()
	if err != nil || closed.GetAccepted() != 5 {
		t.Errorf("%v, %v", closed, err)
	}
	_, err = c.AddSighting(limited(t), &leadlinev1.AddSightingRequest{Vehicle: "v", Sighting: box(0, 200)})
	if got := saidBy(err); got.reason != leadlinev1.Reason_REASON_DRIVE_ENDED {
		t.Errorf("after the end: %v", err)
	}
	_, err = c.AddSighting(limited(t), &leadlinev1.AddSightingRequest{Vehicle: "v", Drive: "other", Sighting: box(0, 200)})
	if got := saidBy(err); got.reason != leadlinev1.Reason_REASON_OTHER_DRIVE {
		t.Errorf("another drive: %v", err)
	}
	nan := box(0, 200)
	nan.Mistaken = math.NaN()
	_, err = c.AddSighting(limited(t), &leadlinev1.AddSightingRequest{Vehicle: "v", Sighting: nan})
	if got := saidBy(err); got.reason != leadlinev1.Reason_REASON_BAD_FIELD {
		t.Errorf("nonsense: %v", err)
	}
}

// box is a sighting in a square in the frame of the sea.
func box(from, to float64) *leadlinev1.Sighting {
	ring := &leadlinev1.Ring{Points: []*leadlinev1.Position{corner(at(from, from)), corner(at(to, from)), corner(at(to, to)), corner(at(from, to))}}
	return &leadlinev1.Sighting{
		Place:    &leadlinev1.Sighting_Area{Area: &leadlinev1.Polygon{Rings: []*leadlinev1.Ring{ring}}},
		Mistaken: 0.1, Who: "Ada",
	}
}
