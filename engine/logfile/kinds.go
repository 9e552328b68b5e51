package logfile

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// fieldKind says what a field of a measurement takes.
type fieldKind struct {
	name string
	of   dimension
	role role
}

// role is what a field is for.
type role int

const (
	value     role = iota // a measurement needs it
	choice                // one of those of its measurement is needed
	option                // 0 where it is left out
	sigma                 // left to the suite where it is left out or 0
	increment             // a value of what happened since the time before
	text                  // a name; a choice
)

// kindTable lists the fields of the kinds of measurement, with the names and
// units of drive files; truth is one of them here. Two things that a drive
// file nests stand flat: sigma_m of a displacement is that along each axis, and
// a beacon has an id, or lon and lat.
var kindTable = map[string][]fieldKind{
	sensor.KindTravel: {{"distance_m", length, increment}, {"sigma_m", length, sigma}},
	sensor.KindTurn:   {{"angle_deg", angle, increment}, {"sigma_deg", angle, sigma}},
	sensor.KindDisplacement: {
		{"east_m", length, increment},
		{"north_m", length, increment},
		{"sigma_m", length, sigma},
		{"east_m2", area, sigma},
		{"east_north_m2", area, option},
		{"north_m2", area, sigma},
	},
	sensor.KindBodyDisplacement: {
		{"forward_m", length, increment},
		{"right_m", length, increment},
		{"turn_deg", angle, increment},
		{"sigma_forward_m", length, sigma},
		{"sigma_right_m", length, sigma},
		{"sigma_turn_deg", angle, sigma},
	},
	sensor.KindSpeed:     {{"mps", speed, value}, {"sigma_mps", speed, sigma}, {"course_deg", angle, option}},
	sensor.KindHeading:   {{"deg", angle, value}, {"sigma_deg", angle, sigma}},
	sensor.KindClearance: {{"clearance_m", length, value}, {"altitude_m", length, value}, {"sigma_m", length, sigma}},
	sensor.KindSounding: {
		{"depth_below_transducer_m", length, value},
		{"transducer_depth_m", length, option},
		{"sigma_m", length, sigma},
	},
	sensor.KindBarometer: {{"altitude_m", length, choice}, {"pressure_hpa", pressure, choice}, {"sigma_m", length, sigma}},
	sensor.KindRange: {
		{"range_m", length, value},
		{"sigma_m", length, sigma},
		{"beacon", plain, text},
		{"lon", angle, choice},
		{"lat", angle, choice},
	},
	sensor.KindBearing: {
		{"bearing_deg", angle, value},
		{"sigma_deg", angle, sigma},
		{"beacon", plain, text},
		{"lon", angle, choice},
		{"lat", angle, choice},
	},
	sensor.KindAcousticBearing: {{"bearing_deg", angle, value}, {"sigma_deg", angle, sigma}, {"post", plain, text}},
	sensor.KindFix:             {{"lon", angle, value}, {"lat", angle, value}, {"sigma_m", length, sigma}},
	sensor.KindSighting:        {{"road", plain, text}, {"mistaken", plain, option}, {"who", plain, option}},
	sensor.KindStandstill:      {},
	kindTruth:                  {{"lon", angle, value}, {"lat", angle, value}, {"height_m", length, option}, {"sigma_m", length, option}},
}

const kindTruth = "truth"

// textFields are those that hold a name and no number.
var textFields = map[string]bool{"beacon": true, "post": true, "road": true, "who": true}

// cells are what a row, or a sentence, holds for one measurement, by field.
type cells struct {
	num  map[string]float64
	name map[string]string
}

func (c *cells) has(field string) bool {
	_, ok := c.num[field]
	return ok
}

// given returns a sigma, or the one with which to check a measurement that
// leaves its sigma to the suite.
func (c *cells) given(field string, check bool) float64 {
	v := c.num[field]
	if v == 0 && check {
		return 1
	}
	return v
}

// measurement makes a measurement of a kind. It is checked as it will be with
// whatever sigma the suite gives.
func measurement(kind string, c *cells, since, at sensor.Time) (sensor.Measurement, error) {
	if err := usable(build(kind, c, since, true), at); err != nil {
		return nil, err
	}
	return build(kind, c, since, false), nil
}

func usable(m sensor.Measurement, at sensor.Time) error {
	if at < 0 || at > lastTime {
		return errTime
	}
	return m.Check(at)
}

