package monitor

import "math"

// sensor is what is kept of one.
type sensor struct {
	key              Key
	ofMap            bool // no sensor: a comparison with the map
	last             int64
	lastM            float64
	taken            int
	mean, meanSquare float64
	spread           chart
	shift            [4]chart // of the first component high and low, of the second
	rows             int
	isolated         bool
	isolatedAt       int64
	// insistedFor is how many measurements it has sent since it insists on its
	// alarm, witnesses how many other sensors have sent since then that were not
	// insisting, and clearFor how many it has sent since it was not.
	insistedFor, witnesses, clearFor int
}

func newSensor(k Key) sensor {
	s := sensor{key: k, spread: chart{what: spread}}
	for i := range s.shift {
		s.shift[i].what = high + statistic(i%2)
	}
	return s
}

// recent is over how many measurements mean and mean square go.
const recent = 60

func (s *sensor) take(at int64, scores, ratios []float64, everyS float64) {
	s.rows = max(s.rows, len(scores))
	s.taken++
	// As many charts as there are share the false alarms out.
	each := float64(1+2*s.rows) * everyS
	if s.ofMap {
		each = everyS
	}
	var mean, square float64
	for row, z := range scores {
		s.spread.add(at, widening(z, ratios, row), each)
		if !s.ofMap {
			s.shift[2*row].take(at, z, each)
			s.shift[2*row+1].take(at, z, each)
		}
		mean += z / float64(len(scores))
		square += z * z / float64(len(scores))
	}
	w := 1 / math.Min(float64(s.taken), recent)
	s.mean += float64(w * (mean - s.mean))
	s.meanSquare += float64(w * (square - s.meanSquare))
	switch {
	case s.insists():
		s.insistedFor, s.clearFor = s.insistedFor+1, 0
	case s.alarmed():
		s.insistedFor, s.witnesses, s.clearFor = 0, 0, 0
	default:
		s.insistedFor, s.witnesses, s.clearFor = 0, 0, s.clearFor+1
	}
}

// insists reports whether what alarmed a sensor goes on: a sum that stays near
// its threshold, and is not on its way back to 0.
func (s *sensor) insists() bool {
	if s.spread.insists() {
		return true
	}
	for i := range s.shift {
		if s.shift[i].insists() {
			return true
		}
	}
	return false
}

// A sum on its way back falls by 0.32 nats a score for spread and by 1.1 for a
// shift: below insisting of a threshold of 12 within 8.
const insisting = 0.8

func (c *chart) insists() bool { return c.alarmed && c.sum >= insisting*c.limit }

func (s *sensor) alarmed() bool {
	if s.spread.alarmed {
		return true
	}
	for i := range s.shift {
		if s.shift[i].alarmed {
			return true
		}
	}
	return false
}

// A sensor is isolated when it has insisted on its alarm for isolateAfter
// measurements, while others sent as many and none of them insists on one: if two
// disagree with the belief, the belief may be wrong. The count begins anew for
// all when one is isolated, since the belief has to come back from it. It is
// readmitted when its alarms have ended and readmitAfter more measurements, which
// were only tried, raised none.
const (
	isolateAfter = 10
	readmitAfter = 10
)

// isolate applies the rule after a measurement of sensor i.
func (m *Monitor) isolate(i int, at int64) {
	s := &m.sensors[i]
	if s.isolated {
		if s.clearFor >= readmitAfter {
			s.isolated = false
		}
		return
	}
	others := false
	for j := range m.sensors {
		o := &m.sensors[j]
		if j == i || o.isolated || o.ofMap {
			continue
		}
		others = others || o.insists()
		if o.insists() && !s.insists() {
			o.witnesses++
		}
	}
	if !others && s.insistedFor >= isolateAfter && s.witnesses >= isolateAfter {
		s.isolated, s.isolatedAt, s.clearFor = true, at, 0
		for j := range m.sensors {
			m.sensors[j].insistedFor, m.sensors[j].witnesses = 0, 0
		}
	}
}

// alarms are those of a sensor that hold now.
func (s *sensor) alarms() (out []Alarm) {
	if s.spread.alarmed {
		out = append(out, s.spread.alarm(Spread, s.key))
	}
	var worst *chart // of the shifts: the one that began first
	for i := range s.shift {
		if c := &s.shift[i]; c.alarmed && (worst == nil || c.raised < worst.raised) {
			worst = c
		}
	}
	if worst != nil {
		out = append(out, worst.alarm(Bias, s.key))
	}
	if s.isolated {
		a := Alarm{Kind: Isolated, Key: s.key, RaisedNS: s.isolatedAt, BeganNS: s.isolatedAt}
		for _, o := range out {
			a.Evidence, a.Threshold = math.Max(a.Evidence, o.Evidence), math.Max(a.Threshold, o.Threshold)
			a.BeganNS = min(a.BeganNS, o.BeganNS)
		}
		out = append(out, a)
	}
	return out
}

// alarm is what a chart says.
func (c *chart) alarm(kind Kind, k Key) Alarm {
	return Alarm{Kind: kind, Key: k, RaisedNS: c.raised, BeganNS: c.began, Evidence: c.sum, Threshold: c.limit}
}
