package sweep

import (
	"bufio"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"slices"

	"leadline/engine/drivefile"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/diagnose"
	"leadline/engine/study/replay"
	"leadline/engine/study/results"
	"leadline/engine/study/score"
)

// Outcome is what came out of a run.
type Outcome struct {
	Drive   *Drive
	Setting *Setting
	HeldOut bool
	Dir     string // its folder, "" if none is written
	Run     results.Run
	Score   *score.Score // nil if nothing could be run
	Timing  replay.Timing
	// Resumed says that an earlier run left the same.
	Resumed bool
	// Err is why it could not be run, or not to its end.
	Err error
	// Kept is what diagnoses need, if the job keeps it.
	Kept *Kept
}

// Kept is a run with its drive in memory.
type Kept struct {
	Drive  *drivefile.Drive
	Config session.Config
	Truth  []score.Truth
	Record *diagnose.Record
	Result *replay.Result
}

// run runs a unit.
func (j *Job) run(ctx context.Context, u unit) *Outcome {
	o := &Outcome{Drive: u.drive, Setting: u.setting, HeldOut: u.heldOut}
	read := int64(0)
	if j.Meter != nil {
		defer func() { j.Meter.Done(u.drive.Bytes - read) }()
	}
	if err := ctx.Err(); err != nil {
		o.Err = err
		return o
	}
	w := &work{job: j, unit: u, out: o, read: &read}
	if err := w.do(ctx); err != nil {
		o.Err = err
		if o.Score != nil {
			return o
		}
	}
	return o
}

// work is a unit under way.
type work struct {
	job    *Job
	unit   unit
	out    *Outcome
	read   *int64
	header drivefile.Header
	truth  []score.Truth
	config session.Config
	sinks  *sinks
	dir    string // being written
	hash   string // of the posteriors
	back   lookback

	lagging *lagging // nil: nobody asks
}

func (w *work) do(ctx context.Context) (err error) {
	u, j := w.unit, w.job
	sum, done, err := w.look()
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, done()) }()
	w.config = session.Config{Space: u.drive.Map.Space, Names: u.drive.Map.Names, Suite: u.suite, MaxCells: u.cells}
	if w.out.Run, err = w.describe(sum); err != nil {
		return err
	}
	if u.key != "" && w.out.Run.Key != u.key {
		return ErrOther
	}
	if j.Dir != "" {
		w.out.Dir = j.folder(u)
		if !j.Again && w.resume() {
			return nil
		}
		w.dir = filepath.Join(filepath.Dir(w.out.Dir), fmt.Sprintf(".%s.%d", u.drive.Name, os.Getpid()))
		if err := os.MkdirAll(w.dir, 0o755); err != nil {
			return fmt.Errorf("--out: %w: give a folder that this program may make and write", err)
		}
		defer os.RemoveAll(w.dir)
	}
	if j.Elsewhere != nil {
		return w.elsewhere(ctx)
	}
	defer w.back.events.drop()
	res, stopped := w.replay(ctx)
	var line *drivefile.Error
	if stopped != nil && !errors.As(stopped, &line) && !errors.Is(stopped, context.Canceled) { // others do not say where
		stopped = fmt.Errorf("%s: %w", u.drive.Path, stopped)
	}
	if w.sinks != nil {
		defer w.sinks.drop()
	}
	if res == nil {
		return stopped
	}
	if stopped != nil {
		w.out.Run.Partial, w.out.Run.Stopped = true, reason(stopped)
	}
	w.hash = res.Hash
	if err := w.finish(ctx, res); err != nil {
		return err
	}
	return stopped
}

// reason words why a run ended before its drive.
func reason(err error) string {
	if errors.Is(err, context.Canceled) {
		return "interrupted"
	}
	return err.Error()
}

// look reads header and truth, and the file's hash; close gives the truth back.
func (w *work) look() (sum string, close func() error, err error) {
	if w.job.Elsewhere != nil {
		w.header, sum, err = w.job.looked.at(w.unit.drive)
		return sum, func() error { return nil }, err
	}
	g, err := w.unit.drive.look()
	if err != nil {
		return "", nil, err
	}
	w.header, w.truth = g.Header, g.Truth
	return g.SHA256, g.Close, nil
}

