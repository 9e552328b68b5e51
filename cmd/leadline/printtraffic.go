package main

import (
	"time"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/traffic"
)

// trafficPicture is a picture as JSON.
type trafficPicture struct {
	Time     string           `json:"time"`
	Vehicles []trafficVehicle `json:"vehicles"`
	// Expected is how many vehicles are expected on the road, those included that
	// may be there and are not listed.
	Expected float64       `json:"expected"`
	Lines    []trafficLine `json:"lines"`
	// Intensity is expected vehicles a kilometre, by part of the road.
	Intensity []float64 `json:"intensity_per_km,omitempty"`
}

type trafficVehicle struct {
	Label          uint64  `json:"label"`
	Existence      float64 `json:"existence"`
	PositionM      float64 `json:"position_m"`
	PositionSigmaM float64 `json:"position_sigma_m"`
	SpeedMPS       float64 `json:"speed_mps"`
	SpeedSigmaMPS  float64 `json:"speed_sigma_mps"`
	Forward        float64 `json:"forward"`
	Lon            float64 `json:"lon"`
	Lat            float64 `json:"lat"`
	HeadingDeg     float64 `json:"heading_deg"`
}

type trafficLine struct {
	Name     string            `json:"name"`
	AtM      float64           `json:"at_m"`
	Forward  int               `json:"forward"`
	Backward int               `json:"backward"`
	Recent   []trafficCrossing `json:"recent"`
}

type trafficCrossing struct {
	Time      string  `json:"time"`
	Label     uint64  `json:"label"`
	Forward   bool    `json:"forward"`
	Existence float64 `json:"existence"`
}

// mostPrintedCrossings are the latest of a line that a picture has.
const mostPrintedCrossings = 10

func fromPicture(f *traffic.Filter, suite *sensor.Suite, least float64, parts int) trafficPicture {
	p := f.Picture(least)
	m := trafficPicture{Time: timeText(p.Time), Vehicles: []trafficVehicle{}, Expected: p.Expected, Lines: []trafficLine{}}
	for _, v := range p.Vehicles {
		lon, lat := f.Road().LonLat(v.At).Degrees()
		m.Vehicles = append(m.Vehicles, trafficVehicle{
			Label: v.Label, Existence: v.Existence, PositionM: v.PositionM, PositionSigmaM: v.PositionSigmaM,
			SpeedMPS: v.SpeedMPS, SpeedSigmaMPS: v.SpeedSigmaMPS, Forward: v.Forward, Lon: lon, Lat: lat,
			HeadingDeg: geo.Deg(f.Road().TrueHeading(v.At, v.HeadingRad)),
		})
	}
	for i, l := range p.Lines {
		line := trafficLine{Name: suite.Traffic.Lines[i].Name, AtM: l.AtM, Forward: l.Forward, Backward: l.Backward, Recent: []trafficCrossing{}}
		for _, c := range l.Recent[max(0, len(l.Recent)-mostPrintedCrossings):] {
			line.Recent = append(line.Recent, trafficCrossing{timeText(c.Time), c.Label, c.Forward, c.Existence})
		}
		m.Lines = append(m.Lines, line)
	}
	if parts > 0 {
		for _, x := range f.Intensity(parts) {
			m.Intensity = append(m.Intensity, 1000*x)
		}
	}
	return m
}

func timeText(t sensor.Time) string { return time.Unix(0, int64(t)).UTC().Format(time.RFC3339Nano) }
