package diagnose

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"leadline/engine/drivefile"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/replay"
	"leadline/engine/summary"
)

// Explanation says what moved the belief how much around a time.
type Explanation struct {
	At      time.Time `json:"at"`
	Effects []Effect  `json:"effects"` // as they happened
}

// Effect is what one move, or one measurement, did to the belief.
type Effect struct {
	AtS float64 `json:"at_s"` // seconds after the time that is explained
	// Sensor, Kind and Number name the measurement; of a move Kind is "move"
	// and Sensor lists what measured it. The comparison with the road has the
	// sensor "road".
	Sensor string `json:"sensor"`
	Kind   string `json:"kind"`
	Number uint64 `json:"number,omitempty"`
	// LogEvidence is null for a move, and where the measurement is impossible
	// everywhere in the belief. Outlier is the probability that it is one.
	LogEvidence *float64 `json:"log_evidence"`
	Outlier     *float64 `json:"outlier"`
	// EastM and NorthM are by how much the mean shifted, ShiftM how far.
	EastM  float64 `json:"east_m"`
	NorthM float64 `json:"north_m"`
	ShiftM float64 `json:"shift_m"`
	// Before and after it.
	Radius95M   [2]float64   `json:"radius95_m"`
	EntropyNats [2]float64   `json:"entropy_nats"`
	Modes       [2][]float64 `json:"modes"` // the masses of the heaviest three
	Status      [2]string    `json:"status"`

	when sensor.Time
}

// InformationNats is by how much the entropy of the place fell.
func (e *Effect) InformationNats() float64 { return e.EntropyNats[0] - e.EntropyNats[1] }

const (
	// explainedModes bounds the modes that an effect lists.
	explainedModes = 3
	// maxEffects bounds an explanation.
	maxEffects = 100_000
	// leadS is how much earlier the belief is looked at, so that the first
	// effect has something before it.
	leadS = 1.0
)

// Explain replays a drive up to a time and says what moved the belief within
// a number of seconds of it. stop, if not nil, is asked before each measurement, and its
// error ends it. Other errors are about the configuration, the drive as a whole, or a
// time at which the drive has nothing.
func Explain(d *drivefile.Drive, c session.Config, at sensor.Time, withinS float64, stop func() error) (*Explanation, error) {
	events := replay.Ordered(d.Events)
	if len(events) == 0 {
		return nil, ErrNoMeasurements
	}
	c.Vehicle, c.Start = d.Header.Vehicle, replay.Start(d.Header.Start)
	s, err := session.New(c)
	if err != nil {
		return nil, err
	}
	suite, _ := suiteOf(c)
	v := suite.Vehicle
	sum, err := summary.New(summary.Options{AlertLimitM: v.AlertLimitM, IntegrityRisk: v.IntegrityRisk, LateralSigmaM: v.LateralSigmaM})
	if err != nil {
		return nil, err
	}
	within := sensor.Time(withinS * 1e9)
	w := &witness{s: s, sum: sum, frame: c.Space.Frame(), motions: motions(events, suite), at: at, from: at - within - sensor.Time(leadS*1e9), to: at + within}
	s.Watch(w.see)
	// What comes later than this, and did not begin before, cannot change what
	// was then.
	end := w.to + sensor.Time((v.LateWindowS+v.HoldS+1)*1e9)
	for _, ev := range events {
		if since, ok := sensor.Since(ev.Measurement); ev.Time > end && !(ok && since < w.to) {
			continue
		}
		if stop != nil {
			if err := stop(); err != nil {
				return nil, err
			}
		}
		if _, err := s.Add(ev); err != nil {
			var ref *session.Refusal
			if !errors.As(err, &ref) {
				return nil, err
			}
		}
	}
	s.Flush()
	if w.err != nil {
		return nil, w.err
	}
	x := &Explanation{At: clock(at)}
	for _, e := range w.effects {
		if e.when >= at-within {
			x.Effects = append(x.Effects, e.Effect)
		}
	}
	if len(x.Effects) == 0 {
		return nil, fmt.Errorf("nothing moved or weighed the belief within %g s of that time: the drive's measurements are from %s to %s",
			withinS, clock(events[0].Time).Format(time.RFC3339Nano), clock(events[len(events)-1].Time).Format(time.RFC3339Nano))
	}
	return x, nil
}

func clock(t sensor.Time) time.Time { return time.Unix(0, int64(t)).UTC() }

