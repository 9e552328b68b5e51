package report

import (
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/study/results"
	"leadline/engine/study/score"
	"leadline/engine/summary"
)

// judged is what a page says against runs with these scores.
func judged(t *testing.T, scores ...*score.Score) []string {
	t.Helper()
	r := &Report{}
	for i, s := range scores {
		r.Runs = append(r.Runs, &Run{Run: results.Run{Drive: fmt.Sprintf("drive-%d", i+1)}, Score: s, Drawn: true})
	}
	r.caution(Input{})
	return r.Cautions
}

// good is a score of a run that keeps all its promises.
func good() *score.Score {
	ptr := func(v float64) *float64 { return &v }
	s := &score.Score{Posteriors: 400}
	s.Figures = score.Figures{Scored: 400, RMSEM: ptr(3), ANEES: ptr(2.1), Coverage50: ptr(0.52), Coverage95: ptr(0.96), Coverage99: ptr(0.99)}
	s.FiguresAll.Scored = 400
	s.Independent, s.AcrossMeanM, s.AcrossRMSEM = ptr(50), ptr(0.2), ptr(2)
	s.Protection = &score.Exceedance{Bounded: 400, Share: ptr(0), Low: ptr(0), High: ptr(0.07), Risk: 1e-4, Trials: 50}
	s.TruthNote = &score.TruthNote{SigmaM: 0.1}
	return s
}

// TestPromises: each figure that misses what was promised is said, with what to do; none
// that chance explains.
func TestPromises(t *testing.T) {
	set := func(p **float64, v float64) { *p = &v }
	for name, c := range map[string]struct {
		change func(*score.Score)
		says   []string // nothing: no caution
	}{
		"all is well": {func(*score.Score) {}, nil},
		"coverage":    {func(s *score.Score) { set(&s.Figures.Coverage95, 0.6) }, []string{"surer than it is right", "95 % radius holds 60 %", "by 50 independent errors", "Do not go by its radii"}},
		"by few":      {func(s *score.Score) { set(&s.Figures.Coverage95, 0.6); set(&s.Independent, 3) }, nil},
		"by one": {func(s *score.Score) {
			set(&s.Figures.Coverage95, 0)
			set(&s.Figures.ANEES, 1e9)
			set(&s.Independent, 1.9)
		}, nil},
		"ANEES":        {func(s *score.Score) { set(&s.Figures.ANEES, 4) }, []string{"surer than it is right: its ANEES is 4, where 2 is right"}},
		"ANEES little": {func(s *score.Score) { set(&s.Figures.ANEES, 0.8) }, []string{"less sure than it might be", "ANEES is 0.8", "leadline tune"}},
		"wide":         {func(s *score.Score) { set(&s.Figures.Coverage50, 0.9) }, []string{"less sure than it might be: its 50 % radius holds 90 %"}},
		// All of 50 within 99 %: chance. Of 5000 none outside of 99.17 % is none.
		"wide by 2 %": {func(s *score.Score) { set(&s.Figures.Coverage99, 1) }, nil},
		"wide of many": {func(s *score.Score) {
			set(&s.Figures.Coverage99, 1)
			set(&s.Independent, 5000)
			set(&s.Figures.Coverage50, 0.51)
			set(&s.Figures.Coverage95, 0.953)
			set(&s.Figures.ANEES, 2)
		}, []string{
			"99 % radius holds 100 %",
		}},
		"sideways":        {func(s *score.Score) { set(&s.AcrossMeanM, -1.76); set(&s.AcrossRMSEM, 1.9) }, []string{"1.76 m left of the truth in the mean", "--truth-offset"}},
		"sideways, truth": {func(s *score.Score) { set(&s.AcrossMeanM, -1.76); set(&s.AcrossRMSEM, 1.9); s.TruthNote.SigmaM = 0.9 }, nil},
		"sideways, few":   {func(s *score.Score) { set(&s.AcrossMeanM, 1.76); set(&s.AcrossRMSEM, 2.2); set(&s.Independent, 2.5) }, nil},
		"protection":      {func(s *score.Score) { s.Protection.Beyond = 19; set(&s.Protection.Share, 19./400) }, []string{"outside of 19 of its 400 bounded protection radii, where the risk of 0.0001 allows 0.04"}},
		// 400e-4/1 is 0.04, below a twentieth; of 600 it is above.
		"protection, one": {func(s *score.Score) { s.Protection.Beyond = 1; set(&s.Protection.Share, 1./400) }, []string{"outside of 1 of"}},
		"protection, chance": {func(s *score.Score) {
			s.Protection.Bounded, s.Protection.Beyond = 600, 1
			set(&s.Protection.Share, 1./600)
		}, nil},
		"protection, interval": {func(s *score.Score) {
			s.Protection.Bounded, s.Protection.Beyond, s.Protection.Risk, s.Protection.Trials = 400, 300, 0.1, 50
			set(&s.Protection.Share, 0.75)
		}, []string{"outside of 300 of its 400"}},
		"off the map": {func(s *score.Score) { s.TruthOffMap = &score.OffMap{Truths: 400, NearestM: 1e6} }, []string{"drive-1: all 400 truths lie off the map, at least 1000 km"}},
		"clocks": {func(s *score.Score) {
			*s = score.Score{Posteriors: 9}
			s.TruthElsewhen = &score.Elsewhen{Truths: 819, FromS: -3600, ToS: -2782}
		}, []string{"none of the 819 truths, of -3600 s to -2782 s after the drive's start", "Are clocks or dates apart?", "usable is not checked"}},
	} {
		s := good()
		c.change(s)
		got := judged(t, s)
		if want := min(1, len(c.says)); len(got) != want {
			t.Errorf("%s: %d cautions, want %d: %q", name, len(got), want, got)
		}
		for _, text := range c.says {
			if !strings.Contains(strings.Join(got, "\n"), text) {
				t.Errorf("%s: %q is not said: %q", name, text, got)
			}
		}
	}
}

