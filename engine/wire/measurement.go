package wire

import (
	"errors"
	"fmt"

	"google.golang.org/protobuf/types/known/timestamppb"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	leadlinev1 "leadline/proto/leadline/v1"
)

// ToEvent converts a measurement with its place in the order. An empty sensor
// becomes the kind's name. Values are not judged here: a sigma that is missing
// may be in the suite, so that is for Measurement.Check, later.
func ToEvent(m *leadlinev1.SensorMeasurement) (sensor.Event, error) {
	at, err := Time(m.GetTime())
	if err != nil {
		return sensor.Event{}, fmt.Errorf("time: %w", err)
	}
	if err := Name("sensor", m.GetSensor()); err != nil {
		return sensor.Event{}, err
	}
	z, err := ToMeasurement(m.GetMeasurement())
	if err != nil {
		return sensor.Event{}, err
	}
	ev := sensor.Event{Time: at, Sensor: m.GetSensor(), Number: m.GetNumber(), Measurement: z}
	if ev.Sensor == "" {
		ev.Sensor = z.Kind()
	}
	return ev, nil
}

// FromEvent is the inverse of ToEvent.
func FromEvent(ev sensor.Event) *leadlinev1.SensorMeasurement {
	return &leadlinev1.SensorMeasurement{
		Time: FromTime(ev.Time), Sensor: ev.Sensor, Number: ev.Number,
		Measurement: FromMeasurement(ev.Measurement),
	}
}

// ToMeasurement converts a measurement and reports what its kind must hold and
// does not.
func ToMeasurement(m *leadlinev1.Measurement) (sensor.Measurement, error) {
	z, kind, err := measurement(m)
	switch {
	case kind == "":
		return nil, err
	case err != nil:
		return nil, fmt.Errorf("%s: %w", kind, err)
	}
	return z, nil
}

// measurement converts the kinds. The kind is empty if there is none.
func measurement(m *leadlinev1.Measurement) (z sensor.Measurement, kind string, err error) {
	switch k := m.GetKind().(type) {
	case *leadlinev1.Measurement_Travel:
		v := sensor.Travel{DistanceM: k.Travel.GetDistanceM(), SigmaM: k.Travel.GetSigmaM()}
		v.Since, err = since(k.Travel.GetSince())
		return v, v.Kind(), err
	case *leadlinev1.Measurement_Turn:
		v := sensor.Turn{AngleRad: geo.Rad(k.Turn.GetAngleDeg()), SigmaRad: geo.Rad(k.Turn.GetSigmaDeg())}
		v.Since, err = since(k.Turn.GetSince())
		return v, v.Kind(), err
	case *leadlinev1.Measurement_Displacement:
		d, c := k.Displacement, k.Displacement.GetCovariance()
		v := sensor.Displacement{
			EastM: d.GetEastM(), NorthM: d.GetNorthM(),
			CovM2: [3]float64{c.GetEastM2(), c.GetEastNorthM2(), c.GetNorthM2()},
		}
		if v.Since, err = since(d.GetSince()); err == nil && c == nil {
			err = errors.New("covariance is missing: give east_m2, east_north_m2 and north_m2")
		}
		return v, v.Kind(), err
	case *leadlinev1.Measurement_BodyDisplacement:
		d := k.BodyDisplacement
		v := sensor.BodyDisplacement{
			ForwardM: d.GetForwardM(), RightM: d.GetRightM(), TurnRad: geo.Rad(d.GetTurnDeg()),
			SigmaForwardM: d.GetSigmaForwardM(), SigmaRightM: d.GetSigmaRightM(), SigmaTurnRad: geo.Rad(d.GetSigmaTurnDeg()),
		}
		v.Since, err = since(d.GetSince())
		return v, v.Kind(), err
	case *leadlinev1.Measurement_Speed:
		s := k.Speed
		v := sensor.Speed{
			MPS: s.GetMps(), SigmaMPS: s.GetSigmaMps(),
			HasCourse: s.CourseDeg != nil, CourseRad: geo.Rad(s.GetCourseDeg()),
		}
		return v, v.Kind(), nil
	case *leadlinev1.Measurement_Heading:
		v := sensor.HeadingFix{HeadingRad: geo.Rad(k.Heading.GetDeg()), SigmaRad: geo.Rad(k.Heading.GetSigmaDeg())}
		return v, v.Kind(), nil
	case *leadlinev1.Measurement_Clearance:
		c := k.Clearance
		v := sensor.Clearance{ClearanceM: c.GetClearanceM(), AltitudeM: c.GetAltitudeM(), SigmaM: c.GetSigmaM()}
		return v, v.Kind(), nil
	case *leadlinev1.Measurement_Sounding:
		v := sounding(k.Sounding)
		return v, v.Kind(), nil
	case *leadlinev1.Measurement_Barometer:
		v := sensor.Barometer{SigmaM: k.Barometer.GetSigmaM()}
		switch r := k.Barometer.GetReading().(type) {
		case *leadlinev1.Barometer_AltitudeM:
			v.AltitudeM = r.AltitudeM
		case *leadlinev1.Barometer_PressureHpa:
			v.HasPressure, v.PressureHPa = true, r.PressureHpa
		default:
			err = errors.New("no reading: give altitude_m or pressure_hpa")
		}
		return v, v.Kind(), err
	case *leadlinev1.Measurement_Range:
		v := sensor.Range{RangeM: k.Range.GetRangeM(), SigmaM: k.Range.GetSigmaM()}
		v.Beacon, err = beacon(k.Range.GetBeacon())
		return v, v.Kind(), err
	case *leadlinev1.Measurement_Bearing:
		b := k.Bearing
		v := sensor.Bearing{BearingRad: geo.Rad(b.GetBearingDeg()), SigmaRad: geo.Rad(b.GetSigmaDeg())}
		v.Beacon, err = beacon(b.GetBeacon())
		return v, v.Kind(), err
	case *leadlinev1.Measurement_AcousticBearing:
		b := k.AcousticBearing
		v := sensor.AcousticBearing{Post: b.GetPost(), BearingRad: geo.Rad(b.GetBearingDeg()), SigmaRad: geo.Rad(b.GetSigmaDeg())}
		if v.Post == "" {
			return v, v.Kind(), errors.New("post is missing: give the name of a post in the suite")
		}
		return v, v.Kind(), Name("post", v.Post)
	case *leadlinev1.Measurement_Fix:
		v := sensor.Fix{SigmaM: k.Fix.GetSigmaM()}
		v.Position, err = position(k.Fix, k.Fix.Lon != nil, k.Fix.Lat != nil)
		return v, v.Kind(), err
	case *leadlinev1.Measurement_Sighting:
		v, err := sighting(k.Sighting)
		return v, v.Kind(), err
	case *leadlinev1.Measurement_Standstill:
		return sensor.Standstill{}, sensor.Standstill{}.Kind(), nil
	}
	return nil, "", errors.New("measurement has no kind: set exactly one, such as travel or heading")
}