// witness watches a session and takes down what happens within a stretch of
// time.
type witness struct {
	s        *session.Session
	sum      *summary.Summarizer
	frame    geo.Frame
	motions  []motion
	at       sensor.Time
	from, to sensor.Time
	effects  []seen
	first    *look // the belief before the first effect, at firstAt
	firstAt  sensor.Time
	last     sensor.Time // of the change before
	err      error
}

// seen is an effect with the belief after it.
type seen struct {
	Effect
	after look
}

// look is what an effect compares of a belief.
type look struct {
	mean    geo.Point
	radius  float64
	entropy float64
	modes   []float64
	status  string
}

func (w *witness) look() (*look, error) {
	var p summary.Posterior
	if err := w.s.Summarize(w.sum, &p); err != nil {
		return nil, err
	}
	l := &look{mean: p.MeanFrame, radius: p.Radius95M, entropy: p.EntropyNats, status: p.Status.String()}
	for i := range min(len(p.Modes), explainedModes) {
		l.modes = append(l.modes, p.Modes[i].Mass)
	}
	return l, nil
}

// see takes a change down. What a late measurement has computed again takes
// the place of what was.
func (w *witness) see(c session.Change) {
	n := len(w.effects)
	if until, yes := c.Rewinds(w.last); yes {
		for n > 0 && w.effects[n-1].when > until {
			n--
		}
		w.effects = w.effects[:n]
		if n == 0 && w.firstAt > until {
			w.first = nil
		}
	}
	w.last = c.Time
	if w.err != nil || c.Time < w.from || c.Time > w.to || n >= maxEffects {
		return
	}
	now, err := w.look()
	if err != nil {
		w.err = err
		return
	}
	before := w.first
	if n > 0 {
		before = &w.effects[n-1].after
	}
	if before == nil {
		// The first change of the stretch: from here on there is a before.
		w.first, w.firstAt = now, c.Time
		return
	}
	w.effects = append(w.effects, seen{w.effect(c, before, now), *now})
}

func (w *witness) effect(c session.Change, before, now *look) Effect {
	shift := now.mean.Sub(before.mean)
	cos, sin, k := w.frame.Rotation(now.mean)
	e := Effect{
		AtS: c.Time.Seconds(w.at), when: c.Time,
		EastM: (cos*shift.E + sin*shift.N) / k, NorthM: (cos*shift.N - sin*shift.E) / k,
		Radius95M: [2]float64{before.radius, now.radius}, EntropyNats: [2]float64{before.entropy, now.entropy},
		Modes: [2][]float64{before.modes, now.modes}, Status: [2]string{before.status, now.status},
	}
	e.ShiftM = math.Sqrt(e.EastM*e.EastM + e.NorthM*e.NorthM)
	if c.Likelihood == nil {
		e.Kind, e.Sensor = moved, w.movers(c.From, c.Time)
		return e
	}
	e.Sensor, e.Kind, e.Number = c.Event.Sensor, c.Event.Measurement.Kind(), c.Event.Number
	if e.Sensor == road {
		e.Kind = "heading"
	}
	if !math.IsInf(c.LogEvidence, -1) {
		log := c.LogEvidence
		e.LogEvidence = &log
	}
	var r Record
	r.Add(c)
	if v := r.voices[0]; v.known || math.IsInf(c.LogEvidence, -1) {
		e.Outlier = &r.list[0].out
	}
	return e
}

// moved is the kind of an effect that is a move.
const moved = "move"

// motion is a stretch of time that a sensor measured the motion of.
type motion struct {
	sensor   string
	from, to sensor.Time
}

// motions lists them; speeds and standstills speak for at most hold_s.
func motions(events []sensor.Event, suite *sensor.Suite) []motion {
	var out []motion
	for _, ev := range events {
		if !sensor.IsMotion(ev.Measurement.Kind()) {
			continue
		}
		ev, err := suite.Prepare(ev)
		if err != nil {
			continue
		}
		since, ok := sensor.Since(ev.Measurement)
		if !ok {
			since = ev.Time - sensor.Time(suite.Vehicle.HoldS*1e9)
		}
		out = append(out, motion{ev.Sensor, since, ev.Time})
	}
	return out
}

// movers lists the sensors that measured a stretch of time, or "gap".
func (w *witness) movers(from, to sensor.Time) string {
	var names []string
	for _, m := range w.motions {
		if m.from < to && m.to > from && !slices.Contains(names, m.sensor) {
			names = append(names, m.sensor)
		}
	}
	if len(names) == 0 {
		return "gap"
	}
	slices.Sort(names)
	return strings.Join(names, ", ")
}