// TestPromisesKept draws runs that keep their promises and scores them: at most one page
// in twenty says that one does not.
func TestPromisesKept(t *testing.T) {
	const seed, pages, n = 23, 200, 60
	rng := rand.New(rand.NewPCG(seed, 0))
	frame := geo.NewFrame(geo.FromDegrees(-30, 45))
	warned := 0
	for range pages {
		var in score.Input
		for i := range int64(n) {
			// Due north at 20 m/s, errors of 3 m an axis; the radii are Rayleigh's.
			at := geo.Point{N: 20 * float64(i)}
			mean := at.Add(geo.Point{E: 3 * rng.NormFloat64(), N: 3 * rng.NormFloat64()})
			p := &summary.Posterior{
				TimeNS: i * 1e9, Status: summary.Located, Mean: frame.Inverse(mean), Cov: summary.Cov{EE: 9, NN: 9},
				Radius50M: 3 * 1.177410, Radius95M: 3 * 2.447747, Radius99M: 3 * 3.034854,
				Protection: summary.Protection{Bounded: true, RadiusM: 3 * 4.291932, Risk: 1e-4},
			}
			p.MostProbable.Position = p.Mean
			in.Posteriors = append(in.Posteriors, p)
			in.Truth = append(in.Truth, score.Truth{TimeNS: i * 1e9, At: frame.Inverse(at), SigmaM: 1e-3})
		}
		s, err := score.Of(in)
		if err != nil {
			t.Fatal(err)
		}
		if got := judged(t, s); len(got) > 0 {
			warned++
			t.Logf("%q", got)
		}
	}
	// Four standard errors above a twentieth.
	if most := 0.05*pages + 4*3.1; float64(warned) > most {
		t.Errorf("seed %d: %d of %d pages without a fault warn, at most %.0f may", seed, warned, pages, most)
	}
}

// TestWorstFirst: gravity comes before size, and of many alike the worst are told.
func TestWorstFirst(t *testing.T) {
	var list []*score.Score
	for i := range 9 {
		s := good()
		anees := 10 + float64(i)
		s.Figures.ANEES = &anees
		list = append(list, s)
	}
	off := good()
	off.TruthOffMap = &score.OffMap{Truths: 3, NearestM: 20}
	wide := good()
	share := 1.0
	wide.Figures.Coverage50 = &share
	got := judged(t, append(list, wide, off)...)
	if len(got) != 1+mostAlike+1+1 || !strings.HasPrefix(got[0], "drive-11: all 3 truths lie off the map") || !strings.Contains(got[1], "ANEES is 18") ||
		!strings.Contains(got[1+mostAlike], "goes for 6 more runs, the worst first: drive-6; drive-5; drive-4; drive-3; drive-2; and 1 more.") || !strings.Contains(got[2+mostAlike], "less sure") {
		t.Errorf("%q", got)
	}
}

// TestSuspect: what replay found comes first, with the verdict of what it tried; what is
// usable without a truth is marked.
func TestSuspect(t *testing.T) {
	dir := t.TempDir()
	left(t, dir, results.Given, "feet", func(_ *results.Run, s *score.Score) { s.FiguresAll.Scored = 540 })
	left(t, dir, results.Given, "tz", func(_ *results.Run, s *score.Score) {
		*s = score.Score{Drive: "tz", Details: score.Details{TruthElsewhen: &score.Elsewhen{Truths: 819, FromS: -3600, ToS: -2782}}}
	})
	table := filepath.Join(dir, results.Given, "tz", results.TableFile)
	head := "time,status,lon_deg,lat_deg,truth_lon_deg,truth_lat_deg,error_m,radius95_m,protection_m\n"
	if err := os.WriteFile(table, []byte(head+"2030-05-01T12:00:00Z,located,1,2,,,,9,9\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	found := results.Findings{Suspect: []string{"it is located wrongly", "odo fits badly"}, Verdict: "odo: distances in feet. To do: multiply"}
	path := filepath.Join(dir, results.Given, "feet", results.FindingsFile)
	if err := results.WriteJSON(path, found); err != nil {
		t.Fatal(err)
	}
	r, page := written(t, Input{Dirs: []string{dir}})
	want := "feet is suspect: it is located wrongly; odo fits badly. Of usual mistakes in logs: odo: distances in feet. To do: multiply. Do not go by its figures before that is explained."
	if len(r.Cautions) < 2 || r.Cautions[0] != want {
		t.Errorf("%q", r.Cautions)
	}
	for _, text := range []string{"100 % (not checked against a truth)", "Of its posteriors (not checked against a truth): usable 100 %", "Are clocks or dates apart?"} {
		if !strings.Contains(page, text) {
			t.Errorf("the page does not say %q", text)
		}
	}
	if err := os.WriteFile(path, []byte("{"), 0o600); err != nil {
		t.Fatal(err)
	}
	if _, err := Make(Input{Dirs: []string{dir}}); err == nil || !strings.Contains(err.Error(), results.FindingsFile) {
		t.Errorf("of damaged findings: %v", err)
	}
}

// TestBreaks: names break after their signs, and are escaped first.
func TestBreaks(t *testing.T) {
	if got, want := string(breaks("odo.a_b=<3>&1.5. --hold-out")), `odo.<wbr>a_<wbr>b=<wbr>&lt;3&gt;&amp;1.5. <span class="flag">--hold-out</span>`; got != want {
		t.Errorf("%s, want %s", got, want)
	}
}
