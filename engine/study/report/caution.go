package report

import (
	"cmp"
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"strings"

	"gonum.org/v1/gonum/stat/distuv"

	"leadline/engine/study/results"
	"leadline/engine/study/score"
	"leadline/engine/study/sweep"
)

// grave is how much a caution takes from what a page shows, the most first.
type grave int

const (
	suspect   grave = iota // replay found something wrong
	tooSure                // the truth is outside of what was promised
	unchecked              // there is nothing to check it by
	impaired               // not all of the drive is in it
	aside                  // off to one side
	tooWide                // promises that are kept more often than said
	minor                  // of truths and pictures
	graves
)

// caution is a line under Cautions.
type caution struct {
	grave grave
	bad   float64 // how bad it is among its like
	run   string  // "" if it is of none
	text  string
}

// Of cautions of one gravity mostAlike are told in full, and the runs of mostNamed more
// are named.
const (
	mostAlike = 3
	mostNamed = 5
)

// chance is how often a page says that figures miss their promises although all are
// kept, at most: it is shared evenly over the tests of all runs (Bonferroni's
// inequality, which holds whether or not they are independent).
const chance = 0.05

// tests of a run: three radii, ANEES, protection and the offset.
const tests = 6

// told sorts cautions, the worst first, and words those that are many of a kind as one.
func told(list []caution) []string {
	slices.SortStableFunc(list, func(a, b caution) int {
		return cmp.Or(cmp.Compare(a.grave, b.grave), cmp.Compare(b.bad, a.bad))
	})
	out := []string{}
	for g := range graves {
		var alike []caution
		for _, c := range list {
			if c.grave == g {
				alike = append(alike, c)
			}
		}
		var names []string
		for i, c := range alike {
			if i < mostAlike || c.run == "" {
				out = append(out, c.text)
			} else if !slices.Contains(names, c.run) {
				names = append(names, c.run)
			}
		}
		if len(names) > 0 {
			more := ""
			if n := len(names) - mostNamed; n > 0 {
				more = fmt.Sprintf("; and %d more", n)
			}
			out = append(out, fmt.Sprintf("The like goes for %d more runs, the worst first: %s%s.", len(names), strings.Join(names[:min(len(names), mostNamed)], "; "), more))
		}
	}
	return out
}

// caution gathers what makes the results doubtful, and finds the ground.
func (r *Report) caution(in Input) {
	var list []caution
	for _, text := range r.Cautions { // what could not be compared
		list = append(list, caution{grave: minor, text: text})
	}
	programs, undrawn := map[string]bool{}, 0
	level := chance / float64(tests*max(1, len(r.Runs)))
	for _, x := range r.Runs {
		programs[x.Run.Version+x.Run.Program+x.Run.Architecture] = true
		if !x.Drawn {
			undrawn++
		}
		list = append(list, x.cautions(x.name(r), level)...)
		key := x.Run.Map + "\x00" + x.Run.MapFingerprint
		if _, seen := r.grounds[key]; in.Ground != nil && x.Drawn && !seen {
			g, err := in.Ground(x.Run.Map, x.Run.MapFingerprint)
			if r.grounds[key] = g; err != nil {
				list = append(list, caution{grave: minor, text: fmt.Sprintf("Tracks are drawn without the map under them: %v.", err)})
			}
		}
	}
	page := func(format string, args ...any) {
		list = append(list, caution{grave: minor, bad: -1, text: fmt.Sprintf(format, args...)})
	}
	if len(programs) > 1 {
		page("The runs were made by %d different programs or kinds of machine.", len(programs))
	}
	if undrawn > 0 {
		page("%d of %d runs, those with the smallest errors, are in the tables alone.", undrawn, len(r.Runs))
	}
	for _, dir := range in.Dirs {
		var s sweep.Summary
		if results.ReadJSON(filepath.Join(dir, sweep.SummaryFile), &s) == nil && s.SettingsTried > 1 {
			page("%d settings were tried in %s: the best of many looks better than it is; go by drives that were held out.", s.SettingsTried, dir)
		}
	}
	r.Cautions = told(list)
}

// cautions are those against a run; figures are told from chance at a level.
func (x *Run) cautions(name string, level float64) (out []caution) {
	say := func(g grave, bad float64, format string, args ...any) {
		out = append(out, caution{g, bad, name, name + fmt.Sprintf(format, args...)})
	}
	s := x.Score
	rms := 0.0
	if v := cmp.Or(s.Figures.RMSEM, s.FiguresAll.RMSEM); v != nil {
		rms = *v
	}
	if f := x.Findings; f != nil && len(f.Suspect) > 0 {
		text := " is suspect: " + strings.Join(f.Suspect, "; ") + "."
		if f.Verdict != "" {
			text += " Of usual mistakes in logs: " + strings.TrimSuffix(f.Verdict, ".") + "."
		} else {
			text += " What may be wrong, replay --diagnose always tries."
		}
		say(suspect, rms, "%s Do not go by its figures before that is explained.", text)
	}
	if o := s.TruthOffMap; o != nil {
		say(suspect, rms, ": %s", o)
	}
	x.promises(say, level)
	switch e := s.TruthElsewhen; {
	case e != nil:
		say(unchecked, 0, ": its error is not known: %s Its radii are the model's own, and usable is not checked: mend the times, and replay it again.", e)
	case s.Figures.Scored == 0 && s.FiguresAll.Scored == 0:
		say(unchecked, 0, " has no truth to compare with: of it only radii are shown, which are the model's own, and usable is not checked. A truth in the drive, or replay --hold-out-fixes, checks it.")
	}
	if x.Run.Partial {
		say(impaired, 1, " is partial: %s. Its figures are of less of the drive: see what ended it, and replay it again.", strings.TrimSuffix(x.Run.Stopped, "."))
	}
	if n := x.Run.Refused; n > 0 {
		say(impaired, float64(n)/float64(n+x.Run.Accepted), ": %d of %d measurements were refused, first %s. Mend what they are refused for, or leave their sensor out.", n, n+x.Run.Accepted, strings.TrimSuffix(x.Run.FirstRefusal, "."))
	}
	if t := s.TruthNote; t != nil && len(t.Below) > 0 {
		say(minor, 0, ": the truth's own error is %.2g m an axis; nothing is claimed by %v. A better truth would say more.", t.SigmaM, t.Below)
	}
	if t := s.TruthNote; t != nil && t.Twofold > 0 {
		say(minor, 1, ": the truth says two places at one time in %d cases, of which the first of the file counts. See whether another vehicle or device is in it.", t.Twofold)
	}
	return out
}

