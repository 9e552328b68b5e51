package report

import (
	"fmt"
	"slices"
	"strings"

	"leadline/engine/study/score"
)

// detail is a named value of a run, and what it says.
type detail struct{ Name, Value, Says string }

// details are figures of a run beyond those in the table of all runs.
func (x *Run) details() (out []detail) {
	s := x.Score
	add := func(name string, v *float64, says string) {
		if v != nil {
			out = append(out, detail{name, number(*v), says})
		}
	}
	f := s.Figures
	add("p68_m", f.P68M, "68 % of errors are smaller")
	add("p75_m", s.P75M, "75 %; with p50_m and p95_m the percentiles of EN 16803-1 (from memory)")
	add("p99_9_m", f.P999M, "99.9 %")
	add("coverage50", f.Coverage50, "share of truths within the 50 % radius")
	add("coverage99", f.Coverage99, "share of truths within the 99 % radius")
	add("anees_low", f.ANEESLow, "where 95 % of such means are, were all errors independent, from")
	add("anees_high", f.ANEESHigh, "to")
	add("right_road_fraction", f.RightRoadFraction, "share with the right road")
	add("located_after_m", s.LocatedAfterM, "metres travelled until first located")
	add("along_mean_m", s.AlongMeanM, "mean along the way, forward positive")
	add("along_p95_m", s.AlongP95M, "95 % along the way")
	add("across_mean_m", s.AcrossMeanM, "mean across the way, right positive")
	add("across_p95_m", s.AcrossP95M, "95 % across the way")
	add("log_score", s.LogScore, "mean logarithmic score, nats")
	add("independent", s.Independent, "how many independent errors the scored ones are worth")
	if p := s.Protection; p != nil && p.Share != nil {
		within := "too few independent errors for an interval"
		if p.Low != nil && p.High != nil {
			within = fmt.Sprintf("between %s and %s in 95 %% of such drives", percent(*p.Low), percent(*p.High))
		}
		out = append(out, detail{"share", percent(*p.Share), fmt.Sprintf(
			"of bounded protection radii that the truth was beyond, in %d episodes; %s; asked for is a risk of %g", p.Episodes, within, p.Risk)})
	}
	if w := s.LongestWrong; w != nil {
		out = append(out, detail{"longest_wrong", number(w.ForS) + " s", fmt.Sprintf("said located with the truth outside the 99 %% radius, from %s s on, over %s m", number(w.StartS), number(w.ForM))})
	}
	if t := s.TruthNote; t != nil {
		out = append(out, detail{"sigma_m", number(t.SigmaM), "the truth's own standard deviation an axis, m"})
		if e := t.Estimate; e != nil {
			out = append(out, detail{"estimate", "", fmt.Sprintf("the truth may be %s ± %s m forward, %s ± %s m right, %s ± %s s late; not taken off",
				number(e.ForwardM), number(e.ForwardSigmaM), number(e.RightM), number(e.RightSigmaM), number(e.LateS), number(e.LateSigmaS))})
		}
	}
	if h := s.HeldOutFixes; h != nil {
		out = append(out, detail{"fixes", fmt.Sprint(h.Fixes), "satellite fixes compared with what was known just before each"})
		add("fix_p95_m", h.P95M, "95 % of the distances to them, with their own error")
		add("fix_outside95", h.Outside, "share of them outside of where 95 % should be")
	}
	if l := s.LookedBack; l != nil {
		later := func(name, what string, h *score.Hindsight) {
			if h != nil && h.Figures.RMSEM != nil {
				out = append(out, detail{name, number(*h.Figures.RMSEM), fmt.Sprintf("root mean square error of %s, over the same times, m; 95 %% below %s m", what, number(*h.Figures.P95M))})
			}
		}
		later("smoothed", "what is known given the whole drive", l.Smoothed)
		later("path", "the most probable path", l.Path)
		add("moved_mean_square", l.Agreement.MeanSquare, "by how much the mean moved, squared, in terms of what was expected; 2 is exact")
		add("moved_within99", l.Agreement.Within99, "share of it within what 99 % should be in")
	}
	add("log_evidence", &s.LogEvidence, "of all measurements, nats")
	return out
}

// made says what a run was made of.
func (x *Run) made() []detail {
	r := &x.Run
	suite := r.Suite
	if suite == "" {
		suite = "none, defaults"
	}
	out := []detail{
		{Name: "drive", Value: fmt.Sprintf("%s, vehicle %s, SHA-256 %s", r.DriveFile, r.Vehicle, r.DriveSHA256)},
		{Name: "map", Value: fmt.Sprintf("%s, fingerprint %s", r.Map, r.MapFingerprint)},
		{Name: "map's source and licence", Value: r.MapSource + "; " + r.MapLicence},
		{Name: "suite", Value: fmt.Sprintf("%s, SHA-256 with the defaults %s", suite, r.SuiteSHA256)},
		{Name: "setting", Value: strings.Join(append([]string{r.Setting}, r.Set...), "; ")},
		{Name: "alert limit, cells", Value: fmt.Sprintf("%s m; at most %d cells", number(r.AlertLimitM), r.MaxCells)},
		{Name: "truth's offset", Value: fmt.Sprintf("%g m forward, %g m right, %g s late, taken off", r.TruthOffset.ForwardM, r.TruthOffset.RightM, r.TruthOffset.LateS)},
		{Name: "measurements", Value: fmt.Sprintf("%d accepted, %d refused", r.Accepted, r.Refused)},
		{Name: "program", Value: fmt.Sprintf("version %s on %s, SHA-256 %s", r.Version, r.Architecture, r.Program)},
		{Name: "posteriors", Value: "SHA-256 " + x.Score.PosteriorSHA256},
	}
	if r.HeldOut {
		out = append(out, detail{Name: "held out", Value: "no setting is to be chosen by it"})
	}
	return out
}

// commands are those that made the runs, each once.
func (r *Report) commands() (out []string) {
	for _, x := range r.Runs {
		if c := commandLine(x.Run.Command); c != "" && !slices.Contains(out, c) {
			out = append(out, c)
		}
	}
	return out
}

// commandLine is a command as a shell takes it.
func commandLine(args []string) string {
	quoted := make([]string, len(args))
	for i, a := range args {
		quoted[i] = a
		if a == "" || strings.ContainsFunc(a, func(c rune) bool {
			return !strings.ContainsRune("-_./=:,@%+", c) && (c < '0' || c > '9' && c < 'A' || c > 'Z' && c < 'a' || c > 'z')
		}) {
			quoted[i] = "'" + strings.ReplaceAll(a, "'", `'\''`) + "'"
		}
	}
	return strings.Join(quoted, " ")
}