func (d *Drive) look() (*replay.Glance, error) {
	f, err := d.open()
	if err != nil {
		return nil, err
	}
	defer f.Close()
	return replay.Look(f, d.Path)
}

func (d *Drive) open() (*os.File, error) {
	if d.File != "" {
		return os.Open(d.File)
	}
	return os.Open(d.Path)
}

// describe says what a run is made of, and sums up what its results depend on.
func (w *work) describe(driveSHA256 string) (results.Run, error) {
	u, j := w.unit, w.job
	suite := u.suite
	if suite == nil {
		suite = &sensor.Suite{}
	}
	yaml, err := u.yaml()
	if err != nil {
		return results.Run{}, err
	}
	r := results.Run{
		Drive: u.drive.Name, DriveFile: u.drive.Path, DriveSHA256: driveSHA256, Vehicle: w.header.Vehicle,
		Map: u.drive.Map.Path, MapFingerprint: u.drive.Map.Space.Fingerprint(), MapSource: u.drive.Map.Source, MapLicence: u.drive.Map.Licence,
		Suite: u.drive.SuiteName, SuiteSHA256: hash(yaml), Setting: u.setting.Name, Set: []string{}, HeldOut: u.heldOut, Places: []results.Place{},
		MaxCells: u.cells, AlertLimitM: suite.For(u.dim()).Vehicle.AlertLimitM, TruthOffset: j.TruthOffset,
		Version: j.Version, Program: j.Program, Architecture: runtime.GOARCH, Command: j.Command,
	}
	for _, c := range u.setting.Changes {
		r.Set = append(r.Set, c.String())
	}
	place := func(name string, at geo.LonLat) {
		lon, lat := at.Degrees()
		r.Places = append(r.Places, results.Place{Name: name, Lon: lon, Lat: lat})
	}
	for _, p := range suite.Posts {
		place(p.ID, p.Position())
	}
	for _, b := range suite.Beacons {
		place(b.ID, b.Position())
	}
	key, err := json.Marshal([]any{
		r.DriveSHA256, r.MapFingerprint, string(yaml), r.MaxCells, r.TruthOffset, j.EstimateTruth, j.HoldOutFixes, j.Beliefs, j.Smooth, j.Path, j.LagS,
		r.Version, r.Program, r.Architecture,
	})
	if err != nil {
		return r, err
	}
	r.Key = hash(key)
	return r, nil
}

func hash(b []byte) string {
	sum := sha256.Sum256(b)
	return hex.EncodeToString(sum[:])
}

// resume takes the result that an earlier run left, if it is of the same and whole.
func (w *work) resume() bool {
	r, err := results.Read(w.out.Dir)
	if err != nil || r.Partial || r.Key != w.out.Run.Key || w.job.Program == "" {
		return false
	}
	if results.ReadJSON(filepath.Join(w.out.Dir, results.TimingFile), &w.out.Timing) != nil {
		return false
	}
	for name, wanted := range map[string]bool{results.GPXFile: w.job.GPX, results.ParquetFile: w.job.Parquet} {
		if _, err := os.Stat(filepath.Join(w.out.Dir, name)); wanted && err != nil {
			return false
		}
	}
	w.out.Run.Accepted, w.out.Run.Refused, w.out.Run.FirstRefusal = r.Accepted, r.Refused, r.FirstRefusal
	w.out.Score, w.out.Resumed = r.Score, true
	// Who asks, and whether the drive is held out, may be new.
	if err := results.WriteJSON(filepath.Join(w.out.Dir, results.RunFile), w.out.Run); err != nil {
		return false
	}
	return true
}

// replay runs the drive: as it is read, or whole if it is kept or out of order.
func (w *work) replay(ctx context.Context) (*replay.Result, error) {
	if w.job.Keep && w.unit.drive.Bytes <= MostKept {
		return w.whole(ctx)
	}
	if err := w.begin(); err != nil {
		return nil, err
	}
	f, err := w.unit.drive.open()
	if err != nil {
		return nil, err
	}
	defer f.Close()
	o := replay.StreamOptions{Final: w.sinks.final, Watch: w.sinks.innovations.Add, Progress: w.progress, Moments: w.moments(), Belief: w.belief, Settled: w.settled()}
	if w.job.HoldOutFixes {
		o.BeforeFix = w.sinks.fixes.Add
	}
	res, err := replay.Stream(ctx, f, w.unit.drive.Path, w.config, o)
	if errors.Is(err, replay.ErrDisordered) {
		return w.whole(ctx)
	}
	return res, err
}

