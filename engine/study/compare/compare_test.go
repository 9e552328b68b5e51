package compare

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"leadline/engine/study/results"
	"leadline/engine/study/score"
)

// left writes a run's folder whose error is errM at each second of a minute.
func left(t *testing.T, dir, drive string, errM func(s int) float64, change func(*results.Run, *score.Score)) {
	t.Helper()
	at := filepath.Join(dir, results.Given, drive)
	if err := os.MkdirAll(at, 0o755); err != nil {
		t.Fatal(err)
	}
	table := "time,status,lon_deg,lat_deg,truth_lon_deg,truth_lat_deg,error_m,radius95_m,protection_m\n"
	worst := 0.0
	for s := range 60 {
		worst = math.Max(worst, errM(s))
		table += fmt.Sprintf("2030-05-01T12:00:%02dZ,located,1,2,1,2,%g,5,\n", s, errM(s))
	}
	r := results.Run{Drive: drive, DriveSHA256: drive, Setting: results.Given, Program: "p", Version: "v"}
	s := &score.Score{Drive: drive, PosteriorSHA256: table, LogEvidence: -worst}
	s.Figures.P95M, s.Figures.Scored = &worst, 60
	if change != nil {
		change(&r, s)
	}
	for name, v := range map[string]any{results.RunFile: r, results.ScoreFile: s} {
		if err := results.WriteJSON(filepath.Join(at, name), v); err != nil {
			t.Fatal(err)
		}
	}
	if err := os.WriteFile(filepath.Join(at, results.TableFile), []byte(table), 0o600); err != nil {
		t.Fatal(err)
	}
}

func find(t *testing.T, dir string) []*results.Result {
	t.Helper()
	r, err := results.Find(dir)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func flat(v float64) func(int) float64 { return func(int) float64 { return v } }

// TestCompare: four drives, of which one is better, one worse over two stretches,
// one the same, and one in A alone.
func TestCompare(t *testing.T) {
	a, b := t.TempDir(), t.TempDir()
	left(t, a, "better", flat(4), nil)
	left(t, b, "better", flat(2), nil)
	left(t, a, "worse", flat(4), nil)
	left(t, b, "worse", func(s int) float64 {
		switch {
		case s >= 10 && s < 20 && s != 14: // one second less does not part it
			return 9
		case s >= 40 && s < 43: // too short
			return 30
		}
		return 4
	}, nil)
	left(t, a, "same", flat(3), nil)
	left(t, b, "same", flat(3), nil)
	left(t, a, "gone", flat(3), nil)
	c, err := Of(find(t, a), find(t, b))
	if err != nil {
		t.Fatal(err)
	}
	if c.Drives != 3 || c.SameBits != 1 || len(c.OnlyA) != 1 || len(c.OnlyB) != 0 || len(c.Notes) != 0 || c.Tolerance != 0 {
		t.Errorf("%+v", c)
	}
	f, ok := c.figure("p95_m")
	// 4, 4, 3 and 2, 30, 3: differences -2, 26, 0. Student's point of two degrees of
	// freedom, 4.3027, is from tables.
	half := 4.3027 * math.Sqrt(((10*10+18*18+8*8)/2.)/3)
	if !ok || math.Abs(f.Difference-8) > 1e-12 || f.Better != 1 || f.Worse != 1 || f.WorstDrive != "worse" || f.WorstB != 30 || f.Low == nil || f.Interval != score.ByStudent || math.Abs(*f.Low-(8-half)) > 1e-3 || math.Abs(*f.High-(8+half)) > 1e-3 {
		t.Errorf("%+v", f)
	}
	if !strings.Contains(c.Few(), "up to 3 drives are Student's") {
		t.Errorf("of few drives: %q", c.Few())
	}
	if _, ok := c.figure("max_m"); ok {
		t.Error("a figure that nobody has")
	}
	for _, p := range c.Pairs {
		switch p.Name {
		case "better":
			if len(p.Stretches) != 1 || p.Stretches[0].Worse || p.Stretches[0].ForS != 59 || p.Stretches[0].AM != 4 || p.Stretches[0].BM != 2 {
				t.Errorf("%+v", p.Stretches)
			}
		case "worse":
			if len(p.Stretches) != 1 || !p.Stretches[0].Worse || p.Stretches[0].From != "2030-05-01T12:00:10Z" || p.Stretches[0].ForS != 9 {
				t.Errorf("%+v", p.Stretches)
			}
		}
	}
}

// TestDoubts: other data, other programs, partial runs and a poor truth are said.
func TestDoubts(t *testing.T) {
	a, b := t.TempDir(), t.TempDir()
	left(t, a, "d", flat(4), nil)
	left(t, b, "d", flat(4.000001), func(r *results.Run, s *score.Score) {
		r.DriveSHA256, r.MapFingerprint, r.Program, r.Partial, r.Stopped = "other", "other", "q", true, "interrupted"
		s.TruthNote = &score.TruthNote{SigmaM: 3, P95M: 7, Below: []string{"p95_m"}}
	})
	c, err := Of(find(t, a), find(t, b))
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(c.Few(), "fewer than 3 drives") {
		t.Errorf("of one drive: %q", c.Few())
	}
	notes := strings.Join(c.Notes, "\n")
	for _, want := range []string{"different drive files", "different maps", "partial: interrupted", "nothing is claimed"} {
		if !strings.Contains(notes, want) {
			t.Errorf("%q is not said: %s", want, notes)
		}
	}
	if f, _ := c.figure("p95_m"); c.Tolerance != tolerance || !strings.Contains(c.How, "by tolerance") || f.Better+f.Worse != 0 || f.Low != nil {
		t.Errorf("%+v, %+v", c, f)
	}
	if _, err := Of(find(t, a), []*results.Result{{Run: results.Run{Drive: "x"}}}); err == nil || !strings.Contains(err.Error(), "no drive is in both") {
		t.Errorf("%v", err)
	}
}

// TestSettingsOfADrive: what three settings make of four drives is no twelve drives. The
// interval is that of the drives' means, Student's with three degrees of freedom (3.1824,
// from tables).
func TestSettingsOfADrive(t *testing.T) {
	var a, b []*results.Result
	for d := range 4 {
		for s := range 3 {
			of := func(errM float64) *results.Result {
				r := &results.Result{Run: results.Run{Drive: fmt.Sprint("d", d), Setting: fmt.Sprint("s=", s)}, Score: &score.Score{PosteriorSHA256: "same"}}
				r.Score.Figures.P95M = &errM
				return r
			}
			a, b = append(a, of(1)), append(b, of(1+float64(d)+0.1*float64(s-1)))
		}
	}
	c, err := Of(a, b)
	if err != nil {
		t.Fatal(err)
	}
	f, ok := c.figure("p95_m")
	half := 3.1824 * math.Sqrt((1.5*1.5+0.5*0.5+0.5*0.5+1.5*1.5)/3/4) // of 0, 1, 2, 3
	if !ok || c.Drives != 4 || c.Runs != 12 || c.Apart() == "" || f.Drives != 4 || f.Better != 0 || f.Worse > 4 || math.Abs(f.Difference-1.5) > 1e-12 || math.Abs(*f.Low-(1.5-half)) > 1e-3 || math.Abs(*f.High-(1.5+half)) > 1e-3 {
		t.Errorf("%+v\n%+v", c, f)
	}
	if f.WorstDrive != "s=2/d3" || f.WorstB != 4.1 {
		t.Errorf("the worst is %g in %s", f.WorstB, f.WorstDrive)
	}
}
