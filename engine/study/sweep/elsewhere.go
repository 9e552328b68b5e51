package sweep

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"sync"

	"leadline/engine/drivefile"
	"leadline/engine/filter"
	"leadline/engine/sensor"
	"leadline/engine/study/replay"
	"leadline/engine/study/results"
)

// Task is a run as another machine is told of it. With the drive's file and the map
// it is all that the results depend on.
type Task struct {
	// Run is what it is made of; its counts are not known yet.
	Run results.Run
	// Suite is the suite with its defaults and what the setting changes.
	Suite []byte
	// Files says that tracks and pictures are wanted, beside the scores.
	Files bool
	// Bytes are those of the drive's file.
	Bytes int64

	EstimateTruth, HoldOutFixes, Smooth, Path, GPX, Parquet bool
	LagS                                                    float64
	Beliefs                                                 []replay.Moment
}

// Elsewhere has runs done on other machines.
type Elsewhere interface {
	// Run has a task done: drive and map are files of this machine; the run's folder
	// is put into dir, which is there. Without one, and with no error, the answer
	// says why there is none. read is told of what was read of the drive, as Meter is.
	Run(ctx context.Context, t *Task, drive, chart, dir string, read func(bytes int64, measurements int)) (Answer, error)
}

// Answer is what comes back beside the files.
type Answer struct {
	// Err is why the drive could not be run, or not to its end; "" if it was.
	Err string `json:"err,omitempty"`
	// Whole says that there are files.
	Whole bool `json:"whole"`
}

// ErrOther is the error of a task for which this machine has something else than
// what was asked for: another program, map or drive.
var ErrOther = errors.New("the run would be of something else than was asked for")

// task says what a unit is.
func (w *work) task() (*Task, error) {
	yaml, err := w.unit.yaml()
	if err != nil {
		return nil, err
	}
	j := w.job
	return &Task{
		Run: w.out.Run, Suite: yaml, Files: j.Dir != "", Bytes: w.unit.drive.Bytes,
		EstimateTruth: j.EstimateTruth, HoldOutFixes: j.HoldOutFixes, Smooth: j.Smooth, Path: j.Path, LagS: j.LagS,
		GPX: j.GPX, Parquet: j.Parquet, Beliefs: j.Beliefs,
	}, nil
}

// elsewhere has the unit run on another machine, and takes what it has left.
func (w *work) elsewhere(ctx context.Context) error {
	t, err := w.task()
	if err != nil {
		return err
	}
	dir := w.dir
	if dir == "" {
		if dir, err = os.MkdirTemp("", "leadline-run-"); err != nil {
			return err
		}
		defer os.RemoveAll(dir)
	}
	d := w.unit.drive
	answer, err := w.job.Elsewhere.Run(ctx, t, d.Path, d.Map.Path, dir, w.progress)
	if err != nil {
		return fmt.Errorf("%s: %w", d.Path, err)
	}
	var stopped error
	if answer.Err != "" {
		stopped = errors.New(answer.Err)
	}
	if !answer.Whole {
		return stopped
	}
	r, err := results.Read(dir)
	if err == nil {
		err = results.ReadJSON(filepath.Join(dir, results.TimingFile), &w.out.Timing)
	}
	if err == nil && r.Key != w.out.Run.Key {
		err = ErrOther
	}
	if err != nil {
		return fmt.Errorf("%s: what came back of its run: %w", d.Path, err)
	}
	if w.dir != "" {
		if err := w.settle(); err != nil {
			return err
		}
	}
	w.out.Run, w.out.Score = r.Run, r.Score
	return stopped
}

