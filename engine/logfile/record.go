package logfile

import (
	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// Record is one thing that a log says. Exactly one of the two is set.
type Record struct {
	Event *sensor.Event
	Truth *Truth
}

// Truth is where the vehicle was, for comparison alone.
type Truth struct {
	Time      sensor.Time
	Position  geo.LonLat
	HasHeight bool
	HeightM   float64
	SigmaM    float64 // along each axis; 0 if exact or unknown
}

// Emit takes records; its error ends the reading and is returned as it is.
type Emit func(Record) error
