// Package drivefile reads and writes drive files: recorded runs of a vehicle,
// NAME.drive.jsonl.
//
// A drive file is JSON Lines: one DriveRecord of the API a line, as protojson
// with the proto's field names. The first line is the header; measurements
// and, where it is known, truth follow in any order of time:
//
//	{"time":"2030-05-01T12:00:00Z","header":{"vehicle":"van","map":"town","start":{"anywhere":{}}}}
//	{"time":"2030-05-01T12:00:01Z","sensor":"odo","number":17,"measurement":{"travel":{…}}}
//	{"time":"2030-05-01T12:00:01Z","truth":{"lon":1.52,"lat":42.51,"sigma_m":0.5}}
//
// The sensor defaults to the measurement's kind, the number to the line's own,
// counted from 1. Time is RFC 3339, to the nanosecond. Blank lines are
// skipped; an unknown key is an error, and so is a line over MaxLine bytes.
package drivefile

import (
	"leadline/engine/sensor"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Suffix ends the names of drive files.
const Suffix = ".drive.jsonl"

// MaxLine is the longest line in bytes, enough for an area of wire.MaxPoints
// points with 17 digits a number.
const MaxLine = 1 << 20

// The parts of a record, as the engine has them.
type (
	Header = wire.Header
	Start  = wire.Start
	Truth  = wire.Truth
)

// Record is one line of a drive file. Exactly one of Header, Event and Truth
// is set.
type Record struct {
	Line   int // 1 is the first; 0 in a record that was not read from a file
	Time   sensor.Time
	Header *Header
	Event  *sensor.Event
	Truth  *Truth
	// Message is what was read, its defaults filled in. It is for sending on;
	// Write does not look at it.
	Message *leadlinev1.DriveRecord
}
