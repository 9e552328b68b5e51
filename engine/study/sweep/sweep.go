// Package sweep replays many drives with many settings, several at a time, and
// keeps what each leaves in a folder of its own (package results). A run depends
// on its drive, map, suite and setting alone, so that results are the same however
// many run at a time and in whatever order.
package sweep

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"sync"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/replay"
	"leadline/engine/study/score"
	"leadline/engine/study/track"
)

// Map is a compiled map that is open. It is read by several runs at a time.
type Map struct {
	Path            string
	Source, Licence string
	Space           filter.Space
	Names           session.Names
	Near            func(at geo.LonLat, radiusM float64) []score.Road // nil on a plane
	Ground          func() track.Ground                               // under pictures
}

// Drive is a drive file that is to be replayed.
type Drive struct {
	Path, Name string
	// File is where it is read, if that is not Path, by which results name it.
	File      string
	Bytes     int64
	Map       *Map
	Suite     *sensor.Suite // nil is the default
	SuiteName string
}

// Job is what is to be done.
type Job struct {
	Drives   []Drive
	Settings []Setting // none: the one in which nothing is changed
	// HoldOut are patterns of the names of drives that no setting is to be chosen
	// by: they are summed up on their own.
	HoldOut  []string
	MaxCells int
	// Dir is where results go; "" writes none.
	Dir string
	// Again runs what is there already.
	Again bool
	// Parallel is how many run at a time; 0 is as many as there are processors.
	Parallel int
	// Keep has outcomes hold what diagnoses need, for drives of at most MostKept
	// bytes.
	Keep bool

	TruthOffset   score.Offset
	EstimateTruth bool
	HoldOutFixes  bool
	// Smooth and Path have each drive looked back over, and written as it is known
	// then, and as its most probable path.
	Smooth, Path bool
	// LagS, above 0, has it written what was known of times so many seconds ago.
	LagS float64

	// GPX and Parquet have tracks written in these forms, too.
	GPX, Parquet bool
	// Beliefs are times at which the whole belief is written.
	Beliefs []replay.Moment

	Version, Program string
	Command          []string
	// Meter, if set, is told how far it is.
	Meter Meter

	// Elsewhere, if set, has runs done on other machines; Parallel is then how many
	// are asked for at a time.
	Elsewhere Elsewhere
	looked    looked
}

// Meter is told how far a job is; several goroutines call it.
type Meter interface {
	// Begin says how much there is, in bytes of drives and in runs.
	Begin(bytes int64, runs int)
	// Read says how much more of a run was read; Done that one is through, and how
	// many of its bytes were not read.
	Read(bytes int64, measurements int)
	Done(unread int64)
}

// MostKept bounds the drives that are kept in memory for what diagnoses need.
const MostKept = 64 << 20

// Setting and drive of a run, by their numbers in the job.
type unit struct {
	setting *Setting
	drive   *Drive
	suite   *sensor.Suite
	cells   int
	heldOut bool
	// key is what the run must be made of, "" where nobody has said so before.
	key string
}

// units are the job's runs, the settings applied, so that what is wrong with one
// is said before the first.
func (j *Job) units() ([]unit, error) {
	settings := j.Settings
	if len(settings) == 0 {
		settings = []Setting{given}
	}
	names := map[string]string{}
	for _, d := range j.Drives {
		if other, ok := names[d.Name]; ok && j.Dir != "" {
			return nil, fmt.Errorf("%s and %s have one name, and so one folder under --out: rename one", other, d.Path)
		}
		names[d.Name] = d.Path
	}
	for _, p := range j.HoldOut {
		if err := CheckPattern(p); err != nil {
			return nil, err
		}
		if !slices.ContainsFunc(j.Drives, func(d Drive) bool { return matches([]string{p}, d.Name) }) {
			return nil, fmt.Errorf("no drive has a name like %q, which is to be held out: there are %s", p, someNames(j.Drives))
		}
	}
	var out []unit
	held := 0
	for i := range settings {
		for k := range j.Drives {
			d := &j.Drives[k]
			u := unit{setting: &settings[i], drive: d, heldOut: matches(j.HoldOut, d.Name)}
			var err error
			if u.suite, u.cells, err = settings[i].apply(d.Suite, j.MaxCells); err != nil {
				return nil, fmt.Errorf("%s: %w", d.Name, err)
			}
			if u.heldOut {
				held++
			}
			out = append(out, u)
		}
	}
	if len(j.HoldOut) > 0 && (held == 0 || held == len(out)) {
		return nil, fmt.Errorf("of %d drives %d are held out: hold some out and keep some", len(j.Drives), held/len(settings))
	}
	return out, nil
}