// build makes the value; check puts a sigma of 1 where none is given.
func build(kind string, c *cells, since sensor.Time, check bool) sensor.Measurement {
	n := c.num
	sig := func(field string) float64 { return c.given(field, check) }
	beacon := func() sensor.Beacon {
		if id := c.name["beacon"]; id != "" {
			return sensor.Beacon{ID: id}
		}
		return sensor.Beacon{Position: geo.FromDegrees(n["lon"], n["lat"])}
	}
	switch kind {
	case sensor.KindTravel:
		return sensor.Travel{Since: since, DistanceM: n["distance_m"], SigmaM: sig("sigma_m")}
	case sensor.KindTurn:
		return sensor.Turn{Since: since, AngleRad: geo.Rad(n["angle_deg"]), SigmaRad: geo.Rad(sig("sigma_deg"))}
	case sensor.KindDisplacement:
		m := sensor.Displacement{Since: since, EastM: n["east_m"], NorthM: n["north_m"]}
		switch s := sig("sigma_m"); {
		case n["east_m2"] != 0 || n["north_m2"] != 0:
			m.CovM2 = [3]float64{n["east_m2"], n["east_north_m2"], n["north_m2"]}
		case s != 0:
			m.CovM2 = [3]float64{s * s, 0, s * s}
		}
		return m
	case sensor.KindBodyDisplacement:
		return sensor.BodyDisplacement{
			Since: since, ForwardM: n["forward_m"], RightM: n["right_m"], TurnRad: geo.Rad(n["turn_deg"]),
			SigmaForwardM: sig("sigma_forward_m"), SigmaRightM: sig("sigma_right_m"), SigmaTurnRad: geo.Rad(sig("sigma_turn_deg")),
		}
	case sensor.KindSpeed:
		return sensor.Speed{MPS: n["mps"], SigmaMPS: sig("sigma_mps"), HasCourse: c.has("course_deg"), CourseRad: geo.Rad(n["course_deg"])}
	case sensor.KindHeading:
		return sensor.HeadingFix{HeadingRad: geo.Rad(n["deg"]), SigmaRad: geo.Rad(sig("sigma_deg"))}
	case sensor.KindClearance:
		return sensor.Clearance{ClearanceM: n["clearance_m"], AltitudeM: n["altitude_m"], SigmaM: sig("sigma_m")}
	case sensor.KindSounding:
		return sensor.Sounding{DepthBelowTransducerM: n["depth_below_transducer_m"], TransducerDepthM: n["transducer_depth_m"], SigmaM: sig("sigma_m")}
	case sensor.KindBarometer:
		return sensor.Barometer{AltitudeM: n["altitude_m"], HasPressure: c.has("pressure_hpa"), PressureHPa: n["pressure_hpa"], SigmaM: sig("sigma_m")}
	case sensor.KindRange:
		return sensor.Range{Beacon: beacon(), RangeM: n["range_m"], SigmaM: sig("sigma_m")}
	case sensor.KindBearing:
		return sensor.Bearing{Beacon: beacon(), BearingRad: geo.Rad(n["bearing_deg"]), SigmaRad: geo.Rad(sig("sigma_deg"))}
	case sensor.KindAcousticBearing:
		return sensor.AcousticBearing{Post: c.name["post"], BearingRad: geo.Rad(n["bearing_deg"]), SigmaRad: geo.Rad(sig("sigma_deg"))}
	case sensor.KindFix:
		return sensor.Fix{Position: geo.FromDegrees(n["lon"], n["lat"]), SigmaM: sig("sigma_m")}
	case sensor.KindSighting:
		return sensor.Sighting{Road: c.name["road"], Mistaken: n["mistaken"], Who: c.name["who"]}
	case sensor.KindStandstill:
		return sensor.Standstill{}
	}
	panic("logfile: no measurement of kind " + kind)
}

// truth makes a truth.
func truth(c *cells, at sensor.Time) (*Truth, error) {
	t := &Truth{
		Time: at, Position: geo.FromDegrees(c.num["lon"], c.num["lat"]),
		HasHeight: c.has("height_m"), HeightM: c.num["height_m"], SigmaM: c.num["sigma_m"],
	}
	err := t.Position.Check()
	switch {
	case err != nil:
	case at < 0 || at > lastTime:
		err = errTime
	case !(t.SigmaM >= 0) || math.IsInf(t.SigmaM, 0) || !geo.Finite(t.HeightM):
		err = errTruth
	}
	return t, err
}
