package server

import (
	"cmp"
	"context"
	"slices"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/summary"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// maxTrail bounds the points of a drive's past.
const maxTrail = 512

// trail is a drive's past, thinned: each every-th posterior. The owner's
// goroutine uses it.
type trail struct {
	points []trailPoint
	every  int
	passed int // since the last point
}

type trailPoint struct {
	timeNS      int64
	status      summary.Status
	mean        geo.LonLat
	radius95M   float64
	logEvidence float64
	nuisances   []summary.Nuisance
}

// take adds what has been released, and removes what has been withdrawn.
func (t *trail) take(ps []*summary.Posterior, withdrawn []sensor.Time) {
	for _, p := range ps {
		t.add(trailPoint{p.TimeNS, p.Status, p.Mean, p.Radius95M, p.LogEvidence, p.Nuisances})
	}
	for _, at := range withdrawn {
		if i, there := t.find(int64(at)); there {
			t.points = slices.Delete(t.points, i, i+1)
		}
	}
}

func (t *trail) find(timeNS int64) (int, bool) {
	return slices.BinarySearchFunc(t.points, timeNS, func(p trailPoint, at int64) int { return cmp.Compare(p.timeNS, at) })
}

func (t *trail) add(p trailPoint) {
	i, there := t.find(p.timeNS)
	if there {
		t.points[i] = p
		return
	}
	if t.passed++; t.passed < t.every {
		return
	}
	t.passed = 0
	if len(t.points) == maxTrail {
		for k := range maxTrail / 2 {
			t.points[k] = t.points[2*k]
		}
		clear(t.points[maxTrail/2:])
		t.points = t.points[:maxTrail/2]
		t.every = 2 * max(t.every, 1)
		i, _ = t.find(p.timeNS)
	}
	t.points = slices.Insert(t.points, i, p)
}

// forget takes out what is older than a time.
func (t *trail) forget(beforeNS int64) {
	i, _ := t.find(beforeNS)
	t.points = slices.Delete(t.points, 0, i)
}

// Trail says what a vehicle's drive was like so far: see the .proto file.
func (s *Server) Trail(ctx context.Context, req *leadlinev1.TrailRequest) (*leadlinev1.TrailResponse, error) {
	if req.GetVehicle() == "" {
		return nil, badField("vehicle", "vehicle is missing: give the name that it is fed under")
	}
	o, err := s.find(req.GetVehicle())
	if err == nil {
		err = o.noRoad()
	}
	if err != nil {
		return nil, err
	}
	points := make(chan []trailPoint, 1)
	if err := o.do(ctx, func() { points <- slices.Clone(o.trail.points) }); err != nil {
		return nil, err
	}
	out := &leadlinev1.TrailResponse{Drive: o.drive}
	for _, p := range <-points {
		m := &leadlinev1.TrailPoint{
			Time: wire.FromTime(sensor.Time(p.timeNS)), Status: statuses[p.status], Mean: wire.FromPosition(p.mean),
			Radius95M: p.radius95M, LogEvidence: p.logEvidence, Nuisances: nuisances(p.nuisances),
		}
		out.Points = append(out.Points, m)
	}
	return out, nil
}