// someNames are the names of the first drives.
func someNames(drives []Drive) string {
	const most = 5
	var names []string
	for _, d := range drives[:min(most, len(drives))] {
		names = append(names, d.Name)
	}
	text := strings.Join(names, ", ")
	if n := len(drives) - most; n > 0 {
		text += fmt.Sprintf(" and %d more", n)
	}
	return text
}

// Run runs a job. each is given the outcomes in the order of settings and drives,
// one at a time, as soon as it can be; what it returns ends the job. A drive that
// cannot be run does not end it: the outcome has the error. Where ctx ends, what is
// done stays, what is under way is cut short and marked partial, and the summary
// says so.
func (j *Job) Run(ctx context.Context, each func(*Outcome) error) (*Summary, error) {
	units, err := j.units()
	if err != nil {
		return nil, err
	}
	if j.Meter != nil {
		total := int64(0)
		for _, u := range units {
			total += u.drive.Bytes
		}
		j.Meter.Begin(total, len(units))
	}
	sum := newSummary()
	ctx, cancel := context.WithCancelCause(ctx)
	defer cancel(nil)
	for o := range j.outcomes(ctx, units) {
		if o.Err != nil && errors.Is(o.Err, context.Cause(ctx)) && o.Score == nil {
			continue // not begun
		}
		sum.add(o)
		if err := each(o); err != nil {
			cancel(err)
			return nil, err
		}
	}
	if j.Dir != "" {
		for _, u := range units {
			os.Remove(filepath.Dir(j.folder(u))) // that of a setting of which no run was kept: it is empty
		}
	}
	sum.Partial = ctx.Err() != nil || sum.Runs < len(units)
	if err := sum.end(j); err != nil {
		return nil, err
	}
	return sum, nil
}

// outcomes runs units, several at a time, and gives what came out in their order.
// No more than as many as run wait for those before them.
func (j *Job) outcomes(ctx context.Context, units []unit) func(func(*Outcome) bool) {
	return func(yield func(*Outcome) bool) {
		parallel := j.Parallel
		if parallel < 1 {
			parallel = runtime.GOMAXPROCS(0)
		}
		ctx, cancel := context.WithCancel(ctx)
		var wait sync.WaitGroup
		defer wait.Wait()
		defer cancel()
		type slot struct {
			unit int
			out  chan *Outcome
		}
		work := make(chan slot)
		order := make(chan slot, parallel)
		for range min(parallel, len(units)) {
			wait.Go(func() {
				for s := range work {
					s.out <- j.run(ctx, units[s.unit])
				}
			})
		}
		wait.Go(func() {
			defer close(order)
			defer close(work)
			for i := range units {
				s := slot{i, make(chan *Outcome, 1)}
				select {
				case order <- s:
				case <-ctx.Done():
					return
				}
				select {
				case work <- s:
				case <-ctx.Done():
					s.out <- &Outcome{Drive: units[i].drive, Setting: units[i].setting, Err: ctx.Err()}
					return
				}
			}
		})
		for s := range order {
			if !yield(<-s.out) {
				cancel()
				for range order { // let the others end
				}
				return
			}
		}
	}
}

// folder is where a run's files go.
func (j *Job) folder(u unit) string { return filepath.Join(j.Dir, u.setting.Name, u.drive.Name) }
