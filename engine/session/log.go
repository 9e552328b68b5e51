package session

import (
	"cmp"
	"slices"
	"strings"

	"leadline/engine/sensor"
)

// log holds the events that are not final yet, in order.
type log struct {
	events []sensor.Event
	// next is the index of the first event that is not processed.
	next int
	// latest is the greatest event time seen.
	latest sensor.Time
	// motion tells, by sensor, how far its increments reach and whether it
	// is known to measure motion.
	motion []coverage
}

// coverage is how far a motion sensor's increments reach.
type coverage struct {
	sensor string
	until  sensor.Time
}

func compareEvents(a, b sensor.Event) int {
	if c := cmp.Compare(a.Time, b.Time); c != 0 {
		return c
	}
	if c := strings.Compare(a.Sensor, b.Sensor); c != 0 {
		return c
	}
	return cmp.Compare(a.Number, b.Number)
}

// find returns where an event belongs and whether one with the same time,
// sensor and number is there.
func (l *log) find(ev sensor.Event) (int, bool) {
	return slices.BinarySearchFunc(l.events, ev, compareEvents)
}

// insert puts an event at its place.
func (l *log) insert(i int, ev sensor.Event) {
	l.events = slices.Insert(l.events, i, ev)
	if i < l.next {
		l.next++
	}
	l.latest = max(l.latest, ev.Time)
	if sensor.IsMotion(ev.Measurement.Kind()) {
		j, found := slices.BinarySearchFunc(l.motion, ev.Sensor, func(c coverage, name string) int { return strings.Compare(c.sensor, name) })
		if !found {
			l.motion = slices.Insert(l.motion, j, coverage{sensor: ev.Sensor})
		}
		l.motion[j].until = max(l.motion[j].until, ev.Time)
	}
}

// covered reports whether every motion sensor has reached a time, or hold has
// passed without it.
func (l *log) covered(t, hold sensor.Time) bool {
	if l.latest > t+hold {
		return true
	}
	for _, c := range l.motion {
		if c.until < t {
			return false
		}
	}
	return len(l.motion) > 0
}

// drop forgets events up to a time that no increment after it needs.
func (l *log) drop(before sensor.Time) {
	n := 0
	for n < l.next && l.events[n].Time < before {
		n++
	}
	// In large bites, so that the copying stays linear.
	if n > 256 && n > len(l.events)/2 {
		l.events = slices.Delete(l.events, 0, n)
		l.next -= n
	}
}

// group returns the end of the events that have the time of event i, and
// whether all of them are motion.
func (l *log) group(i int) (end int, motionOnly bool) {
	motionOnly = true
	for end = i; end < len(l.events) && l.events[end].Time == l.events[i].Time; end++ {
		motionOnly = motionOnly && sensor.IsMotion(l.events[end].Measurement.Kind())
	}
	return end, motionOnly
}