func (w *work) whole(ctx context.Context) (*replay.Result, error) {
	f, err := w.unit.drive.open()
	if err != nil {
		return nil, err
	}
	defer f.Close()
	d, stopped := drivefile.ReadAll(bufio.NewReader(f), w.unit.drive.Path)
	if d == nil || len(d.Events) == 0 && stopped != nil {
		return nil, stopped
	}
	if err := w.begin(); err != nil {
		return nil, err
	}
	var record diagnose.Record
	o := replay.Options{
		Watch: func(c session.Change) { record.Add(c); w.sinks.innovations.Add(c) },
		Progress: func(done, total int) {
			w.progress(int64(float64(w.unit.drive.Bytes)*float64(done)/float64(total))-*w.read, done-w.sinks.told)
			w.sinks.told = done
		},
	}
	o.Stop, o.Moments, o.Belief, o.Settled = ctx.Err, w.moments(), w.belief, w.settled()
	if w.job.HoldOutFixes {
		o.BeforeFix = w.sinks.fixes.Add
	}
	res, err := replay.Run(d, w.config, o)
	if res == nil {
		return nil, err
	}
	for _, p := range res.Posteriors {
		w.sinks.final(p)
	}
	if w.job.Keep {
		w.out.Kept = &Kept{d, w.config, slices.Clone(w.truth), &record, res}
	}
	return res, errors.Join(stopped, err)
}

func (w *work) progress(bytes int64, measurements int) {
	bytes = max(bytes, 0)
	*w.read += bytes
	if w.job.Meter != nil {
		w.job.Meter.Read(bytes, measurements)
	}
}

// begin opens what a run writes, anew if it was begun before.
func (w *work) begin() (err error) {
	if w.sinks != nil {
		w.sinks.drop()
	}
	w.back.events.drop()
	w.back, w.lagging = lookback{}, nil
	if w.sinks, err = newSinks(w); err != nil {
		return err
	}
	return w.lag()
}

// finish writes what sums a run up, and puts its folder in its place.
func (w *work) finish(ctx context.Context, res *replay.Result) (err error) {
	o := w.out
	back, err := w.lookBack(ctx)
	switch {
	case errors.Is(err, context.Canceled):
		o.Run.Partial, o.Run.Stopped = true, reason(err)
	case err != nil:
		return err
	}
	lagged, err := w.lagging.end(w.job.LagS)
	if err != nil {
		return err
	}
	if err := w.sinks.close(); err != nil {
		return err
	}
	s, err := w.sinks.scorer.Score(int64(res.Start), res.Hash)
	if err != nil {
		return fmt.Errorf("%s: comparing with the truth: %w", w.unit.drive.Path, err)
	}
	s.Sensors, s.LookedBack, s.Lagged = w.sinks.innovations.End(), back, lagged
	if w.job.HoldOutFixes {
		s.HeldOutFixes = w.sinks.fixes.End()
	}
	s.Partial, s.Stopped = o.Run.Partial, o.Run.Stopped
	o.Run.Accepted, o.Run.Refused = res.Accepted, res.Refused
	if len(res.Refusals) > 0 {
		o.Run.FirstRefusal = res.Refusals[0].Error()
	}
	o.Timing = res.Timing
	if w.dir != "" {
		for name, v := range map[string]any{results.ScoreFile: s, results.TimingFile: res.Timing, results.RunFile: o.Run} {
			if err := results.WriteJSON(filepath.Join(w.dir, name), v); err != nil {
				return err
			}
		}
		if err := errors.Join(w.sinks.picture(w), w.settle()); err != nil {
			return err
		}
	}
	o.Score = s
	return nil
}

// settle puts the folder that was written in the place of what was there.
func (w *work) settle() error {
	if err := os.RemoveAll(w.out.Dir); err != nil {
		return fmt.Errorf("--out: %w", err)
	}
	if err := os.Rename(w.dir, w.out.Dir); err != nil {
		return fmt.Errorf("--out: %w", err)
	}
	return nil
}