func since(ts *timestamppb.Timestamp) (sensor.Time, error) {
	t, err := Time(ts)
	if err != nil {
		return 0, fmt.Errorf("since: %w", err)
	}
	return t, nil
}

func sounding(m *leadlinev1.Sounding) sensor.Sounding {
	v := sensor.Sounding{
		DepthBelowTransducerM: m.GetDepthBelowTransducerM(),
		TransducerDepthM:      m.GetTransducerDepthM(), SigmaM: m.GetSigmaM(),
	}
	for _, b := range m.GetBeams() {
		v.Beams = append(v.Beams, sensor.Beam{
			ForwardM: b.GetForwardM(), RightM: b.GetRightM(),
			DepthBelowTransducerM: b.GetDepthBelowTransducerM(), SigmaM: b.GetSigmaM(),
		})
	}
	return v
}

func beacon(m *leadlinev1.Beacon) (sensor.Beacon, error) {
	switch p := m.GetPlace().(type) {
	case *leadlinev1.Beacon_Id:
		if p.Id == "" {
			break
		}
		if err := Name("id", p.Id); err != nil {
			return sensor.Beacon{}, fmt.Errorf("beacon: %w", err)
		}
		return sensor.Beacon{ID: p.Id}, nil
	case *leadlinev1.Beacon_Position:
		at, err := Position(p.Position)
		if err != nil {
			return sensor.Beacon{}, fmt.Errorf("beacon: position: %w", err)
		}
		return sensor.Beacon{Position: at}, nil
	}
	return sensor.Beacon{}, errors.New("beacon is missing: give an id of the suite or a position")
}

func sighting(m *leadlinev1.Sighting) (sensor.Sighting, error) {
	v := sensor.Sighting{Mistaken: m.GetMistaken(), Who: m.GetWho()}
	if err := Name("who", v.Who); err != nil {
		return v, err
	}
	switch p := m.GetPlace().(type) {
	case *leadlinev1.Sighting_Area:
		area, err := Polygon(p.Area)
		if err != nil {
			return v, fmt.Errorf("area: %w", err)
		}
		v.Area = area
		return v, nil
	case *leadlinev1.Sighting_Road:
		if p.Road != "" {
			v.Road = p.Road
			return v, Name("road", p.Road)
		}
	}
	return v, errors.New("place is missing: give an area or the name of a road")
}
