package sensor

import (
	"cmp"
	"strings"

	"leadline/engine/geo"
)

// Time is an instant in nanoseconds since the Unix epoch, UTC.
type Time int64

// Seconds returns the time from u to t in seconds.
func (t Time) Seconds(u Time) float64 { return float64(t-u) / 1e9 }

// Event is one measurement with its place in the order of all: by time, then
// sensor, then number.
type Event struct {
	Time        Time
	Sensor      string
	Number      uint64
	Measurement Measurement
}

// Compare orders events by time, then sensor, then number.
func (e Event) Compare(f Event) int {
	if c := cmp.Compare(e.Time, f.Time); c != 0 {
		return c
	}
	if c := strings.Compare(e.Sensor, f.Sensor); c != 0 {
		return c
	}
	return cmp.Compare(e.Number, f.Number)
}

// Measurement is one of the kinds of this package. Values are SI and radians;
// directions are clockwise from true north.
type Measurement interface {
	// Kind is the name in the API and in drive files.
	Kind() string
	// Check lists what no filter could use: values that are not finite or
	// beyond anything on Earth, sigmas that are not positive, an increment
	// that does not end after it begins.
	Check(at Time) error
}

// The names of the kinds.
const (
	KindTravel           = "travel"
	KindTurn             = "turn"
	KindDisplacement     = "displacement"
	KindBodyDisplacement = "body_displacement"
	KindSpeed            = "speed"
	KindHeading          = "heading"
	KindClearance        = "clearance"
	KindSounding         = "sounding"
	KindBarometer        = "barometer"
	KindRange            = "range"
	KindBearing          = "bearing"
	KindAcousticBearing  = "acoustic_bearing"
	KindFix              = "fix"
	KindSighting         = "sighting"
	KindStandstill       = "standstill"
)

// Kinds lists the names of all kinds.
func Kinds() []string {
	return []string{
		KindTravel, KindTurn, KindDisplacement, KindBodyDisplacement, KindSpeed,
		KindHeading, KindClearance, KindSounding, KindBarometer, KindRange, KindBearing,
		KindAcousticBearing, KindFix, KindSighting, KindStandstill,
	}
}

// IsMotion reports whether a kind moves the belief; the others reweigh it.
func IsMotion(kind string) bool {
	switch kind {
	case KindTravel, KindTurn, KindDisplacement, KindBodyDisplacement, KindSpeed, KindStandstill:
		return true
	}
	return false
}

// Beacon is a known place, either by position or by an id that the suite
// resolves (Suite.Prepare).
type Beacon struct {
	ID       string
	Position geo.LonLat
}