// widest is by how much a radius may be larger than need be, see summary's circles.
const widest = 1.02

// sidewaysSigmas is how many of the truth's own standard deviations an offset across the
// way is beyond: they may all be off to one side together.
const sidewaysSigmas = 2

// leastChance, for protection: see promises.
const leastChance = 0.05

// promises compares a run's figures with what its posteriors promise, by as many errors
// as are independent:
//
//   - A radius holds the truth with its probability p, or up to 1-(1-p)^(1.02²), which a
//     radius that is 2 % too large holds of a circular normal distribution, unless the
//     interval of Clopper and Pearson of the share is all on one side of that.
//   - ANEES is 2 unless it is outside of the bounds of that many errors.
//   - Protection is exceeded with its risk, unless the interval of the share is all above
//     that, or n bounded radii are exceeded k times although n·risk/k < 0.05: by
//     Markov's inequality that is the probability of so many or more, at most, however
//     the errors follow one another.
//   - The mean across the way is 0 unless, by Student's t of its standard error, it is
//     farther off than two of the truth's own standard deviations.
//
// With fewer than two independent errors only Markov's inequality says anything.
func (x *Run) promises(say func(grave, float64, string, ...any), level float64) {
	s, f := x.Score, x.Score.Figures
	n := 0.0
	if s.Independent != nil {
		n = *s.Independent
	}
	var short, over []string
	worst := 0.0
	for _, c := range []struct {
		of    string
		p     float64
		share *float64
	}{{"50 %", 0.5, f.Coverage50}, {"95 %", 0.95, f.Coverage95}, {"99 %", 0.99, f.Coverage99}} {
		if c.share == nil {
			continue
		}
		low, high, ok := score.ShareInterval(*c.share, n, 1-level)
		text := fmt.Sprintf("its %s radius holds %s of the truths", c.of, percent(*c.share))
		switch {
		case !ok:
		case high < c.p:
			short, worst = append(short, text), math.Max(worst, c.p-*c.share)
		case low > 1-math.Pow(1-c.p, widest*widest):
			over = append(over, text)
		}
	}
	if f.ANEES != nil && n >= 2 {
		low, high := score.ANEESBounds(int(n), 2, 1-level)
		text := fmt.Sprintf("its ANEES is %s, where 2 is right and %s to %s may be chance", number(*f.ANEES), number(low), number(high))
		switch {
		case *f.ANEES > high:
			short, worst = append(short, text), math.Max(worst, 1 - 2 / *f.ANEES)
		case *f.ANEES < low:
			over = append(over, text)
		}
	}
	if p := s.Protection; p != nil && p.Share != nil && p.Beyond > 0 && p.Risk > 0 {
		expected := float64(p.Bounded) * p.Risk
		low, _, ok := score.ShareInterval(*p.Share, p.Trials, 1-level)
		if ok && low > p.Risk || expected/float64(p.Beyond) < leastChance {
			short = append(short, fmt.Sprintf("the truth is outside of %d of its %d bounded protection radii, where the risk of %g allows %s", p.Beyond, p.Bounded, p.Risk, number(expected)))
			worst = math.Max(worst, 1) // integrity is what protection is for
		}
	}
	if len(short) > 0 {
		say(tooSure, worst, " is surer than it is right: %s%s. Do not go by its radii: look for a sensor, map or suite that is not as stated (replay --diagnose always), or state larger errors.", strings.Join(short, "; "), worth(n))
	}
	if s.AcrossMeanM != nil && s.AcrossRMSEM != nil && s.TruthNote != nil && n >= 2 {
		mean := math.Abs(*s.AcrossMeanM)
		sigma := math.Sqrt(math.Max(0, *s.AcrossRMSEM**s.AcrossRMSEM-mean*mean) / n)
		half := distuv.StudentsT{Sigma: 1, Nu: n - 1}.Quantile(1-level/2) * sigma
		if mean-half > sidewaysSigmas*s.TruthNote.SigmaM {
			side := "right"
			if *s.AcrossMeanM < 0 {
				side = "left"
			}
			say(aside, mean, " is %s m %s of the truth in the mean, with a standard error of %s m and a truth of %s m. An offset across the way that stays is none of chance: see whether the truth's antenna (replay --truth-offset), the lane that is driven or the map is off by it.",
				number(mean), side, number(sigma), number(s.TruthNote.SigmaM))
		}
	}
	if len(over) > 0 {
		say(tooWide, 0, " is less sure than it might be: %s%s. Its radii are wider than they need be: leadline tune finds the noise and drift figures that fit.", strings.Join(over, "; "), worth(n))
	}
}

func worth(n float64) string {
	if n < 2 {
		return ""
	}
	return fmt.Sprintf(" (by %.0f independent errors)", math.Floor(n))
}
