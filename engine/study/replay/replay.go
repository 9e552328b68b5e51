// Package replay runs recorded drives through sessions.
package replay

import (
	"cmp"
	"errors"
	"fmt"
	"math"
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
// released; percentiles are order statistics at rank ceil(n·p).
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
	c.Vehicle, c.Start = d.Header.Vehicle, Start(d.Header.Start)
	began := time.Now()
	s, err := session.New(c)
	if err != nil {
		return nil, err
	}
	if o.Watch != nil {
		s.Watch(o.Watch)
	}
	r := &Result{}
	events := Ordered(d.Events)
	r.Start = begins(events)
	r.Timing.OpenS = time.Since(began).Seconds()
	took := make([]float64, 0, len(events))
	began = time.Now()
	last := began
	for i, ev := range events {
		ps, err := s.Add(ev)
		if err != nil {
			if err := r.refuse(ev, err); err != nil {
				return nil, err
			}
		}
		r.take(ps, s.Withdrawn())
		now := time.Now()
		took = append(took, now.Sub(last).Seconds()*1e3)
		last = now
		if o.Progress != nil && (i+1)%32 == 0 {
			o.Progress(i+1, len(events))
		}
	}
	r.take(s.Flush(), s.Withdrawn())
	r.Accepted, r.Refused = s.Counts()
	r.Hash = s.Hash()
	r.time(time.Since(began).Seconds(), took, events)
	if o.Progress != nil {
		o.Progress(len(events), len(events))
	}
	return r, nil
}

// Ordered returns the events in the order of events; equal ones keep theirs.
func Ordered(events []sensor.Event) []sensor.Event {
	sorted := slices.Clone(events)
	slices.SortStableFunc(sorted, sensor.Event.Compare)
	return sorted
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

// begins returns when the first measurement or its increment began.
func begins(events []sensor.Event) sensor.Time {
	t := events[0].Time
	for _, ev := range events {
		if since, ok := sensor.Since(ev.Measurement); ok {
			t = min(t, since)
		}
	}
	return t
}

// refuse keeps a refusal; any other error comes back.
func (r *Result) refuse(ev sensor.Event, err error) error {
	var ref *session.Refusal
	if !errors.As(err, &ref) {
		return err
	}
	if len(r.Refusals) < MaxRefusals {
		r.Refusals = append(r.Refusals, Refusal{ev.Time, ev.Sensor, ev.Number, ref.Reason, ref.Detail})
	}
	return nil
}

// take puts posteriors at their places by time, in place of what they revise,
// and drops those that are withdrawn.
func (r *Result) take(ps []*summary.Posterior, withdrawn []sensor.Time) {
	for _, t := range withdrawn {
		if i, found := r.find(int64(t)); found {
			r.Posteriors = slices.Delete(r.Posteriors, i, i+1)
		}
	}
	for _, p := range ps {
		n := len(r.Posteriors)
		if n == 0 || r.Posteriors[n-1].TimeNS < p.TimeNS {
			r.Posteriors = append(r.Posteriors, p)
			continue
		}
		i, found := r.find(p.TimeNS)
		if found {
			r.Posteriors[i] = p
		} else {
			r.Posteriors = slices.Insert(r.Posteriors, i, p)
		}
	}
}

func (r *Result) find(ns int64) (int, bool) {
	return slices.BinarySearchFunc(r.Posteriors, ns, func(p *summary.Posterior, ns int64) int { return cmp.Compare(p.TimeNS, ns) })
}

func (r *Result) time(filterS float64, tookMs []float64, events []sensor.Event) {
	slices.Sort(tookMs)
	n := len(events)
	at := func(p float64) float64 { return tookMs[max(0, min(n-1, int(math.Ceil(p*float64(n)))-1))] }
	t := &r.Timing
	t.Measurements, t.Posteriors = n, len(r.Posteriors)
	t.DriveS = events[n-1].Time.Seconds(r.Start)
	t.FilterS = filterS
	if filterS > 0 { // a clock may not have moved
		t.MeasurementsPerSecond = float64(n) / filterS
		t.TimesRealTime = t.DriveS / filterS
	}
	t.P50Ms, t.P99Ms, t.MaxMs = at(0.5), at(0.99), tookMs[n-1]
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
