package main

import (
	"encoding/json"
	"fmt"
	"io"
	"math"
	"strings"
	"unicode/utf8"

	"leadline/engine/study/score"
	"leadline/engine/study/sweep"
)

// printJSONLine prints a value on one line.
func printJSONLine(w io.Writer, v any) error {
	b, err := json.Marshal(v)
	if err != nil {
		return err
	}
	_, err = fmt.Fprintf(w, "%s\n", b)
	return err
}

// printScore prints what a person wants to know of a score.
func printScore(w io.Writer, run *sweep.Outcome) error {
	s := run.Score
	var b strings.Builder
	line := func(label, format string, args ...any) {
		fmt.Fprintf(&b, "  %-12s %s\n", label, fmt.Sprintf(format, args...))
	}
	fmt.Fprintf(&b, "%s\n", s.Drive)
	if s.Partial {
		line("partial", "the drive was not run to its end: %s", s.Stopped)
	}
	line("posteriors", "%d from %d measurements, %d refused", s.Posteriors, run.Run.Accepted+run.Run.Refused, run.Run.Refused)
	switch {
	case s.LocatedAfterS == nil:
		line("located", "never")
	case s.LocatedAfterM == nil:
		line("located", "after %.0f s", *s.LocatedAfterS)
	default:
		line("located", "after %.0f s and %.0f m", *s.LocatedAfterS, *s.LocatedAfterM)
	}
	if f := s.Figures; f.RMSEM != nil {
		line("error", "rms %.2f m, mean %.2f m, 50 %% %.2f m, 95 %% %.2f m, greatest %.2f m (%d posteriors with truth, from located on)",
			*f.RMSEM, *f.MeanM, *f.P50M, *f.P95M, *f.MaxM, f.Scored)
		line("radii hold", "50 %% radius %.1f %% of truths, 95 %% radius %.1f %%, 99 %% radius %.1f %%; beyond protection %d",
			100**f.Coverage50, 100**f.Coverage95, 100**f.Coverage99, *f.BeyondProtection)
		if f.ANEES != nil {
			line("anees", "%.2f (2 is exact; %s)", *f.ANEES, aneesBounds(s.Independent))
		}
		if s.AlongRMSEM != nil {
			line("along", "rms %.2f m (mean %+.2f m, forward positive), across rms %.2f m (mean %+.2f m, right positive)", *s.AlongRMSEM, *s.AlongMeanM, *s.AcrossRMSEM, *s.AcrossMeanM)
		}
		if s.CRPSM != nil && s.LogScore != nil {
			line("proper", "CRPS %.2f m, log score %.2f nats (smaller is better); worth %.0f independent errors", *s.CRPSM, *s.LogScore, *s.Independent)
		}
		if x := s.Protection; x != nil && x.Share != nil {
			within := "too few independent errors for an interval"
			if x.Low != nil {
				within = fmt.Sprintf("95 %% in %.2g to %.2g", *x.Low, *x.High)
			}
			line("protection", "truth outside in %d of %d posteriors, %d times: share %.2g, %s; %.0e was asked for",
				x.Beyond, x.Bounded, x.Episodes, *x.Share, within, x.Risk)
		}
		if w := s.LongestWrong; w != nil {
			line("wrong", "longest stretch located with the truth outside the 99 %% radius: %.1f s, %.0f m, from %.0f s after the start on", w.ForS, w.ForM, w.StartS)
		}
		if t := s.TruthNote; t != nil {
			if len(t.Below) > 0 {
				line("truth", "has an error of its own of %.2f m an axis: nothing is claimed by %s", t.SigmaM, strings.Join(t.Below, ", "))
			}
			if t.Twofold > 0 {
				line("truth", "says two places at one time in %d cases, of which the first of the file counts: is another vehicle or device in it?", t.Twofold)
			}
			if e := t.Estimate; e != nil {
				line("offset", "of the truth, estimated and not taken off: forward %+.2f ± %.2f m, right %+.2f ± %.2f m, late %+.3f ± %.3f s",
					e.ForwardM, e.ForwardSigmaM, e.RightM, e.RightSigmaM, e.LateS, e.LateSigmaS)
			}
		}
		if f.RightRoadFraction != nil {
			line("right road", "%.1f %%", 100**f.RightRoadFraction)
		}
	} else if s.FiguresAll.RMSEM != nil {
		line("error", "of the most probable place, never located: rms %.0f m over %d posteriors", *s.FiguresAll.RMSEM, s.FiguresAll.Scored)
	} else if e := s.TruthElsewhen; e != nil {
		line("error", "not known: %s", e)
	} else {
		line("error", "not known: the drive holds no truth for its posteriors")
	}
	if o := s.TruthOffMap; o != nil {
		line("truth", "%s", o)
	}
	if h := s.HeldOutFixes; h != nil && h.RMSEM != nil {
		line("fixes", "held out: rms %.2f m, 50 %% %.2f m, 95 %% %.2f m over %d, their own error (%.2f m an axis) in it; %.1f %% outside of what 95 %% should be in",
			*h.RMSEM, *h.P50M, *h.P95M, h.Fixes, *h.SigmaM, 100**h.Outside)
	}
	if l := s.LookedBack; l != nil {
		printLookedBack(line, l)
	}
	if l := s.Lagged; l != nil && l.Figures.RMSEM != nil {
		f := l.Figures
		line("lagged", "%g s later: rms %.2f m, 50 %% %.2f m, 95 %% %.2f m, greatest %.2f m over %d", l.LagS, *f.RMSEM, *f.P50M, *f.P95M, *f.MaxM, f.Scored)
	}
	for _, i := range s.Sensors {
		if i.Whiteness != nil && (*i.Whiteness < 1e-3 || math.Abs(i.Mean) > 0.5 || i.SD > 1.5) {
			line("innovations", "of %s (%s): mean %+.2f, sd %.2f (0 and 1 are right), whiteness p %.2g over %d", i.Sensor, i.Kind, i.Mean, i.SD, *i.Whiteness, i.Scores)
		}
	}
	line("evidence", "%.1f nats", s.LogEvidence)
	if run.Resumed {
		line("speed", "not run again: the same is in %s; --again runs it", run.Dir)
	} else {
		line("speed", "%.0f measurements a second, %.0f times real time", run.Timing.MeasurementsPerSecond, run.Timing.TimesRealTime)
	}
	line("sha256", "%s", s.PosteriorSHA256)
	_, err := io.WriteString(w, b.String())
	return err
}

