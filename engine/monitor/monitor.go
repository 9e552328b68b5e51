package monitor

import (
	"math"
	"slices"
	"strings"
)

// Key names what shares one error from one measurement to the next: a kind of a
// sensor, and of a sensor at several places a part.
type Key struct{ Sensor, Kind, Part string }

func (k Key) compare(l Key) int {
	if c := strings.Compare(k.Sensor, l.Sensor); c != 0 {
		return c
	}
	if c := strings.Compare(k.Kind, l.Kind); c != 0 {
		return c
	}
	return strings.Compare(k.Part, l.Part)
}

// Monitor watches the measurements of one vehicle. Use New; one goroutine owns
// it.
//
// Each sensor has a chart for its spread and two for a shift of each component;
// together they raise a false alarm once in the time that was asked for. All
// sensors together have one for the spread of what the belief takes, which raises
// one as often, and which contradicts the belief while it is alarmed. So does,
// with a chart for its spread alone, what compares the belief with its map
// (TakeOfMap): it is no sensor, is never isolated and says nothing of sensors.
type Monitor struct {
	everyS     float64
	all        chart
	sensors    []sensor // by key
	impossible impossible
}

// impossible is the last measurement that was impossible everywhere.
type impossible struct {
	on     bool
	key    Key
	raised int64 // the first of them
	last   int64
	since  int // measurements that were possible since the last
}

// An impossible measurement contradicts until as many possible ones have
// followed it, for as long.
const (
	possibleAfter  = 10
	possibleAfterS = 10.0
)

// New makes a monitor. falseAlarmS is for how long, on average, neither a sensor
// nor all together raise a false alarm, s.
func New(falseAlarmS float64) *Monitor {
	if !(falseAlarmS > 0) {
		panic("monitor: the time without a false alarm must be positive")
	}
	return &Monitor{everyS: falseAlarmS}
}

// Clone returns a copy that changes by itself.
func (m *Monitor) Clone() *Monitor {
	c := *m
	c.sensors = slices.Clone(m.sensors)
	return &c
}

func (m *Monitor) find(k Key) (int, bool) {
	return slices.BinarySearchFunc(m.sensors, k, func(s sensor, k Key) int { return s.key.compare(k) })
}

// Due reports whether a measurement shares so little of its error with the last
// one that Take had of its sensor that it may be taken, too: they must be
// spacingS apart and, if the way is measured, spacingM on it.
func (m *Monitor) Due(k Key, at int64, odometerM, spacingS, spacingM float64) bool {
	i, found := m.find(k)
	if !found {
		return true
	}
	s := &m.sensors[i]
	// A hundredth less, for times that are rounded or jitter.
	return float64(at-s.last)/1e9 >= 0.99*spacingS && odometerM-s.lastM >= 0.99*spacingM
}

// TakeOfMap adds the score of a comparison of the belief with its map.
func (m *Monitor) TakeOfMap(k Key, at int64, odometerM float64, scores []float64) {
	s, _ := m.sensor(k, at, odometerM)
	s.ofMap = true
	s.take(at, scores, nil, m.everyS)
}

// sensor is the one of a key, which has sent something.
func (m *Monitor) sensor(k Key, at int64, odometerM float64) (s *sensor, i int) {
	i, found := m.find(k)
	if !found {
		m.sensors = slices.Insert(m.sensors, i, newSensor(k))
	}
	s = &m.sensors[i]
	s.last, s.lastM = at, odometerM
	return s, i
}

// Take adds a measurement's scores, one or two. Those of a sensor that is
// isolated tell whether it may come back, and nothing of the belief. ratios are how
// much each component speaks for twice the spread, ln, where the scores do not say
// so, because of outliers; nil where they do.
func (m *Monitor) Take(k Key, at int64, odometerM float64, scores, ratios []float64) {
	s, i := m.sensor(k, at, odometerM)
	if !s.isolated {
		for row, z := range scores {
			m.all.add(at, widening(z, ratios, row), m.everyS)
		}
	}
	s.take(at, scores, ratios, m.everyS)
	m.isolate(i, at)
}

// Impossible says that a measurement was impossible everywhere in the belief.
func (m *Monitor) Impossible(k Key, at int64) {
	x := &m.impossible
	if !x.on {
		x.raised = at
	}
	x.on, x.key, x.last, x.since = true, k, at, 0
}

// Possible says that the belief has taken a measurement.
func (m *Monitor) Possible(at int64) {
	x := &m.impossible
	if x.on {
		x.since++
		x.on = x.since < possibleAfter || float64(at-x.last)/1e9 < possibleAfterS
	}
}

// Contradicted reports whether the measurements contradict the belief: all
// together are alarmed, or what compares with the map, or one was impossible.
func (m *Monitor) Contradicted() bool {
	for i := range m.sensors {
		if s := &m.sensors[i]; s.ofMap && s.alarmed() {
			return true
		}
	}
	return m.all.alarmed || m.impossible.on
}

// Answered says that something other than the belief explains the measurements:
// what they say against it all together, and the map's comparison, begins anew.
func (m *Monitor) Answered() {
	m.all.sum, m.all.alarmed = 0, false
	for i := range m.sensors {
		if s := &m.sensors[i]; s.ofMap {
			s.spread.sum, s.spread.alarmed = 0, false
		}
	}
}

// Isolated reports whether the measurements of a sensor are to be tried only.
func (m *Monitor) Isolated(k Key) bool {
	i, found := m.find(k)
	return found && m.sensors[i].isolated
}

// Kind says what an alarm is about.
type Kind string

// The kinds of alarms.
const (
	Spread     Kind = "spread"     // errors are larger than stated
	Bias       Kind = "bias"       // errors are not about 0
	Impossible Kind = "impossible" // a measurement was impossible everywhere
	Isolated   Kind = "isolated"   // a sensor's measurements are tried only
)

// Alarm is one that holds now.
type Alarm struct {
	Kind Kind
	Key  Key // zero: all sensors together
	// RaisedNS is when it was raised, BeganNS when what it is about probably
	// began: when its sum last was 0.
	RaisedNS, BeganNS int64
	// Evidence is how much more probable the latest measurements are under what
	// the alarm is about than as they should be, ln, at most Threshold, from
	// where on the alarm is raised. It ends when that is 0. Both are +Inf for an
	// impossible measurement.
	Evidence, Threshold float64
}

// Alarms returns what holds now: all together first, then by sensor.
func (m *Monitor) Alarms() (out []Alarm) {
	if x := &m.impossible; x.on {
		out = append(out, Alarm{Impossible, x.key, x.raised, x.raised, math.Inf(1), math.Inf(1)})
	}
	if c := &m.all; c.alarmed {
		out = append(out, c.alarm(Spread, Key{}))
	}
	for i := range m.sensors {
		out = append(out, m.sensors[i].alarms()...)
	}
	return out
}

// Consistency is how a sensor's measurements agree with what was expected.
type Consistency struct {
	Key Key
	// Taken is how many measurements were compared since the start.
	Taken int
	// Mean and MeanSquare are those of the scores, the latest some 60 of them
	// counting most: 0 and 1 if all is as stated.
	Mean, MeanSquare float64
	Isolated         bool
}

// Sensors returns the consistency of each sensor.
func (m *Monitor) Sensors() []Consistency {
	out := make([]Consistency, len(m.sensors))
	for i := range m.sensors {
		s := &m.sensors[i]
		out[i] = Consistency{s.key, s.taken, s.mean, s.meanSquare, s.isolated}
	}
	return out
}
