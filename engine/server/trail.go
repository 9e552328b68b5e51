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
	kept        *leadlinev1.TrailPoint // of a checkpoint: in place of the rest
}

// take adds what has been released, and removes what has been withdrawn.
func (t *trail) take(ps []*summary.Posterior, withdrawn []sensor.Time) {
	for _, p := range ps {
		t.add(trailPoint{p.TimeNS, p.Status, p.Mean, p.Radius95M, p.LogEvidence, p.Nuisances, nil})
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
	if d := req.GetDrive(); d != "" && (err != nil || o.drive != d) {
		return s.endedTrail(req.GetVehicle(), d)
	}
	if err == nil {
		err = o.noRoad()
	}
	if err != nil {
		return nil, err
	}
	s.mu.Lock()
	past := o.past
	s.mu.Unlock()
	if past != nil {
		return unpackTrail(past)
	}
	points := make(chan []trailPoint, 1)
	if err := o.do(ctx, func() { points <- slices.Clone(o.trail.points) }); err != nil {
		return nil, err
	}
	return o.trailOf(<-points), nil
}

// trailOf is a drive's past as it is told.
func (o *owner) trailOf(points []trailPoint) *leadlinev1.TrailResponse {
	out := &leadlinev1.TrailResponse{Drive: o.drive, Map: o.m.Name, MapFingerprint: o.m.fingerprint()}
	if p := o.latest.Load(); p != nil {
		out.AlertLimitM = p.AlertLimitM
	}
	for _, p := range points {
		m := p.kept
		if m == nil {
			m = &leadlinev1.TrailPoint{
				Time: wire.FromTime(sensor.Time(p.timeNS)), Status: statuses[p.status], Mean: wire.FromPosition(p.mean),
				Radius95M: p.radius95M, LogEvidence: p.logEvidence, Nuisances: nuisances(p.nuisances),
			}
		}
		out.Points = append(out.Points, m)
	}
	return out
}

// sparse is how many points a checkpoint holds of a drive that goes on.
const sparse = 64

// packTrailSoFar is what a drive was like so far, as a checkpoint holds it: whole once it has
// ended, else thinned. It runs on the owner's goroutine.
func (o *owner) packTrailSoFar() []byte {
	if o.ended || o.noRoad() != nil {
		return o.past
	}
	every := (len(o.trail.points) + sparse - 1) / sparse
	var points []trailPoint
	for i := 0; i < len(o.trail.points); i += every {
		points = append(points, o.trail.points[i])
	}
	return packTrail(o.trailOf(points))
}

// packPast is what a drive was like that has just ended, with its alarms; nil of a road's traffic.
// It runs on the owner's goroutine.
func (o *owner) packPast() []byte {
	if o.noRoad() != nil {
		return nil
	}
	m := o.trailOf(o.trail.points)
	m.Alarms = o.srv.alarms.of(o.vehicle, o.drive)
	return packTrail(m)
}

// restore goes on with what a checkpoint holds of a drive's past, thinned as far as that is.
func (t *trail) restore(packed []byte, posteriors uint64) error {
	m, err := unpackTrail(packed)
	if err != nil {
		return err
	}
	for _, p := range m.GetPoints() {
		t.points = append(t.points, trailPoint{timeNS: p.GetTime().AsTime().UnixNano(), kept: p})
	}
	if n := uint64(len(t.points)); n > 0 {
		t.every = int(posteriors / n)
	}
	return nil
}
