package wire

import (
	"fmt"

	"google.golang.org/protobuf/proto"

	"leadline/engine/sensor"
	leadlinev1 "leadline/proto/leadline/v1"
)

// FromMeasurement is the inverse of ToMeasurement. It panics on a kind that
// the API does not have.
func FromMeasurement(z sensor.Measurement) *leadlinev1.Measurement {
	m := &leadlinev1.Measurement{}
	switch v := z.(type) {
	case sensor.Travel:
		m.Kind = &leadlinev1.Measurement_Travel{Travel: &leadlinev1.Travel{
			Since: FromTime(v.Since), DistanceM: v.DistanceM, SigmaM: v.SigmaM,
		}}
	case sensor.Turn:
		m.Kind = &leadlinev1.Measurement_Turn{Turn: &leadlinev1.Turn{
			Since: FromTime(v.Since), AngleDeg: degrees(v.AngleRad), SigmaDeg: degrees(v.SigmaRad),
		}}
	case sensor.Displacement:
		m.Kind = &leadlinev1.Measurement_Displacement{Displacement: &leadlinev1.Displacement{
			Since: FromTime(v.Since), EastM: v.EastM, NorthM: v.NorthM,
			Covariance: &leadlinev1.Covariance{EastM2: v.CovM2[0], EastNorthM2: v.CovM2[1], NorthM2: v.CovM2[2]},
		}}
	case sensor.BodyDisplacement:
		m.Kind = &leadlinev1.Measurement_BodyDisplacement{BodyDisplacement: &leadlinev1.BodyDisplacement{
			Since: FromTime(v.Since), ForwardM: v.ForwardM, RightM: v.RightM, TurnDeg: degrees(v.TurnRad),
			SigmaForwardM: v.SigmaForwardM, SigmaRightM: v.SigmaRightM, SigmaTurnDeg: degrees(v.SigmaTurnRad),
		}}
	case sensor.Speed:
		s := &leadlinev1.Speed{Mps: v.MPS, SigmaMps: v.SigmaMPS}
		if v.HasCourse {
			s.CourseDeg = proto.Float64(degrees(v.CourseRad))
		}
		m.Kind = &leadlinev1.Measurement_Speed{Speed: s}
	case sensor.HeadingFix:
		m.Kind = &leadlinev1.Measurement_Heading{Heading: &leadlinev1.Heading{
			Deg: degrees(v.HeadingRad), SigmaDeg: degrees(v.SigmaRad),
		}}
	case sensor.Clearance:
		m.Kind = &leadlinev1.Measurement_Clearance{Clearance: &leadlinev1.Clearance{
			ClearanceM: v.ClearanceM, AltitudeM: v.AltitudeM, SigmaM: v.SigmaM,
		}}
	case sensor.Sounding:
		s := &leadlinev1.Sounding{
			DepthBelowTransducerM: v.DepthBelowTransducerM, TransducerDepthM: v.TransducerDepthM, SigmaM: v.SigmaM,
		}
		for _, b := range v.Beams {
			s.Beams = append(s.Beams, &leadlinev1.Beam{
				ForwardM: b.ForwardM, RightM: b.RightM, DepthBelowTransducerM: b.DepthBelowTransducerM, SigmaM: b.SigmaM,
			})
		}
		m.Kind = &leadlinev1.Measurement_Sounding{Sounding: s}
	case sensor.Barometer:
		b := &leadlinev1.Barometer{SigmaM: v.SigmaM, Reading: &leadlinev1.Barometer_AltitudeM{AltitudeM: v.AltitudeM}}
		if v.HasPressure {
			b.Reading = &leadlinev1.Barometer_PressureHpa{PressureHpa: v.PressureHPa}
		}
		m.Kind = &leadlinev1.Measurement_Barometer{Barometer: b}
	case sensor.Range:
		m.Kind = &leadlinev1.Measurement_Range{Range: &leadlinev1.Range{
			Beacon: fromBeacon(v.Beacon), RangeM: v.RangeM, SigmaM: v.SigmaM,
		}}
	case sensor.Bearing:
		m.Kind = &leadlinev1.Measurement_Bearing{Bearing: &leadlinev1.Bearing{
			Beacon: fromBeacon(v.Beacon), BearingDeg: degrees(v.BearingRad), SigmaDeg: degrees(v.SigmaRad),
		}}
	case sensor.AcousticBearing:
		m.Kind = &leadlinev1.Measurement_AcousticBearing{AcousticBearing: &leadlinev1.AcousticBearing{
			Post: v.Post, BearingDeg: degrees(v.BearingRad), SigmaDeg: degrees(v.SigmaRad),
		}}
	case sensor.Fix:
		m.Kind = &leadlinev1.Measurement_Fix{Fix: &leadlinev1.Fix{
			Lon: proto.Float64(degrees(v.Position.Lon)), Lat: proto.Float64(degrees(v.Position.Lat)), SigmaM: v.SigmaM,
		}}
	case sensor.Sighting:
		s := &leadlinev1.Sighting{Mistaken: v.Mistaken, Who: v.Who, Place: &leadlinev1.Sighting_Road{Road: v.Road}}
		if len(v.Area) > 0 {
			s.Place = &leadlinev1.Sighting_Area{Area: FromPolygon(v.Area)}
		}
		m.Kind = &leadlinev1.Measurement_Sighting{Sighting: s}
	case sensor.Standstill:
		m.Kind = &leadlinev1.Measurement_Standstill{Standstill: &leadlinev1.Standstill{}}
	default:
		panic(fmt.Sprintf("wire: no message for a measurement of type %T", z))
	}
	return m
}

func fromBeacon(b sensor.Beacon) *leadlinev1.Beacon {
	if b.ID != "" {
		return &leadlinev1.Beacon{Place: &leadlinev1.Beacon_Id{Id: b.ID}}
	}
	return &leadlinev1.Beacon{Place: &leadlinev1.Beacon_Position{Position: FromPosition(b.Position)}}
}
