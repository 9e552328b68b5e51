package diagnose

import (
	"fmt"
	"slices"
	"strings"

	"leadline/engine/filter"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/replay"
)

// misplaced says that a drive was replayed on a map of the wrong kind: that of
// its measurements none can be used there. "" if that is not so.
func misplaced(res *replay.Result, events []sensor.Event, c session.Config) string {
	if res.Accepted > 0 || res.Refused == 0 {
		return ""
	}
	for _, r := range res.Refusals {
		if r.Reason != session.WrongSpace {
			return ""
		}
	}
	var kinds []string
	for _, ev := range events {
		if k := ev.Measurement.Kind(); !slices.Contains(kinds, k) {
			kinds = append(kinds, k)
		}
	}
	slices.Sort(kinds)
	all := strings.Join(kinds, ", ")
	if _, plane := c.Space.(filter.PlaneSpace); !plane {
		return fmt.Sprintf("all %d measurements are refused: this is a road map, which cannot use what the log holds (%s): give a height map with --map", res.Refused, all)
	}
	return fmt.Sprintf("all %d measurements are refused: this is a height map, and what the log holds (%s) needs roads, or a suite that estimates the heading: give the right map with --map, or a suite", res.Refused, all)
}

// unmeasured says that nothing measures how far the vehicle moves, "" if
// something does. No usual mistake explains what follows from that.
func unmeasured(events []sensor.Event) string {
	for _, ev := range events {
		switch ev.Measurement.(type) {
		case sensor.Travel, sensor.Displacement, sensor.BodyDisplacement, sensor.Speed:
			return ""
		}
	}
	if len(events) == 0 {
		return ""
	}
	return "nothing in the log measures distance, displacement or speed: between other measurements the vehicle may be anywhere that it could have reached"
}
