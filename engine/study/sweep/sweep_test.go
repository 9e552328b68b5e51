package sweep

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"

	"leadline/engine/drivefile"
	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/study/results"
	"leadline/engine/study/score"
)

var origin = geo.FromDegrees(-30, 45) // in the open Atlantic

// open is invented open water.
var open = sync.OnceValue(func() *Map { return &Map{Path: "open", Source: "INVENTED", Space: plane.Open(origin, 20e3, 100)} })

// sail writes an invented drive: fixes twice a second, a displacement each second,
// east at 10 m/s, some metres off.
func sail(t *testing.T, dir, name string, seconds int) Drive {
	t.Helper()
	frame := geo.NewFrame(origin)
	path := filepath.Join(dir, name+drivefile.Suffix)
	var b bytes.Buffer
	w := drivefile.NewWriter(&b)
	check := func(err error) {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
	}
	check(w.Write(&drivefile.Record{Header: &drivefile.Header{Vehicle: name, Start: drivefile.Start{Point: origin, SigmaM: 10}}}))
	const second = sensor.Time(1e9)
	for k := 1; k <= 2*seconds; k++ {
		at := sensor.Time(k) * second / 2
		truth := geo.Point{E: 10 * float64(at) / 1e9}
		off := geo.Point{E: 3 * float64(k%3-1), N: 2 * float64(k%2)}
		check(w.WriteEvent(sensor.Event{Time: at, Sensor: "gnss", Number: uint64(k), Measurement: sensor.Fix{Position: frame.Inverse(truth.Add(off)), SigmaM: 5}}))
		if k%2 == 0 {
			check(w.WriteEvent(sensor.Event{Time: at, Sensor: "log", Number: uint64(k), Measurement: sensor.Displacement{Since: at - second, EastM: 10, CovM2: [3]float64{1, 0, 1}}}))
		}
		check(w.Write(&drivefile.Record{Time: at, Truth: &drivefile.Truth{Position: frame.Inverse(truth), SigmaM: 0.1}}))
	}
	check(os.WriteFile(path, b.Bytes(), 0o600))
	return Drive{Path: path, Name: name, Bytes: int64(b.Len()), Map: open()}
}

func job(dir string, drives ...Drive) *Job {
	return &Job{Drives: drives, Dir: dir, MaxCells: 500, Program: "this one", Version: "v"}
}

// outcomes runs a job.
func outcomes(t *testing.T, j *Job) ([]*Outcome, *Summary) {
	t.Helper()
	var out []*Outcome
	sum, err := j.Run(context.Background(), func(o *Outcome) error { out = append(out, o); return nil })
	if err != nil {
		t.Fatal(err)
	}
	return out, sum
}

