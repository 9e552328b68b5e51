package sweep

import (
	"fmt"

	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/replay"
	"leadline/engine/study/score"
)

// lagTapeBytes is how much of what the filter did an answer may hold at a time.
const lagTapeBytes = 32 << 20

// lagging says, while a drive runs, what is known of times a lag ago given all since,
// as a session that is asked now and then: four times within the lag, so that it takes
// some twenty times the filter's own time however long the lag is.
type lagging struct {
	behind       *session.Behind
	out          *traced
	every        sensor.Time
	asked, added sensor.Time // when it was asked last, and the last event's time
	begun        bool
	n            int
	err          error // the first
}

// lag begins it, if it is asked for.
func (w *work) lag() error {
	if w.job.LagS == 0 {
		return nil
	}
	l := &lagging{every: sensor.Time(w.job.LagS / 4 * 1e9)}
	var err error
	if l.behind, err = replay.Behind(w.header, w.config, w.job.LagS, lagTapeBytes); err != nil {
		return fmt.Errorf("%s: %w", w.unit.drive.Path, err)
	}
	if l.out, err = w.traced("lagged.csv", "lagged.geojson"); err != nil {
		return err
	}
	w.lagging = l
	return nil
}

// take takes events as the session took them.
func (l *lagging) take(events []sensor.Event) {
	for i, ev := range events {
		if l.err != nil {
			return
		}
		switch {
		case !l.begun:
			l.begun, l.asked = true, ev.Time
		case ev.Time > l.added && l.added-l.asked >= l.every:
			l.ask()
		}
		l.behind.Add(events[i : i+1])
		l.added = max(l.added, ev.Time)
	}
}

func (l *lagging) ask() {
	l.asked = l.added
	p, err := l.behind.At()
	if err == nil && p != nil {
		l.n++
		err = l.out.add(p)
	}
	l.err = err
}

// end sums up; nil where nobody asks for it.
func (l *lagging) end(lagS float64) (*score.Lagged, error) {
	if l == nil {
		return nil, nil
	}
	if l.begun && l.err == nil && l.added > l.asked {
		l.ask()
	}
	if l.err != nil {
		return nil, l.err
	}
	h, err := l.out.end()
	if err != nil {
		return nil, err
	}
	return &score.Lagged{LagS: lagS, Posteriors: l.n, Hindsight: *h}, nil
}