// Do does a task: file is the drive's, dir a folder of its own for what it writes.
// The answer is ErrOther where this machine has something else than what was asked
// for; any other error of the run is part of the answer. Program and version are
// this program's.
func (t *Task) Do(ctx context.Context, version, program, file string, m *Map, dir string, meter Meter) (folder string, a Answer, err error) {
	suite, err := sensor.ParseSuite(t.Run.Suite, t.Suite)
	if err != nil {
		return "", Answer{}, fmt.Errorf("the task's suite: %w", err)
	}
	setting := Setting{Name: t.Run.Setting}
	for _, text := range t.Run.Set {
		c, err := ParseChange(text)
		if err != nil {
			return "", Answer{}, fmt.Errorf("the task's setting: %w", err)
		}
		setting.Changes = append(setting.Changes, c)
	}
	named := *m
	named.Path = t.Run.Map
	j := &Job{
		MaxCells: t.Run.MaxCells, TruthOffset: t.Run.TruthOffset, EstimateTruth: t.EstimateTruth, HoldOutFixes: t.HoldOutFixes,
		Smooth: t.Smooth, Path: t.Path, LagS: t.LagS, GPX: t.GPX, Parquet: t.Parquet, Beliefs: t.Beliefs,
		Version: version, Program: program, Command: t.Run.Command, Meter: meter, Again: true,
	}
	if t.Files {
		j.Dir = dir
	}
	d := &Drive{Path: t.Run.DriveFile, Name: t.Run.Drive, File: file, Bytes: t.Bytes, Map: &named, SuiteName: t.Run.Suite}
	o := j.run(ctx, unit{setting: &setting, drive: d, suite: suite, cells: t.Run.MaxCells, heldOut: t.Run.HeldOut, key: t.Run.Key})
	if errors.Is(o.Err, ErrOther) {
		return "", Answer{}, fmt.Errorf("%w: %s", ErrOther, other(&t.Run, &o.Run))
	}
	if o.Err != nil {
		a.Err = o.Err.Error()
	}
	if o.Score == nil {
		return "", a, nil
	}
	a.Whole = true
	if t.Files {
		return o.Dir, a, nil
	}
	for name, v := range map[string]any{results.ScoreFile: o.Score, results.TimingFile: o.Timing, results.RunFile: o.Run} {
		if err := results.WriteJSON(filepath.Join(dir, name), v); err != nil {
			return "", a, err
		}
	}
	return dir, a, nil
}

// other says what a run differs in from the one that was asked for.
func other(asked, here *results.Run) string {
	for _, x := range []struct{ what, asked, here string }{
		{"program", asked.Version + " " + asked.Program, here.Version + " " + here.Program},
		{"kind of processor", asked.Architecture, here.Architecture},
		{"map", asked.MapFingerprint, here.MapFingerprint},
		{"drive", asked.DriveSHA256, here.DriveSHA256},
		{"suite", asked.SuiteSHA256, here.SuiteSHA256},
	} {
		if x.asked != x.here {
			return fmt.Sprintf("another %s, %s, where %s was asked for", x.what, x.here, x.asked)
		}
	}
	return "other options"
}

// yaml is the suite of a unit, with its defaults.
func (u *unit) yaml() ([]byte, error) {
	suite := u.suite
	if suite == nil {
		suite = &sensor.Suite{}
	}
	return suite.YAML(u.dim())
}

// dim is of the places on the unit's map: 1 on roads, 2 on a plane.
func (u *unit) dim() int {
	if _, ok := u.drive.Map.Space.(filter.LineSpace); ok {
		return 1
	}
	return 2
}

// looked is what was read of drives, each once, whatever the number of settings.
type looked struct {
	mu sync.Mutex
	of map[*Drive]*glance
}

type glance struct {
	once   sync.Once
	header drivefile.Header
	sum    string
	err    error
}

// at looks at a drive.
func (l *looked) at(d *Drive) (drivefile.Header, string, error) {
	l.mu.Lock()
	if l.of == nil {
		l.of = map[*Drive]*glance{}
	}
	g := l.of[d]
	if g == nil {
		g = &glance{}
		l.of[d] = g
	}
	l.mu.Unlock()
	g.once.Do(func() {
		var seen *replay.Glance
		if seen, g.err = d.look(); g.err == nil {
			g.header, g.sum, g.err = seen.Header, seen.SHA256, seen.Close()
		}
	})
	return g.header, g.sum, g.err
}
