package main

import (
	"fmt"
	"io"
	"strings"
	"text/tabwriter"

	"leadline/engine/study/diagnose"
)

// shownMistakes bounds the mistakes that are printed for people; --json has
// all.
const shownMistakes = 10

// printFindings prints what speaks for a mistake; nothing where nobody looked.
func (s *studies) printFindings(w io.Writer) error {
	if s.Findings == nil {
		return nil
	}
	var b strings.Builder
	for _, r := range s.Findings.Reasons {
		fmt.Fprintf(&b, "  %-12s %s\n", "suspect", r)
	}
	for _, n := range s.Findings.Beyond {
		fmt.Fprintf(&b, "  %-12s %s ends at %.4g ± %.2g, %+.1f sigma of its prior: %s\n", "estimated", n.Name, n.Mean, n.Sigma, n.PriorSigmas, n.Suggests)
	}
	_, err := io.WriteString(w, b.String())
	return err
}

// print prints what a person wants to know of why a drive went as it did.
func (s *studies) print(w io.Writer) error {
	var b strings.Builder
	if s.Diagnosis != nil {
		printMistakes(&b, s.Diagnosis)
	}
	if s.Explanation != nil {
		printEffects(&b, s.Explanation)
	}
	_, err := io.WriteString(w, b.String())
	return err
}

func printMistakes(b *strings.Builder, r *diagnose.Report) {
	fmt.Fprintf(b, "  %-12s the first %.0f s, %d measurements, again with each usual mistake undone (%d, in %.1f s)\n",
		"mistakes", r.OpeningS, r.Measurements, r.Tried, r.TookS)
	if r.CutShort {
		fmt.Fprintf(b, "  %-12s all but the best few were tried on less of it, for want of time; `--diagnose always` takes up to a minute of one core for them\n", "")
	}
	if r.BaseGivenUpAfter != nil {
		fmt.Fprintf(b, "  %-12s the log as it stands was given up after %.0f s, far behind: gains are at least what they say\n", "", *r.BaseGivenUpAfter)
	}
	t := tabwriter.NewWriter(b, 0, 8, 2, ' ', tabwriter.AlignRight)
	fmt.Fprint(t, "\tgain, nats\tgiven up, far behind, after\t  mistake\n")
	for i, k := range r.Candidates {
		if i == shownMistakes {
			fmt.Fprintf(t, "\t\t\t  and %d more\n", len(r.Candidates)-i)
			break
		}
		if k.GivenUpAfter != nil { // its gain is of a part, and far behind the best there
			fmt.Fprintf(t, "\t\t%.0f s\t  %s\n", *k.GivenUpAfter, k.Text())
			continue
		}
		against := ""
		if len(k.Suspect) > 0 && k.GainNats >= r.NeededNats {
			against = "; but " + strings.Join(k.Suspect, ", ")
		}
		fmt.Fprintf(t, "\t%+.1f\t\t  %s%s\n", k.GainNats, k.Text(), against)
	}
	t.Flush()
	fmt.Fprintf(b, "  %-12s %s\n", "verdict", r.Verdict)
}

func printEffects(b *strings.Builder, x *diagnose.Explanation) {
	fmt.Fprintf(b, "  %-12s what moved the belief around %s\n", "explained", x.At.Format("2006-01-02T15:04:05.999999999Z07:00"))
	t := tabwriter.NewWriter(b, 0, 8, 2, ' ', tabwriter.AlignRight)
	fmt.Fprint(t, "\tafter, s\tshift, m\teast\tnorth\t95 % radius, m\tinformation, nats\tevidence, nats\toutlier\tmodes, %\t  what\n")
	for i := range x.Effects {
		e := &x.Effects[i]
		opt := func(format string, v *float64, scale float64) string {
			if v == nil {
				return ""
			}
			return fmt.Sprintf(format, scale**v)
		}
		what := e.Kind + ": " + e.Sensor
		if e.Number != 0 {
			what += fmt.Sprintf(", number %d", e.Number)
		}
		if e.Status[0] != e.Status[1] {
			what += fmt.Sprintf(" (%s → %s)", e.Status[0], e.Status[1])
		}
		fmt.Fprintf(t, "\t%+.3f\t%.2f\t%+.2f\t%+.2f\t%.4g → %.4g\t%+.3f\t%s\t%s\t%s → %s\t  %s\n",
			e.AtS, e.ShiftM, e.EastM, e.NorthM, e.Radius95M[0], e.Radius95M[1], e.InformationNats(),
			opt("%+.2f", e.LogEvidence, 1), opt("%.1f %%", e.Outlier, 100), masses(e.Modes[0]), masses(e.Modes[1]), what)
	}
	t.Flush()
}

// masses prints the masses of modes in percent.
func masses(ms []float64) string {
	var out []string
	for _, m := range ms {
		if m >= 0.005 {
			out = append(out, fmt.Sprintf("%.0f", 100*m))
		}
	}
	return strings.Join(out, "/")
}
