package report

import (
	"cmp"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"slices"

	"leadline/engine/study/compare"
	"leadline/engine/study/results"
	"leadline/engine/study/score"
	"leadline/engine/study/track"
)

// Input is what a report is made of.
type Input struct {
	// Dirs are folders of results; the first is what others are compared with.
	Dirs []string
	// Ground, if set, returns what lies under the tracks of a map, given its file
	// and its fingerprint. What it cannot find becomes a caution.
	Ground  func(path, fingerprint string) (*track.Ground, error)
	Version string
	Command []string // makes the report again
}

// Report is what the page shows; as JSON, all its figures.
type Report struct {
	Version     string                `json:"version"`
	Command     []string              `json:"command"`
	Cautions    []string              `json:"cautions"`
	Settings    []Setting             `json:"settings"`
	Comparisons []*compare.Comparison `json:"comparisons"`
	Runs        []*Run                `json:"runs"`

	grounds map[string]*track.Ground
}

// Run is a run that is shown.
type Run struct {
	Result string       `json:"result"` // the folder it was found under
	Run    results.Run  `json:"run"`
	Score  *score.Score `json:"score"`
	// Findings are what replay found suspicious, null where it did not look.
	Findings *results.Findings `json:"findings"`
	// Posteriors count the rows of each class, see Class.
	Posteriors map[string]int `json:"posteriors_by_class"`
	// Weak are the weakest stretches, the worst class first and then the longest;
	// WeakFound is how many there are.
	Weak      []Stretch `json:"weak_stretches"`
	WeakFound int       `json:"weak_stretches_found"`
	Drawn     bool      `json:"drawn"`

	dir    string
	series *series
	later  *series // smoothed, nil if it was not looked back over
}

// mostDrawn is how many runs have pictures: the worst ones. With mostPoints over
// all of them a page stays below 5 MB.
const (
	mostDrawn  = 60
	mostPoints = 10_000
)

// Make reads results and gathers what the page shows.
func Make(in Input) (*Report, error) {
	r := &Report{Version: in.Version, Command: in.Command, Cautions: []string{}, Settings: []Setting{}, Comparisons: []*compare.Comparison{}, grounds: map[string]*track.Ground{}}
	var found [][]*results.Result
	for i, dir := range in.Dirs {
		if slices.Contains(in.Dirs[:i], dir) {
			return nil, fmt.Errorf("%s is given twice: give each folder once", dir)
		}
		list, err := results.Find(dir)
		if err != nil {
			return nil, err
		}
		found = append(found, list)
		for _, x := range list {
			r.Runs = append(r.Runs, &Run{Result: dir, Run: x.Run, Score: x.Score, dir: x.Dir})
		}
	}
	r.choose()
	for _, run := range r.Runs {
		if err := run.read(len(r.Runs)); err != nil {
			return nil, err
		}
	}
	if err := r.compare(in.Dirs, found); err != nil {
		return nil, err
	}
	r.settings()
	r.caution(in)
	return r, nil
}

// choose marks the runs that are drawn.
func (r *Report) choose() {
	worst := slices.Clone(r.Runs)
	bad := func(x *Run) float64 {
		switch f := x.Score.Figures; {
		case x.Score.LocatedAfterS == nil:
			return math.Inf(1)
		case f.P95M != nil:
			return *f.P95M
		}
		return 0
	}
	slices.SortStableFunc(worst, func(a, b *Run) int { return cmp.Compare(bad(b), bad(a)) })
	for _, x := range worst[:min(len(worst), mostDrawn)] {
		x.Drawn = true
	}
}

// read gathers what a run's table of posteriors holds.
func (x *Run) read(runs int) error {
	most := max(150, min(600, mostPoints/max(1, min(runs, mostDrawn))))
	var err error
	x.series, err = x.table(results.TableFile, most)
	if errors.Is(err, fs.ErrNotExist) {
		return fmt.Errorf("%s holds no %s: make it again with `leadline replay --out`", x.dir, results.TableFile)
	}
	if err != nil {
		return err
	}
	if l := x.Score.LookedBack; l != nil && l.Smoothed != nil {
		if x.later, err = x.table(results.SmoothedFile, most); err != nil {
			return err
		}
	}
	var f results.Findings
	switch err := results.ReadJSON(filepath.Join(x.dir, results.FindingsFile), &f); {
	case err == nil:
		x.Findings = &f
	case !errors.Is(err, fs.ErrNotExist):
		return err
	}
	x.Posteriors = x.series.counts()
	x.Weak, x.WeakFound = x.series.weak.worst()
	return nil
}

