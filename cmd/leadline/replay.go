package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"time"

	"github.com/spf13/cobra"

	"leadline/engine/study/results"
	"leadline/engine/study/score"
	"leadline/engine/study/sweep"
)

type replayOptions struct {
	mapPath, suite, dir string
	asJSON              bool
	allowRefused        bool
	maxCells            int
	diagnose, explain   string
	explainWithin       time.Duration

	set, holdOut  []string
	settings      string
	parallel      int
	again         bool
	truthOffset   []float64
	estimateTruth bool
	holdOutFixes  bool
	smooth, path  bool
	lag           time.Duration
	also          []string
	beliefAt      []string
	over          overOptions
}

func replayCommand() *cobra.Command {
	var o replayOptions
	c := &cobra.Command{
		Use:   "replay DRIVE... --map MAP",
		Short: "Run recorded drives and compare them with the truth they hold",
		Long: `Replay runs recorded drives through the filter and compares them with the truth
they hold. Several run at a time; results do not depend on how many. With --set or
--settings it runs each drive with each of several settings. An interrupt keeps
what is done; the same command goes on from there.`,
		Args: cobra.MinimumNArgs(1),
		RunE: func(c *cobra.Command, args []string) error { return replayDrives(c, o, args) },
	}
	f := c.Flags()
	f.StringVar(&o.mapPath, "map", "", "compiled map; without it the map that the drive's header names, beside the drive")
	f.StringVar(&o.suite, "suite", "", "suite file or starter name, in place of the one that the drive's header names")
	f.StringVar(&o.dir, "out", "", "write DIR/SETTING/DRIVE/{track.csv, track.geojson, track.png, score.json, timing.json, run.json}; SETTING is "+results.Given+" where nothing is varied")
	f.BoolVar(&o.asJSON, "json", false, "print the scores as JSON, one object a line; of a sweep the summary")
	f.BoolVar(&o.allowRefused, "allow-refused", false, "exit with status 0 although measurements were refused")
	f.StringVar(&o.diagnose, "diagnose", diagnoseAuto, "try the opening again with each usual mistake undone: always, never, or auto, when the run is suspect")
	f.StringVar(&o.explain, "explain", "", "say which measurement moved the belief how much around this time: RFC 3339, or seconds after the first measurement")
	f.DurationVar(&o.explainWithin, "explain-within", 2*time.Second, "how far around that time")
	f.IntVar(&o.maxCells, "max-cells", defaultCells, "greatest number of cells of a belief; decides how finely a wide start is searched")
	f.StringArrayVar(&o.set, "set", nil, "KEY=VALUE of the suite, or session.max_cells=N; repeat. A key with several values has each combination run")
	f.StringVar(&o.settings, "settings", "", "YAML file of settings to run: vary, settings, hold_out")
	f.StringArrayVar(&o.holdOut, "hold-out", nil, "sum up the drives of this name, * for any part of it, on their own; repeat")
	f.IntVar(&o.parallel, "parallel", 0, "how many run at a time; 0 is as many as there are processors")
	f.BoolVar(&o.again, "again", false, "run again what --out holds already")
	f.Float64SliceVar(&o.truthOffset, "truth-offset", nil, "where and when the truth is measured: FORWARD,RIGHT,LATE in metres from the vehicle's reference point and seconds")
	f.BoolVar(&o.estimateTruth, "estimate-truth-offset", false, "say in the score what that might be; it is not taken off")
	f.BoolVar(&o.holdOutFixes, "hold-out-fixes", false, "compare each satellite fix with what was known just before it")
	f.BoolVar(&o.smooth, "smooth", false, "look back over each drive: what is known of each time given all of it, in smoothed.csv and smoothed.geojson")
	f.BoolVar(&o.path, "path", false, "look back for the most probable path, in path.csv and path.geojson")
	f.DurationVar(&o.lag, "lag", 0, "say of times now and then what was known so long after them, in lagged.csv and lagged.geojson; at most 1h")
	f.StringSliceVar(&o.also, "also", nil, "write tracks in these forms, too: gpx, parquet")
	f.StringArrayVar(&o.beliefAt, "belief-at", nil, "write the whole belief at this time, RFC 3339 or seconds after the first measurement, for a GIS; repeat")
	o.over.flags(c)
	settable(c, "max-cells")
	return c
}

