package session

import (
	"slices"
	"sort"
	"strings"

	"leadline/engine/sensor"
)

// log holds the events that are not final yet, in order.
type log struct {
	events []sensor.Event
	// next is the index of the first event that is not processed.
	next int
	// latest is the greatest event time seen, if heard any.
	latest sensor.Time
	heard  bool
	// sources are what has measured motion so far, by name.
	sources []source
	// spoke is when each sensor was last heard, by name.
	spoke []spoken
	// voices are all that has been heard so far, in order.
	voices []voice
}

// voice is what shares one error from one event to the next: a kind of a
// sensor, and of the bearings to several posts those of one.
type voice struct{ sensor, kind, post string }

func voiceOf(ev sensor.Event) voice {
	v := voice{sensor: ev.Sensor, kind: ev.Measurement.Kind()}
	if m, ok := ev.Measurement.(sensor.AcousticBearing); ok {
		v.post = m.Post
	}
	return v
}

func (v voice) compare(w voice) int {
	if c := strings.Compare(v.sensor, w.sensor); c != 0 {
		return c
	}
	if c := strings.Compare(v.kind, w.kind); c != 0 {
		return c
	}
	return strings.Compare(v.post, w.post)
}

// source is what one sensor says about the motion.
type source struct {
	name   string
	until  sensor.Time    // how far it reaches
	events []sensor.Event // by time and number, from the last before the log's on
}

// sourceName keeps apart the kinds of a sensor that no suite declares: one
// that a suite declares has only one.
func sourceName(ev sensor.Event, suite *sensor.Suite) string {
	for i := range suite.Sensors {
		if suite.Sensors[i].Name == ev.Sensor {
			return ev.Sensor
		}
	}
	return ev.Sensor + "\x00" + ev.Measurement.Kind()
}

// find returns where an event belongs and whether one with the same time,
// sensor and number is there.
func (l *log) find(ev sensor.Event) (int, bool) {
	return slices.BinarySearchFunc(l.events, ev, sensor.Event.Compare)
}

func (l *log) findSource(name string) (int, bool) {
	return slices.BinarySearchFunc(l.sources, name, func(s source, n string) int { return strings.Compare(s.name, n) })
}

// knows reports whether an event's voice has been heard.
func (l *log) knows(v voice) bool {
	_, found := slices.BinarySearchFunc(l.voices, v, voice.compare)
	return found
}

// insert puts an event at its place i.
func (l *log) insert(i int, ev sensor.Event, suite *sensor.Suite) {
	l.events = slices.Insert(l.events, i, ev)
	if i < l.next {
		l.next++
	}
	if !l.heard || ev.Time > l.latest {
		l.heard, l.latest = true, ev.Time
	}
	l.hear(ev)
	v := voiceOf(ev)
	if j, found := slices.BinarySearchFunc(l.voices, v, voice.compare); !found {
		l.voices = slices.Insert(l.voices, j, v)
	}
	if !sensor.IsMotion(v.kind) {
		return
	}
	ev.Sensor = sourceName(ev, suite)
	j, found := l.findSource(ev.Sensor)
	if !found {
		l.sources = slices.Insert(l.sources, j, source{name: ev.Sensor, until: ev.Time})
	}
	src := &l.sources[j]
	src.until = max(src.until, ev.Time)
	k, _ := slices.BinarySearchFunc(src.events, ev, sensor.Event.Compare)
	src.events = slices.Insert(src.events, k, ev)
}

// after is the index of a source's first event after a time.
func (s *source) after(t sensor.Time) int {
	return sort.Search(len(s.events), func(i int) bool { return s.events[i].Time > t })
}

// before returns the time of the event before the i-th; false for the first.
func (s *source) before(i int) (sensor.Time, bool) {
	if i == 0 {
		return 0, false
	}
	return s.events[i-1].Time, true
}

// covered reports whether everything that measures motion has reached a time,
// or hold has passed without it. Standstills are not waited for: nobody knows
// when the next one is due.
func (l *log) covered(t, hold sensor.Time) bool {
	if l.latest > t+hold {
		return true
	}
	waited := false
	for i := range l.sources {
		s := &l.sources[i]
		if _, still := s.events[len(s.events)-1].Measurement.(sensor.Standstill); still {
			continue
		}
		if s.until < t {
			return false
		}
		waited = true
	}
	return waited
}

// drop forgets what nothing after a time needs: in large bites, so that the
// copying stays linear, or all of it. keep sees the events that go.
func (l *log) drop(t sensor.Time, all bool, keep func([]sensor.Event)) {
	n := sort.Search(l.next, func(i int) bool { return l.events[i].Time > t })
	if worth(n, len(l.events), all) {
		keep(l.events[:n])
		l.events = slices.Delete(l.events, 0, n)
		l.next -= n
	}
	for i := range l.sources {
		s := &l.sources[i]
		// The last one says where the next begins.
		if n := s.after(t) - 1; worth(n, len(s.events), all) {
			s.events = slices.Delete(s.events, 0, n)
		}
	}
}

func worth(n, of int, all bool) bool { return n > 0 && (all || n > 32 && n > of/2) }

// group returns the end of the events that have the time of event i, and
// whether all of them are motion.
func (l *log) group(i int) (end int, motionOnly bool) {
	motionOnly = true
	for end = i; end < len(l.events) && l.events[end].Time == l.events[i].Time; end++ {
		motionOnly = motionOnly && sensor.IsMotion(l.events[end].Measurement.Kind())
	}
	return end, motionOnly
}