// table reads a table of posteriors.
func (x *Run) table(name string, most int) (*series, error) {
	path := filepath.Join(x.dir, name)
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	s := newSeries(x.Run.AlertLimitM, most)
	for row, err := range track.Rows(f, path) {
		if err != nil {
			return nil, err
		}
		s.add(row)
	}
	return s, nil
}

// compare sets further folders against the first, or further settings of one.
func (r *Report) compare(dirs []string, found [][]*results.Result) error {
	names := dirs
	if len(dirs) == 1 {
		var sides [][]*results.Result
		names = nil
		for _, x := range found[0] {
			if len(names) == 0 || names[len(names)-1] != x.Setting {
				names, sides = append(names, x.Setting), append(sides, nil)
			}
			sides[len(sides)-1] = append(sides[len(sides)-1], x)
		}
		found = sides
	}
	for i := 1; i < len(found); i++ {
		c, err := compare.Of(found[0], found[i])
		if err != nil { // nothing in common: they stand beside each other
			r.Cautions = append(r.Cautions, fmt.Sprintf("%s is not compared with %s: %v.", names[i], names[0], err))
			continue
		}
		c.A, c.B = names[0], names[i]
		r.Comparisons = append(r.Comparisons, c)
	}
	return nil
}

// Setting sums up the runs of a setting in a folder; means are over the drives
// that have the figure.
type Setting struct {
	Result       string   `json:"result"`
	Setting      string   `json:"setting"`
	HeldOut      bool     `json:"held_out"`
	Drives       int      `json:"drives"`
	NeverLocated int      `json:"never_located"`
	RMSEM        *float64 `json:"mean_rmse_m"`
	P95M         *float64 `json:"mean_p95_m"`
	Coverage95   *float64 `json:"mean_coverage95"`
	CRPSM        *float64 `json:"mean_crps_m"`
	LogEvidence  float64  `json:"log_evidence"`
	Beyond       int      `json:"beyond_protection"`
}

func (r *Report) settings() {
	type sum struct{ n, of float64 }
	var sums [][4]sum
	for _, x := range r.Runs {
		i := slices.IndexFunc(r.Settings, func(s Setting) bool {
			return s.Result == x.Result && s.Setting == x.Run.Setting && s.HeldOut == x.Run.HeldOut
		})
		if i < 0 {
			i = len(r.Settings)
			r.Settings = append(r.Settings, Setting{Result: x.Result, Setting: x.Run.Setting, HeldOut: x.Run.HeldOut})
			sums = append(sums, [4]sum{})
		}
		s := &r.Settings[i]
		s.Drives++
		s.LogEvidence += x.Score.LogEvidence
		if x.Score.LocatedAfterS == nil {
			s.NeverLocated++
		}
		if n := x.Score.Figures.BeyondProtection; n != nil {
			s.Beyond += *n
		}
		for k, v := range []*float64{x.Score.Figures.RMSEM, x.Score.Figures.P95M, x.Score.Figures.Coverage95, x.Score.CRPSM} {
			if v != nil {
				sums[i][k].n, sums[i][k].of = sums[i][k].n+1, sums[i][k].of+*v
			}
		}
	}
	for i := range r.Settings {
		for k, into := range []**float64{&r.Settings[i].RMSEM, &r.Settings[i].P95M, &r.Settings[i].Coverage95, &r.Settings[i].CRPSM} {
			if s := sums[i][k]; s.n > 0 {
				mean := s.of / s.n
				*into = &mean
			}
		}
	}
}

// name tells a run from the others of the report.
func (x *Run) name(r *Report) string {
	name := x.Run.Drive
	for _, other := range r.Runs {
		if other.Run.Setting != x.Run.Setting {
			name += " · " + x.Run.Setting
			break
		}
	}
	for _, other := range r.Runs {
		if other.Result != x.Result {
			return name + " · " + x.Result
		}
	}
	return name
}