func replayDrives(c *cobra.Command, o replayOptions, paths []string) error {
	if o.maxCells < 1 {
		return fmt.Errorf("--max-cells is %d: give a whole number, 1 or more", o.maxCells)
	}
	if o.lag < 0 || o.lag > time.Hour {
		return fmt.Errorf("--lag is %v: give more than 0 and at most 1h, such as 10s", o.lag)
	}
	if err := o.checkStudies(); err != nil {
		return err
	}
	maps := map[string]*mapFile{}
	defer func() {
		for _, m := range maps {
			m.Close()
		}
	}()
	job, err := o.job(maps, paths)
	if err != nil {
		return err
	}
	varied := len(job.Settings) > 0
	meter := newMeter(c.ErrOrStderr(), "replaying")
	defer meter.end()
	job.Meter = meter
	ctx, stop := untilSignal()
	defer stop()
	all := max(1, len(job.Settings)) * len(paths)
	if o.over.broker.URL != "" {
		queue, err := o.handOver(ctx, job, meter)
		if err != nil {
			if ctx.Err() != nil {
				return o.interrupted(0, all)
			}
			return err
		}
		defer queue.Close()
	}
	var failed []error
	sum, err := job.Run(ctx, func(out *sweep.Outcome) error {
		meter.end()
		defer meter.resume()
		if out.Err != nil && !errors.Is(out.Err, context.Canceled) {
			failed = append(failed, out.Err)
		}
		if out.Score == nil {
			return nil
		}
		if n := out.Run.Refused; n > 0 && !o.allowRefused {
			failed = append(failed, fmt.Errorf("%s: %d of %d measurements were refused, first %s; with --allow-refused this is no error",
				out.Drive.Path, n, n+out.Run.Accepted, out.Run.FirstRefusal))
		}
		if varied {
			return nil
		}
		return o.say(ctx, c, maps[out.Drive.Map.Path], out)
	})
	meter.end()
	if err != nil {
		return err
	}
	switch {
	case varied && o.asJSON:
		err = printJSON(c.OutOrStdout(), sum)
	case varied:
		err = printSweep(c.OutOrStdout(), sum)
	}
	if err == nil {
		err = firstOf(failed)
	}
	if ctx.Err() != nil {
		cut := o.interrupted(sum.Runs-sum.CutShort, all)
		if err != nil {
			cut = failure{fmt.Errorf("%w; besides, %w", cut, err)}
		}
		return cut
	}
	return err
}

// firstOf is the first of the errors of runs, with how many more there were.
func firstOf(failed []error) error {
	switch n := len(failed); n {
	case 0:
		return nil
	case 1:
		return failed[0]
	case 2:
		return fmt.Errorf("%w (and one more run)", failed[0])
	default:
		return fmt.Errorf("%w (and %d more runs)", failed[0], n-1)
	}
}

// interrupted says what is left of a replay that a signal ended after so many whole runs
// of all.
func (o *replayOptions) interrupted(whole, all int) error {
	kept := "nothing was kept: give --out"
	if o.dir != "" {
		kept = fmt.Sprintf("what is done is in %s, and the same command goes on from there", o.dir)
	}
	if whole == all {
		kept = "all scores are above; what was to be tried or explained after them is not"
	}
	return failure{fmt.Errorf("interrupted after %d of %d runs: %s", whole, all, kept)}
}

// job is what is to be run; the maps that it opens go into maps.
func (o *replayOptions) job(maps map[string]*mapFile, paths []string) (*sweep.Job, error) {
	job := &sweep.Job{
		HoldOut: o.holdOut, MaxCells: o.maxCells, Dir: o.dir, Parallel: o.parallel,
		Again:         o.again || o.explain != "" || o.diagnose == diagnoseAlways,
		EstimateTruth: o.estimateTruth, HoldOutFixes: o.holdOutFixes, Smooth: o.smooth, Path: o.path, LagS: o.lag.Seconds(),
		Version: versionText(), Program: programSHA256(), Command: append([]string{"leadline"}, withoutWhere(os.Args[1:])...),
	}
	if err := o.outputs(job); err != nil {
		return nil, err
	}
	switch n := len(o.truthOffset); {
	case n == 3:
		job.TruthOffset = score.Offset{ForwardM: o.truthOffset[0], RightM: o.truthOffset[1], LateS: o.truthOffset[2]}
	case n > 0:
		return nil, fmt.Errorf("--truth-offset has %d numbers: give three, FORWARD,RIGHT,LATE", n)
	}
	if o.parallel < 0 {
		return nil, fmt.Errorf("--parallel is %d: give a whole number, 0 or more", o.parallel)
	}
	if err := o.vary(job); err != nil {
		return nil, err
	}
	job.Keep = len(job.Settings) == 0
	opened := map[string]*sweep.Map{}
	for _, path := range paths {
		d, err := o.drive(maps, opened, path)
		if err != nil {
			return nil, err
		}
		job.Drives = append(job.Drives, *d)
	}
	return job, nil
}

