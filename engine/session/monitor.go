package session

import (
	"errors"
	"math"

	"leadline/engine/filter"
	"leadline/engine/monitor"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// weigh updates the belief by one likelihood of an event, and has the monitor
// look at where the measurement fell. One that is impossible everywhere leaves
// the belief and the running sum as they were; so does one of a sensor that is
// isolated, whose measurements are tried only.
func (s *Session) weigh(ev sensor.Event, l any) {
	st := &s.state
	key := monitorKey(ev)
	withheld := !s.unguarded && st.monitor.Isolated(key)
	var fell filter.Predictive
	if s.watchable(ev, key) {
		s.desk().work.Foretell(&fell)
	}
	var e float64
	var err error
	if withheld {
		e, err = filter.Try(st.belief, s.space, l, &s.desk().work)
	} else {
		e, err = filter.UpdateWithin(st.belief, s.space, l, s.maxCells, &s.desk().work)
	}
	impossible := errors.Is(err, filter.ErrContradiction)
	if impossible {
		e = math.Inf(-1)
		st.monitor.Impossible(key, int64(ev.Time))
	}
	if !withheld {
		e = s.weighAside(ev, l, sensor.IsMotion(key.Kind), e)
		if !math.IsInf(e, -1) {
			st.logEvidence += e
		}
		if !impossible && ev.Sensor != roadSensor {
			st.monitor.Possible(int64(ev.Time))
		}
	}
	if fell.Rows > 0 {
		var scores [2]float64
		for row := range fell.Rows {
			scores[row] = fell.Score(row)
		}
		var ratios []float64
		if fell.Weighed {
			ratios = fell.Wider[:fell.Rows]
		}
		if ev.Sensor == roadSensor {
			st.monitor.TakeOfMap(key, int64(ev.Time), st.odometerM, scores[:fell.Rows])
		} else {
			st.monitor.Take(key, int64(ev.Time), st.odometerM, scores[:fell.Rows], ratios)
		}
	}
	if st.aside.off+st.aside.lost >= offExplains {
		st.monitor.Answered()
	}
	st.record(summary.Evidence{
		Sensor: ev.Sensor, Number: ev.Number, Kind: ev.Measurement.Kind(), LogEvidence: e, Withheld: withheld,
	})
	s.watched(Change{Time: ev.Time, Event: ev, Likelihood: l, LogEvidence: e, Fell: fell})
}

func monitorKey(ev sensor.Event) monitor.Key {
	v := voiceOf(ev)
	return monitor.Key{Sensor: v.sensor, Kind: v.kind, Part: v.post}
}

// The monitor compares with what is expected on the map: not while the vehicle is
// likely not there, as far as a tenth goes; and being off the map or lost, once it is
// the likelier, answers what has spoken against being there.
const (
	offDisturbs = 0.1
	offExplains = 0.5
)

// watchable reports whether the monitor is to look at an event: whether it shares
// little of its error with the last one of its sensor that it looked at, and
// whether the belief is worth it.
func (s *Session) watchable(ev sensor.Event, key monitor.Key) bool {
	st := &s.state
	if st.belief.Cells() > s.hugeSize || st.aside.off+st.aside.lost > offDisturbs {
		return false
	}
	afterS, afterM := s.independent(key)
	if st.gapAgeS > 0 && afterM > 0 { // the way is not measured
		afterS, afterM = math.Max(afterS, unmeasuredS), 0
	}
	return st.monitor.Due(key, int64(ev.Time), st.odometerM, afterS, afterM)
}

// What the measurements of a sensor share with one another they share for a
// while, and the monitor looks at one a while. Beside the suite's correlation_s
// that is
//
//   - on roads, whatever the map and the place across the road enter into: half
//     of the 150 to 200 m over which these change. On 30 simulated drives of 20
//     minutes with fixes of 5 m (seeds 1 to 30) the scores of one after the other
//     had a correlation of 0.10 without it, lasting for half a minute, and 0.04
//     with it;
//   - over heights, twice the map's detail, as for the beams of a sounding: two
//     that share no sample of the raster;
//   - for the comparison with the road, the way that one counts for.
const (
	independentS = 1.0
	onRoadsM     = 100.0
	withRoadM    = 5.0
	unmeasuredS  = 10.0
)

func (s *Session) independent(key monitor.Key) (afterS, afterM float64) {
	if key.Sensor == roadSensor {
		return 0, withRoadM
	}
	afterS = math.Max(independentS, s.suite.CorrelationS(key.Sensor, key.Kind))
	switch key.Kind {
	case sensor.KindHeading, sensor.KindStandstill:
		return afterS, 0
	case sensor.KindClearance, sensor.KindSounding:
		if p, ok := s.space.(filter.PlaneSpace); ok {
			return afterS, 2 * p.DetailM()
		}
	}
	if s.lines != nil {
		return afterS, onRoadsM
	}
	return afterS, 0
}
