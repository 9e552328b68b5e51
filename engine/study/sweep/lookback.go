package sweep

import (
	"context"
	"errors"
	"fmt"
	"io"

	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/replay"
	"leadline/engine/study/results"
	"leadline/engine/study/score"
	"leadline/engine/study/track"
	"leadline/engine/summary"
)

// lookback is what looks back over a run.
type lookback struct {
	events         settled // as the session took them
	smoothed, path *traced
	agreement      score.Agreement
}

// traced takes posteriors, scores them, and writes their tracks.
type traced struct {
	scorer  *score.Scorer
	writers []track.Writer
}

func (w *work) looksBack() bool { return w.job.Smooth || w.job.Path }

// settled keeps events for looking back; nil has replays keep none.
func (w *work) settled() func([]sensor.Event) {
	switch {
	case w.lagging == nil && !w.looksBack():
		return nil
	case !w.looksBack():
		return w.lagging.take
	}
	return func(events []sensor.Event) {
		w.back.events.add(events)
		if w.lagging != nil {
			w.lagging.take(events)
		}
	}
}

// lookBack runs the drive backward, writes what it finds, and scores it.
func (w *work) lookBack(ctx context.Context) (*score.LookedBack, error) {
	if !w.looksBack() || w.back.events.Len() == 0 {
		return nil, nil
	}
	l := &w.back
	var err error
	if w.job.Smooth {
		if l.smoothed, err = w.traced(results.SmoothedFile, "smoothed.geojson"); err != nil {
			return nil, err
		}
	}
	if w.job.Path {
		if l.path, err = w.traced(results.PathFile, "path.geojson"); err != nil {
			return nil, err
		}
	}
	hasher := summary.NewHasher()
	err = replay.LookBack(w.header, w.config, &l.events, session.HindsightOptions{
		Path: w.job.Path, Stop: ctx.Err,
		Give: func(h session.Hindsight) error {
			hasher.Add(h.Filtered)
			l.agreement.Add(h.Filtered, h.Smoothed)
			return errors.Join(l.smoothed.add(h.Smoothed), l.path.add(h.Path))
		},
	})
	l.events.drop()
	if err != nil {
		return nil, err
	}
	if sum := hasher.Sum(); sum != w.hash {
		return nil, fmt.Errorf("%s: looking back came by other posteriors (%s) than the run (%s)", w.unit.drive.Path, sum, w.hash)
	}
	out := &score.LookedBack{Agreement: l.agreement.End()}
	if out.Smoothed, err = l.smoothed.end(); err != nil {
		return nil, err
	}
	out.Path, err = l.path.end()
	return out, err
}

// traced begins what takes the posteriors of a kind.
func (w *work) traced(table, features string) (*traced, error) {
	t := &traced{scorer: score.New(score.Input{
		Drive: w.unit.drive.Name, Truth: w.truth, Roads: w.unit.drive.Map.Near, Offset: w.job.TruthOffset,
		FromNS: w.sinks.scorer.Located(),
	})}
	if w.dir == "" {
		return t, nil
	}
	var err error
	t.writers, err = w.sinks.open(w, []writer{
		{table, func(f io.Writer) (track.Writer, error) { return track.NewTable(f) }},
		{features, func(f io.Writer) (track.Writer, error) { return track.NewFeatures(f, w.unit.drive.Name, w.truth) }},
	})
	return t, err
}

// add takes a posterior; a nil one has nobody ask for it.
func (t *traced) add(p *summary.Posterior) (err error) {
	if t == nil {
		return nil
	}
	step := track.Step{Posterior: p}
	if step.Truth, step.ErrorM, step.Known, err = t.scorer.Add(p); err != nil {
		return err
	}
	for _, w := range t.writers {
		err = errors.Join(err, w.Add(step))
	}
	return err
}

func (t *traced) end() (*score.Hindsight, error) {
	if t == nil {
		return nil, nil
	}
	s, err := t.scorer.Score(0, "")
	for _, w := range t.writers {
		err = errors.Join(err, w.Close())
	}
	if err != nil {
		return nil, err
	}
	return &score.Hindsight{Figures: s.Figures, FiguresAll: s.FiguresAll}, nil
}