// vary adds the settings that the flags or a file ask for.
func (o *replayOptions) vary(job *sweep.Job) error {
	if o.settings != "" {
		if len(o.set) > 0 {
			return errors.New("--set and --settings both say what to vary: give one of them")
		}
		text, err := readYAML("--settings", o.settings)
		if err != nil {
			return err
		}
		plan, err := sweep.ParsePlan(o.settings, text)
		if err != nil {
			return err
		}
		if len(plan.Settings) == 0 {
			return fmt.Errorf("settings %s: it has no settings: give vary or settings", o.settings)
		}
		job.Settings, job.HoldOut = plan.Settings, append(job.HoldOut, plan.HoldOut...)
		return nil
	}
	var changes []sweep.Change
	for _, text := range o.set {
		change, err := sweep.ParseChange(text)
		if err != nil {
			return fmt.Errorf("--set: %w", err)
		}
		changes = append(changes, change)
	}
	if len(changes) == 0 {
		return nil
	}
	var err error
	if job.Settings, err = sweep.Combine(changes); err != nil {
		return fmt.Errorf("--set: %w", err)
	}
	return nil
}

// drive looks at a drive file and opens its map.
func (o *replayOptions) drive(maps map[string]*mapFile, opened map[string]*sweep.Map, path string) (*sweep.Drive, error) {
	header, bytes, err := driveHeader(path)
	if err == nil {
		err = vehicles(header, path)
	}
	if err != nil {
		return nil, err
	}
	mapPath := o.mapPath
	if mapPath == "" {
		if mapPath, err = headerMap(header.Map, path); err != nil {
			return nil, err
		}
	}
	if opened[mapPath] == nil {
		m, err := openMap(mapPath)
		if err != nil {
			return nil, err
		}
		maps[mapPath], opened[mapPath] = m, m.forStudies()
	}
	suite, err := driveSuite(o.suite, header.Suite, path)
	if err != nil {
		return nil, err
	}
	name := o.suite
	if name == "" {
		name = header.Suite
	}
	return &sweep.Drive{Path: path, Name: driveName(path), Bytes: bytes, Map: opened[mapPath], Suite: suite, SuiteName: name}, nil
}

// say prints a run's score and what its studies find. A person reads what is
// known before the studies begin, which take longer than the replay.
func (o *replayOptions) say(ctx context.Context, c *cobra.Command, m *mapFile, run *sweep.Outcome) error {
	out := c.OutOrStdout()
	why := &studies{}
	if ctx.Err() != nil {
		run.Kept = nil // what was cut short is no drive to look at
	}
	if run.Kept != nil {
		var err error
		if why, err = look(run.Kept, run.Drive.Path); err != nil {
			return err
		}
	}
	if !o.asJSON {
		err := errors.Join(printScore(out, run), why.printFindings(out))
		if err == nil && run.Kept != nil && o.tries(why.Findings) {
			_, err = fmt.Fprintln(out, "  next         usual mistakes are tried, which may take minutes; --diagnose never leaves that out")
		}
		if err != nil {
			return err
		}
	}
	if run.Kept != nil {
		if err := o.study(ctx, c.ErrOrStderr(), why, m, run.Kept, run.Drive.Path); err != nil {
			return err
		}
		if err := why.keep(run.Dir); err != nil {
			return err
		}
	}
	if o.asJSON {
		return printJSONLine(out, struct {
			*score.Score
			*studies
		}{run.Score, why})
	}
	return why.print(out)
}
