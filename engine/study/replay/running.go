package replay

import (
	"errors"
	"time"

	"leadline/engine/drivefile"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/score"
	"leadline/engine/summary"
)

// running is a replay under way.
type running struct {
	Result
	s           *session.Session
	began, last time.Time
	latest      sensor.Time
	tookMs      score.Sample
	n           int
	fixes       *fixes // nil: nobody asks
	moments     moments
	settled     func([]sensor.Event)
}

// start makes the session of a drive.
func start(h drivefile.Header, c session.Config, watch func(session.Change), beforeFix func(sensor.Event, *summary.Posterior)) (*running, error) {
	c = configured(h, c)
	began := time.Now()
	s, err := session.New(c)
	if err != nil {
		return nil, err
	}
	r := &running{s: s, began: time.Now()}
	if beforeFix != nil {
		if r.fixes, err = newFixes(c, s, beforeFix); err != nil {
			return nil, err
		}
		s.Watch(func(c session.Change) {
			r.fixes.watch(c)
			if watch != nil {
				watch(c)
			}
		})
	} else if watch != nil {
		s.Watch(watch)
	}
	r.Timing.OpenS = r.began.Sub(began).Seconds()
	r.last = r.began
	return r, nil
}

// add gives the session the next measurement. A refusal is kept; any other
// error comes back.
func (r *running) add(ev sensor.Event) error {
	if r.n == 0 {
		r.Start = ev.Time
	}
	r.n++
	r.latest = max(r.latest, ev.Time)
	if since, ok := sensor.Since(ev.Measurement); ok {
		r.Start = min(r.Start, since)
	}
	if r.fixes != nil {
		r.fixes.expect(ev)
	}
	if len(r.moments.due) > 0 {
		if r.n == 1 {
			r.moments.begin(r.Start)
		}
		if err := r.moments.pass(ev.Time, r.n == 1, r.s); err != nil {
			return err
		}
	}
	_, err := r.s.Add(ev)
	now := time.Now()
	r.tookMs.Add(now.Sub(r.last).Seconds() * 1e3)
	r.last = now
	var ref *session.Refusal
	switch {
	case err == nil:
	case !errors.As(err, &ref):
		return err
	case len(r.Refusals) < MaxRefusals:
		r.Refusals = append(r.Refusals, Refusal{ev.Time, ev.Sensor, ev.Number, ref.Reason, ref.Detail})
	}
	return nil
}

// end makes all posteriors final.
func (r *running) end() *Result {
	r.s.Flush()
	if r.settled != nil {
		r.settled(r.s.Held())
	}
	filterS := time.Since(r.began).Seconds()
	r.Accepted, r.Refused = r.s.Counts()
	r.Hash = r.s.Hash()
	t := &r.Timing
	t.Measurements, t.Posteriors = r.n, len(r.Posteriors)
	t.DriveS = r.latest.Seconds(r.Start)
	t.FilterS = filterS
	if filterS > 0 { // a clock may not have moved
		t.MeasurementsPerSecond = float64(r.n) / filterS
		t.TimesRealTime = t.DriveS / filterS
	}
	t.P50Ms, t.P99Ms, t.MaxMs = r.tookMs.Quantile(0.5), r.tookMs.Quantile(0.99), r.tookMs.Max()
	return &r.Result
}
