// Package replay runs recorded drives through sessions.
package replay

import (
	"cmp"
	"errors"
	"fmt"
	"slices"
	"time"

	"leadline/engine/drivefile"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/score"
	"leadline/engine/summary"
)

// Refusal is a measurement that the session did not take, and why.
type Refusal struct {
	Time   sensor.Time
	Sensor string
	Number uint64
	Reason session.Reason
	Detail string // what was wrong, and what to do
}

// Error names the measurement and says what was wrong with it.
func (r Refusal) Error() string {
	return fmt.Sprintf("the measurement at %s (sensor %q, number %d): %s: %s",
		time.Unix(0, int64(r.Time)).UTC().Format(time.RFC3339Nano), r.Sensor, r.Number, r.Reason, r.Detail)
}

// Result is what a replay gives.
type Result struct {
	// Start is when the first measurement, or its increment, began.
	Start sensor.Time
	// Posteriors are the final ones, by time, one a time: what late
	// measurements revised is there as revised. Each takes about 2 kB.
	Posteriors []*summary.Posterior
	// Refusals are the first MaxRefusals measurements that were refused, in
	// event order; Refused counts all.
	Refusals          []Refusal
	Accepted, Refused uint64
	Hash              string // of Posteriors, see summary.Hasher
	Timing            Timing
}

// MaxRefusals bounds the list of refused measurements.
const MaxRefusals = 1000

// Timing is what a replay took, by the machine's clock: nothing else in a
// Result depends on that. Milliseconds are of one measurement, with what it
// released; percentiles are within 0.05 % or a nanosecond (score.Sample).
type Timing struct {
	Measurements          int     `json:"measurements"`
	Posteriors            int     `json:"posteriors"`
	DriveS                float64 `json:"drive_s"` // from the first to the last measurement
	OpenS                 float64 `json:"open_s"`  // making the session and its start
	FilterS               float64 `json:"filter_s"`
	MeasurementsPerSecond float64 `json:"measurements_per_s"`
	TimesRealTime         float64 `json:"times_real_time"` // drive_s over filter_s
	P50Ms                 float64 `json:"p50_ms"`
	P99Ms                 float64 `json:"p99_ms"`
	MaxMs                 float64 `json:"max_ms"`
}

// ErrNoMeasurements is returned by Run for a drive that holds none.
var ErrNoMeasurements = errors.New("the drive holds no measurement")

// Options say how a replay runs. The zero value is useful.
type Options struct {
	// Progress, if set, is called now and then, and at the end with done =
	// total, the number of measurements.
	Progress func(done, total int)
	// Watch, if set, watches the session.
	Watch func(session.Change)
	// BeforeFix, if set, is given each satellite fix with the posterior just
	// before it; see Stream.
	BeforeFix func(ev sensor.Event, before *summary.Posterior)
	// Moments and Belief are as in StreamOptions.
	Moments []Moment
	Belief  func(at sensor.Time, s *session.Session) error
	// Settled, if set, is given the events as the session took them, in order.
	Settled func([]sensor.Event)
	// Stop, if set, is asked before each measurement but the first; an error of it ends the run, and Run
	// returns what came before beside it.
	Stop func() error
}

// Run makes a session of c, with the drive's vehicle and start, and runs the
// drive's measurements through it in the order of events (time, sensor,
// number), whatever their order in the file. The posteriors are thus a
// function of the set of measurements, and those of a server that was fed the
// same.
//
// Measurements that are refused are listed in the result; an error is about
// the configuration, the start or the drive as a whole.
func Run(d *drivefile.Drive, c session.Config, o Options) (*Result, error) {
	if len(d.Events) == 0 {
		return nil, ErrNoMeasurements
	}
	r, err := start(d.Header, c, o.Watch, o.BeforeFix)
	if err != nil {
		return nil, err
	}
	r.moments = moments{due: o.Moments, give: o.Belief}
	r.s.Settled(o.Settled)
	r.settled = o.Settled
	r.s.Finals(func(p *summary.Posterior) { r.Posteriors = append(r.Posteriors, p) })
	events := Ordered(d.Events)
	var stopped error
	for i, ev := range events {
		if o.Stop != nil && i > 0 {
			if stopped = o.Stop(); stopped != nil {
				break
			}
		}
		if err := r.add(ev); err != nil {
			return nil, err
		}
		if o.Progress != nil && (i+1)%32 == 0 {
			o.Progress(i+1, len(events))
		}
	}
	if err := r.moments.pass(r.latest+1, false, r.s); err != nil {
		return nil, err
	}
	res := r.end()
	if o.Progress != nil && stopped == nil {
		o.Progress(len(events), len(events))
	}
	return res, stopped
}

// Ordered returns the events in the order of events; equal ones keep theirs.
func Ordered(events []sensor.Event) []sensor.Event {
	sorted := slices.Clone(events)
	slices.SortStableFunc(sorted, sensor.Event.Compare)
	return sorted
}

// configured is a configuration with what a drive's header says.
func configured(h drivefile.Header, c session.Config) session.Config {
	c.Vehicle, c.Start, c.PosteriorS = h.Vehicle, Start(h.Start), h.PosteriorS
	return c
}

// Start turns a drive's start into a session's.
func Start(s drivefile.Start) session.Start {
	switch {
	case s.SigmaM > 0:
		return session.Start{Kind: session.AtPoint, Point: s.Point, SigmaM: s.SigmaM}
	case len(s.Area) > 0:
		return session.Start{Kind: session.InArea, Area: s.Area}
	}
	return session.Start{Kind: session.Anywhere}
}

// Truth returns a drive's truths for scoring: those of its vehicle or of no
// named one, by time.
func Truth(d *drivefile.Drive) []score.Truth {
	var out []score.Truth
	for _, t := range d.Truths {
		if t.Vehicle == "" || t.Vehicle == d.Header.Vehicle {
			out = append(out, score.Truth{TimeNS: int64(t.Time), At: t.Position, SigmaM: t.SigmaM})
		}
	}
	slices.SortStableFunc(out, func(a, b score.Truth) int { return cmp.Compare(a.TimeNS, b.TimeNS) })
	return out
}
