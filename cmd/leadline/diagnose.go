package main

import (
	"context"
	"fmt"
	"io"
	"path/filepath"
	"runtime"
	"strconv"
	"sync"
	"time"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/study/diagnose"
	"leadline/engine/study/results"
	"leadline/engine/study/sweep"
)

// When a replay tries usual mistakes.
const (
	diagnoseAuto   = "auto"
	diagnoseAlways = "always"
	diagnoseNever  = "never"
)

// studies are what a replay says beyond its score.
type studies struct {
	Findings    *diagnose.Findings    `json:"findings"`
	Diagnosis   *diagnose.Report      `json:"diagnosis,omitempty"`
	Explanation *diagnose.Explanation `json:"explanation,omitempty"`
}

func (o *replayOptions) checkStudies() error {
	switch o.diagnose {
	case diagnoseAuto, diagnoseAlways, diagnoseNever:
	default:
		return fmt.Errorf("--diagnose is %q: it must be %s, %s or %s", o.diagnose, diagnoseAuto, diagnoseAlways, diagnoseNever)
	}
	if o.explain != "" {
		if _, err := explainedTime(o.explain, 0); err != nil {
			return err
		}
	}
	if o.explainWithin <= 0 || o.explainWithin > time.Hour {
		return fmt.Errorf("--explain-within is %v: it must be more than 0 and at most 1h", o.explainWithin)
	}
	return nil
}

// explainedTime reads a time, or seconds after a start.
func explainedTime(text string, start sensor.Time) (sensor.Time, error) {
	if s, err := strconv.ParseFloat(text, 64); err == nil && s >= 0 && s <= 1e9 {
		return start + sensor.Time(s*1e9), nil
	}
	t, err := time.Parse(time.RFC3339Nano, text)
	if err != nil {
		return 0, fmt.Errorf("--explain is %q: give a time such as 2030-05-01T12:00:05.5Z, or seconds after the first measurement, such as 5.5", text)
	}
	return sensor.Time(t.UnixNano()), nil
}

// look looks at a replay.
func look(r *sweep.Kept, path string) (*studies, error) {
	f, err := diagnose.Look(r.Result, r.Record, r.Truth, r.Drive.Events, r.Config)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return &studies{Findings: f}, nil
}

// tries reports whether usual mistakes are tried.
func (o *replayOptions) tries(f *diagnose.Findings) bool {
	return !f.Misplaced && (o.diagnose == diagnoseAlways || o.diagnose == diagnoseAuto && len(f.Reasons) > 0)
}

// study tries usual mistakes if a replay is suspect, and explains the time that
// was asked for. Once it is interrupted it ends at once, with what it has.
func (o *replayOptions) study(ctx context.Context, errs io.Writer, out *studies, m *mapFile, r *sweep.Kept, path string) (err error) {
	if o.tries(out.Findings) {
		show, end := progress(errs, driveName(path)+", usual mistakes")
		how := diagnose.Options{Grids: m.grids(), Each: eachAtOnce, Progress: show, Stop: ctx.Err}
		if o.diagnose == diagnoseAuto {
			how.Beside = r.Record
		}
		out.Diagnosis, err = diagnose.Run(r.Drive, r.Config, how)
		end()
		if err != nil && ctx.Err() == nil {
			return fmt.Errorf("%s: trying usual mistakes: %w", path, err)
		}
	}
	if o.explain != "" {
		at, err := explainedTime(o.explain, r.Result.Start)
		if err != nil {
			return err
		}
		out.Explanation, err = diagnose.Explain(r.Drive, r.Config, at, o.explainWithin.Seconds(), ctx.Err)
		if err != nil && ctx.Err() == nil {
			return fmt.Errorf("%s: --explain %s: %w", path, o.explain, err)
		}
	}
	return nil
}

// keep writes beside a run's results what was found; "" keeps nothing.
func (s *studies) keep(dir string) error {
	if dir == "" {
		return nil
	}
	f := results.Findings{Suspect: s.Findings.Reasons}
	if s.Diagnosis != nil {
		f.Verdict = s.Diagnosis.Verdict
	}
	return results.WriteJSON(filepath.Join(dir, results.FindingsFile), f)
}

// grids is the grid of a height map that is in a projection.
func (m *mapFile) grids() []diagnose.Grid {
	if m.Heights == nil {
		return nil
	}
	crs := m.Heights.Grid().CRS
	p, ok := crs.TM()
	if !ok {
		return nil
	}
	ell := geo.WGS84
	if p.GRS80 {
		ell = geo.GRS80
	}
	proj := geo.NewTransverseMercator(ell, geo.FromDegrees(p.LonDeg, p.LatDeg), p.Scale, p.FalseEastM, p.FalseNorthM)
	return []diagnose.Grid{{Name: crs.String(), Convergence: func(at geo.LonLat) float64 { g, _ := proj.Convergence(at); return g }}}
}

// eachAtOnce runs f for 0 to n-1, as many at a time as there are processors.
func eachAtOnce(n int, f func(i int)) {
	var wait sync.WaitGroup
	next := make(chan int)
	for range min(n, runtime.GOMAXPROCS(0)) {
		wait.Go(func() {
			for i := range next {
				f(i)
			}
		})
	}
	for i := range n {
		next <- i
	}
	close(next)
	wait.Wait()
}
