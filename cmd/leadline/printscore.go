package main

import (
	"encoding/json"
	"fmt"
	"io"
	"strings"

	"leadline/engine/study/replay"
	"leadline/engine/study/score"
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
func printScore(w io.Writer, s *score.Score, r *replay.Result) error {
	var b strings.Builder
	line := func(label, format string, args ...any) {
		fmt.Fprintf(&b, "  %-12s %s\n", label, fmt.Sprintf(format, args...))
	}
	fmt.Fprintf(&b, "%s\n", s.Drive)
	line("posteriors", "%d from %d measurements, %d refused", s.Posteriors, r.Accepted+r.Refused, r.Refused)
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
			line("anees", "%.2f (2 is exact; 95 %% of independent samples in %.2f to %.2f)", *f.ANEES, *f.ANEESLow, *f.ANEESHigh)
		}
		if f.RightRoadFraction != nil {
			line("right road", "%.1f %%", 100**f.RightRoadFraction)
		}
	} else if s.FiguresAll.RMSEM != nil {
		line("error", "of the most probable place, never located: rms %.0f m over %d posteriors", *s.FiguresAll.RMSEM, s.FiguresAll.Scored)
	} else {
		line("error", "not known: the drive holds no truth for its posteriors")
	}
	line("evidence", "%.1f nats", s.LogEvidence)
	line("speed", "%.0f measurements a second, %.0f times real time", r.Timing.MeasurementsPerSecond, r.Timing.TimesRealTime)
	line("sha256", "%s", s.PosteriorSHA256)
	_, err := io.WriteString(w, b.String())
	return err
}
