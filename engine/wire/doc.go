// Package wire converts between the messages of the API and the values of the
// engine. It is the one place where degrees become radians and where a message
// is checked for what it must hold; drive files and the server both rest on
// it, so that a measurement is the same bits whichever way it came.
//
// Every function that takes a message returns an error that says which field
// is wrong and what to do, and keeps nothing of the message but its strings.
package wire

import (
	"fmt"
	"math"
	"time"

	"google.golang.org/protobuf/types/known/timestamppb"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// Limits of what one message may hold, so that a measurement in a queue stays
// small: an area of MaxPoints takes 240 kB.
const (
	MaxName   = 256    // bytes of a name: vehicle, map, suite, sensor, beacon, road, who
	MaxPoints = 10_000 // points of an area, all rings together
)

// Time converts a time. It must be present and lie between 1678 and 2262,
// which is what nanoseconds in 64 bits can count.
func Time(ts *timestamppb.Timestamp) (sensor.Time, error) {
	if ts == nil {
		return 0, fmt.Errorf("missing: give it as RFC 3339, like 2030-05-01T12:00:00.25Z")
	}
	if err := ts.CheckValid(); err != nil {
		return 0, fmt.Errorf("seconds %d, nanos %d is not a time: give nanos from 0 to 999999999", ts.GetSeconds(), ts.GetNanos())
	}
	// One second within the ends, so that the nanoseconds cannot overflow.
	const most = math.MaxInt64/1_000_000_000 - 1
	if s := ts.GetSeconds(); s > most || s < -most {
		return 0, fmt.Errorf("%s is out of range: give a year from 1678 to 2261", ts.AsTime().Format(time.RFC3339))
	}
	return sensor.Time(ts.GetSeconds()*1_000_000_000 + int64(ts.GetNanos())), nil
}

// FromTime is the inverse of Time.
func FromTime(t sensor.Time) *timestamppb.Timestamp {
	return timestamppb.New(time.Unix(0, int64(t)))
}

// Name checks the length of a name, which may be empty.
func Name(field, s string) error {
	if len(s) > MaxName {
		return fmt.Errorf("%s is %d bytes long: at most %d", field, len(s), MaxName)
	}
	return nil
}

// degrees returns an angle in degrees that geo.Rad turns into exactly rad,
// where there is one, and otherwise the nearest: what was read is written so
// that it is read the same. The two conversions round four times, half a unit
// in the last place each, so it lies at most two units from geo.Deg(rad).
func degrees(rad float64) float64 {
	d := geo.Deg(rad)
	if geo.Rad(d) == rad {
		return d
	}
	up, down := d, d
	for range 2 {
		up, down = math.Nextafter(up, math.Inf(1)), math.Nextafter(down, math.Inf(-1))
		if geo.Rad(up) == rad {
			return up
		}
		if geo.Rad(down) == rad {
			return down
		}
	}
	return d
}