// aneesBounds says where means of as many independent errors are.
func aneesBounds(independent *float64) string {
	if independent == nil || *independent < 2 {
		return "too few independent errors for bounds"
	}
	low, high := score.ANEESBounds(int(*independent), 2, 0.95)
	return fmt.Sprintf("95 %% of means of %d independent errors in %.2f to %.2f", int(*independent), low, high)
}

// printLookedBack prints what looking back gave.
func printLookedBack(line func(label, format string, args ...any), l *score.LookedBack) {
	for _, x := range []struct {
		name string
		f    *score.Hindsight
	}{{"smoothed", l.Smoothed}, {"path", l.Path}} {
		if x.f != nil && x.f.Figures.RMSEM != nil {
			f := x.f.Figures
			line(x.name, "rms %.2f m, 50 %% %.2f m, 95 %% %.2f m, greatest %.2f m over the same times; rms %.2f m over the whole drive", *f.RMSEM, *f.P50M, *f.P95M, *f.MaxM, *x.f.FiguresAll.RMSEM)
		}
	}
	if a := l.Agreement; a.MeanSquare != nil {
		line("looked back", "the mean moved by %.2f m rms; squared, in terms of what was expected, %.2f in the mean (2 is exact), %.1f %% where 99 %% should be",
			a.RMSM, *a.MeanSquare, 100**a.Within99)
	}
}

// printSweep prints what the runs of a sweep come to.
func printSweep(w io.Writer, s *sweep.Summary) error {
	var b strings.Builder
	wide := len("setting")
	for i := range s.Rows {
		wide = max(wide, utf8.RuneCountInString(s.Rows[i].Setting))
	}
	row := func(name, end string, p *sweep.Pooled) {
		fmt.Fprintf(&b, "  %-*s %6d %14.1f %8s %8s %8s %9s %6d %6d%s\n", wide, name, p.Drives, p.LogEvidence,
			figure(p.RMSEM, 1), figure(p.P95M, 1), figure(p.CRPSM, 1), figure(p.Coverage95, 100), p.Beyond, p.NeverLocated, end)
	}
	table := func(title string, of func(*sweep.Row) *sweep.Pooled) {
		fmt.Fprintf(&b, "%s\n  %-*s %6s %14s %8s %8s %8s %9s %6s %6s\n", title, wide, "setting", "drives", "evidence nats", "rmse m", "p95 m", "CRPS m", "in 95 %", "beyond", "never")
		for i := range s.Rows {
			end := ""
			if n := s.Rows[i].CutShort; n > 0 {
				end = fmt.Sprintf("  partial: %d cut short", n)
			}
			if p := of(&s.Rows[i]); p != nil {
				row(s.Rows[i].Setting, end, p)
			}
		}
	}
	title := "drives"
	if len(s.HeldOut) > 0 {
		title = "drives that are not held out"
	}
	table(title, func(r *sweep.Row) *sweep.Pooled { return &r.Figures })
	if len(s.HeldOut) > 0 {
		table("held out: "+strings.Join(s.HeldOut, ", "), func(r *sweep.Row) *sweep.Pooled { return r.HeldOut })
	}
	fmt.Fprintf(&b, "%d settings tried so far, %d runs here, %d of them from an earlier job, %d cut short, %d failed\n", s.SettingsTried, s.Runs, s.Resumed, s.CutShort, s.Failed)
	if s.Best != "" {
		fmt.Fprintf(&b, "most evidence: %s. The best of %d settings looks better than it is", s.Best, s.SettingsTried)
		if len(s.HeldOut) > 0 {
			b.WriteString(": go by the drives that are held out")
		} else {
			b.WriteString(": hold some drives out (--hold-out)")
		}
		b.WriteString("\n")
	}
	_, err := io.WriteString(w, b.String())
	return err
}

// figure is a number as text, – if it is not known.
func figure(x *float64, by float64) string {
	if x == nil {
		return "–"
	}
	return fmt.Sprintf("%.2f", by**x)
}