// files are those of a folder, without what tells of the machine's speed.
func files(t *testing.T, dir string) map[string]string {
	t.Helper()
	out := map[string]string{}
	err := filepath.WalkDir(dir, func(path string, e fs.DirEntry, err error) error {
		if err != nil || e.IsDir() || e.Name() == results.TimingFile {
			return err
		}
		text, err := os.ReadFile(path)
		out[strings.TrimPrefix(path, dir)] = string(text)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func same(t *testing.T, what string, a, b map[string]string) {
	t.Helper()
	if len(a) != len(b) || len(a) == 0 {
		t.Errorf("%s: %d and %d files", what, len(a), len(b))
	}
	for name := range a {
		if a[name] != b[name] {
			t.Errorf("%s: %s differs", what, name)
		}
	}
}

// TestSameHoweverMany: one at a time or four, all files are the same; run again
// they are taken from the folder; and what an interrupt leaves is gone on with to
// the same end.
func TestSameHoweverMany(t *testing.T) {
	in := t.TempDir()
	settings, err := Combine([]Change{{"sensors.gnss.noise.sigma_m", "4"}, {"vehicle.max_speed_mps", "30"}, {"vehicle.max_speed_mps", "20"}})
	if err == nil && len(settings) != 2 {
		t.Fatalf("%d settings", len(settings))
	}
	suite, err := sensor.ParseSuite("test", []byte("sensors:\n  - {name: gnss, kind: fix}\n"))
	if err != nil {
		t.Fatal(err)
	}
	var drives []Drive
	for i := range 3 {
		d := sail(t, in, fmt.Sprintf("boat-%d", i), 1+i)
		d.Suite, d.SuiteName = suite, "test"
		drives = append(drives, d)
	}
	one, four, cut := filepath.Join(t.TempDir(), "a"), filepath.Join(t.TempDir(), "b"), filepath.Join(t.TempDir(), "c")
	run := func(dir string, parallel int) (*Job, []*Outcome, *Summary) {
		j := job(dir, drives...)
		j.Parallel, j.Settings, j.HoldOut, j.Smooth, j.Path, j.LagS = parallel, settings, []string{"boat-2"}, true, true, 1
		out, sum := outcomes(t, j)
		return j, out, sum
	}
	_, out, sum := run(one, 1)
	if len(out) != 6 || sum.Runs != 6 || sum.Resumed != 0 || sum.SettingsTried != 2 || len(sum.HeldOut) != 1 || sum.Partial {
		t.Fatalf("%d outcomes, %+v", len(out), sum)
	}
	if r := sum.Rows[0]; r.Figures.Drives != 2 || r.HeldOut == nil || r.HeldOut.Drives != 1 || r.Figures.RMSEM == nil || sum.Best == "" {
		t.Errorf("%+v", r)
	}
	if l := out[0].Score.LookedBack; l == nil || l.Smoothed.Figures.Scored != out[0].Score.Figures.Scored || *l.Smoothed.Figures.RMSEM > *out[0].Score.Figures.RMSEM || l.Path == nil || l.Agreement.All != out[0].Score.Posteriors {
		t.Errorf("looking back: %+v", l)
	}
	for _, name := range []string{results.SmoothedFile, results.PathFile, results.TableFile} {
		if text := files(t, out[0].Dir)["/"+name]; strings.Count(text, "\n") != out[0].Score.Posteriors+1 {
			t.Errorf("%s has %d lines for %d posteriors", name, strings.Count(text, "\n"), out[0].Score.Posteriors)
		}
	}
	run(four, 4)
	same(t, "one and four at a time", files(t, one), files(t, four))
	before := files(t, one)
	if _, _, sum := run(one, 2); sum.Resumed != 6 {
		t.Errorf("of 6 runs %d were resumed", sum.Resumed)
	}
	delete(before, "/"+SummaryFile) // it counts what was resumed
	after := files(t, one)
	delete(after, "/"+SummaryFile)
	same(t, "before and after resuming", before, after)

	j := job(cut, drives...)
	j.Parallel, j.Settings, j.HoldOut, j.Smooth, j.Path, j.LagS = 1, settings, []string{"boat-2"}, true, true, 1
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	n := 0
	sum, err = j.Run(ctx, func(*Outcome) error {
		if n++; n == 2 {
			cancel()
		}
		return nil
	})
	if err != nil || !sum.Partial || sum.Runs == 6 {
		t.Fatalf("interrupted: %+v, %v", sum, err)
	}
	if _, _, sum := run(cut, 2); sum.Resumed < 2 || sum.Resumed == 6 || sum.Partial {
		t.Errorf("gone on with: %+v", sum)
	}
	after2 := files(t, cut)
	delete(after2, "/"+SummaryFile)
	same(t, "interrupted and not", before, after2)
}

// TestPartial: a run that is interrupted, or whose file is cut off, leaves what
// there is, marked, and is not taken for whole.
func TestPartial(t *testing.T) {
	in, dir := t.TempDir(), t.TempDir()
	d := sail(t, in, "boat", 3)
	text, err := os.ReadFile(d.Path)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(d.Path, text[:len(text)*2/3], 0o600); err != nil {
		t.Fatal(err)
	}
	for _, keep := range []bool{false, true} {
		j := job(dir, d)
		j.Keep = keep
		out, sum := outcomes(t, j)
		if o := out[0]; o.Err == nil || !strings.Contains(o.Err.Error(), "cut off?") || o.Score == nil || !o.Score.Partial || !o.Run.Partial || sum.CutShort != 1 {
			t.Errorf("keep %v: %v, %+v", keep, o.Err, o.Score)
		}
		r, err := results.Read(filepath.Join(dir, results.Given, "boat"))
		if err != nil || !r.Partial || !strings.Contains(r.Stopped, "cut off?") || !r.Score.Partial {
			t.Errorf("keep %v: %+v, %v", keep, r, err)
		}
	}
	if out, _ := outcomes(t, job(dir, d)); out[0].Resumed {
		t.Error("a partial run was taken for whole")
	}

	// Of three settings one is cut short, which has the most evidence so far: it is
	// marked, and not the best.
	sum := newSummary()
	for i, evidence := range []float64{90, 100, 80} {
		sum.add(&Outcome{Drive: &d, Setting: &Setting{Name: fmt.Sprint("s", i)}, Score: &score.Score{LogEvidence: evidence, Partial: i == 1}})
	}
	sum.add(&Outcome{Drive: &d, Setting: &Setting{Name: "s3"}, Err: fmt.Errorf("boat: %w", context.Canceled)})
	if err := sum.end(&Job{}); err != nil {
		t.Fatal(err)
	}
	if sum.Best != "s0" || sum.Rows[0].CutShort != 0 || sum.Rows[1].CutShort != 1 || sum.CutShort != 2 || sum.Failed != 0 {
		t.Errorf("%+v", sum)
	}
}

// TestGoesOnPastABadDrive: a drive that cannot be run is an outcome with an error,
// the others run; mistakes in settings are said before anything runs.
func TestGoesOnPastABadDrive(t *testing.T) {
	in := t.TempDir()
	good := sail(t, in, "good", 1)
	bad := good
	bad.Name, bad.Path = "bad", filepath.Join(in, "bad"+drivefile.Suffix)
	if err := os.WriteFile(bad.Path, []byte("{}\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	out, sum := outcomes(t, job("", bad, good))
	if len(out) != 2 || out[0].Err == nil || out[0].Score != nil || out[1].Err != nil || sum.Failed != 1 {
		t.Errorf("%+v, %+v", out, sum)
	}
	for want, j := range map[string]*Job{
		"one name":     {Dir: "x", Drives: []Drive{good, good}},
		"nonsense":     {Drives: []Drive{good}, Settings: []Setting{{Name: "n", Changes: []Change{{"vehicle.nonsense", "1"}}}}},
		"whole number": {Drives: []Drive{good}, Settings: []Setting{{Name: "n", Changes: []Change{{keyMaxCells, "many"}}}}},
		"held out":     {Drives: []Drive{good}, HoldOut: []string{"go*"}},
		"no pattern":   {Drives: []Drive{good}, HoldOut: []string{"["}},
	} {
		if _, err := j.Run(context.Background(), func(*Outcome) error { return nil }); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want %q", err, want)
		}
	}
	stop := errors.New("stop")
	if _, err := job("", good, bad, good).Run(context.Background(), func(*Outcome) error { return stop }); !errors.Is(err, stop) {
		t.Errorf("got %v", err)
	}
}

// TestKeptIsStreamed: a drive that is kept for diagnoses has the score of one that
// is streamed.
func TestKeptIsStreamed(t *testing.T) {
	d := sail(t, t.TempDir(), "boat", 2)
	j := job("", d)
	j.HoldOutFixes, j.EstimateTruth, j.TruthOffset = true, true, score.Offset{LateS: 0.1}
	a, _ := outcomes(t, j)
	j.Keep = true
	b, _ := outcomes(t, j)
	if b[0].Kept == nil || a[0].Kept != nil {
		t.Fatal("what was kept")
	}
	if fmt.Sprintf("%+v", *a[0].Score.HeldOutFixes.RMSEM) != fmt.Sprintf("%+v", *b[0].Score.HeldOutFixes.RMSEM) ||
		a[0].Score.PosteriorSHA256 != b[0].Score.PosteriorSHA256 || *a[0].Score.CRPSM != *b[0].Score.CRPSM ||
		len(a[0].Score.Sensors) == 0 || len(a[0].Score.Sensors) != len(b[0].Score.Sensors) {
		t.Errorf("streamed %+v, kept %+v", a[0].Score, b[0].Score)
	}
}
