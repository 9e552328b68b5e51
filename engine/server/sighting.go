package server

import (
	"context"

	"google.golang.org/protobuf/proto"

	"leadline/engine/sensor"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// AddSighting enters what somebody says of a vehicle: see the .proto file.
func (s *Server) AddSighting(ctx context.Context, req *leadlinev1.AddSightingRequest) (*leadlinev1.AddSightingResponse, error) {
	if req.GetVehicle() == "" {
		return nil, badField("vehicle", "vehicle is missing: give the name that it is fed under")
	}
	if req.GetSighting() == nil {
		return nil, badField("sighting", "sighting is missing: say where the vehicle was seen")
	}
	sighting := proto.CloneOf(req.GetSighting())
	sighting.Who = by(ctx, sighting.GetWho())
	m := &leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Sighting{Sighting: sighting}}
	z, err := wire.ToMeasurement(m)
	if err == nil {
		err = z.Check(0)
	}
	if err != nil {
		return nil, badField("sighting", "sighting: %v", err)
	}
	if ts := req.GetTime(); ts != nil {
		if _, err := wire.Time(ts); err != nil {
			return nil, badField("time", "time: %v", err)
		}
	}
	o, err := s.find(req.GetVehicle())
	if err == nil {
		err = o.noRoad()
	}
	if err != nil {
		return nil, err
	}
	if d := req.GetDrive(); d != "" && d != o.drive {
		return nil, refuse(leadlinev1.Reason_REASON_OTHER_DRIVE, o.about(), "vehicle %q is on drive %q, not %q: name that one, or none", o.vehicle, o.drive, clip(d))
	}
	if err := s.mayAdd(o); err != nil {
		return nil, err
	}
	latest := func() (p *leadlinev1.Posterior, err error) {
		done := make(chan *leadlinev1.Posterior, 1)
		err = o.do(ctx, func() {
			if p := o.sess.Latest(); p != nil {
				done <- o.message(p)
				return
			}
			done <- nil
		})
		if err != nil {
			return nil, err
		}
		return <-done, nil
	}
	before, err := latest()
	if err != nil {
		return nil, err
	}
	ts := req.GetTime()
	if ts == nil {
		if ts = before.GetTime(); ts == nil {
			return nil, refuse(leadlinev1.Reason_REASON_NO_POSTERIOR, o.about(), "vehicle %q has no posterior yet: give the time of the sighting", o.vehicle)
		}
	}
	entered := &leadlinev1.SensorMeasurement{
		Time: ts, Sensor: sensor.KindSighting, Measurement: m,
		Number: uint64(s.cfg.Now().UnixNano()), // no other has it
	}
	refused, err := o.addOne(ctx, entered)
	if err != nil {
		return nil, err
	}
	after, err := latest()
	if err != nil {
		return nil, err
	}
	s.cfg.Log.Info("sighting entered", "vehicle", o.vehicle, "drive", o.drive, "who", clip(sighting.GetWho()), "drive_time", ts.AsTime(), "refused", refused.GetDetail())
	return &leadlinev1.AddSightingResponse{Measurement: entered, Refusal: refused, Before: before, After: after}, nil
}
