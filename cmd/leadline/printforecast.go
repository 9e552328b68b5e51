package main

import (
	"fmt"
	"io"
	"maps"
	"slices"
	"strings"
	"text/tabwriter"

	"leadline/engine/study/forecast"
)

// mostWeak and mostLines bound what a person is shown; JSON has all.
const (
	mostWeak  = 12
	mostLines = 12
)

// printForecast says a forecast for a person.
func printForecast(w io.Writer, f *forecast.Forecast) error {
	var b strings.Builder
	fmt.Fprintf(&b, "%s: %.0f m in %.0f s, start known to %g m, limit %g m\n", oneLine(f.Route), f.LengthM, f.DurationS, f.StartM, f.LimitM)
	var rates []string
	for _, name := range slices.Sorted(maps.Keys(f.RatesHz)) {
		rates = append(rates, fmt.Sprintf("%s %g", name, f.RatesHz[name]))
	}
	fmt.Fprintf(&b, "measurements a second: %s", oneLine(strings.Join(rates, ", ")))
	if len(f.LeftOut) > 0 {
		fmt.Fprintf(&b, "; left out: %s", oneLine(strings.Join(f.LeftOut, ", ")))
	}
	b.WriteByte('\n')
	by := "by the Cramér–Rao bound"
	if f.Seed != nil {
		by = fmt.Sprintf("the median of %d runs, seed %d", f.Runs, *f.Seed)
	}
	fmt.Fprintf(&b, "predicted 95 %% radius, %s: median %.1f m, worst %.1f m at %.0f m; beyond the limit on %.1f %% of the way\n", by, f.MedianM, f.WorstM, f.WorstAtM, 100*f.Beyond)
	if f.Seed == nil {
		b.WriteString("(no filter does better than this bound, and one in doubt of its place does worse: --runs says by how much)\n")
	}
	fmt.Fprintf(&b, "protection radius at a risk of %g: beyond the limit on %.1f %% of the way\n", f.Risk, 100*f.Unprotected)
	printAlike(&b, f)
	printSamples(&b, f)
	printWeak(&b, f)
	_, err := io.WriteString(w, b.String())
	return err
}

func printAlike(b *strings.Builder, f *forecast.Forecast) {
	if len(f.Alike) == 0 {
		return
	}
	located := "half of the stretches do not locate a vehicle"
	if f.LocateM != nil {
		located = fmt.Sprintf("located after %.0f m (median)", *f.LocateM)
	}
	fmt.Fprintf(b, "alike places, over %.0f m from a place known to %.0f m: at most %.2g of the probability elsewhere; %s\n", f.StretchM, f.SearchM, *f.MostAmbiguous, located)
	fmt.Fprintf(b, "\n  from m    to m   elsewhere  located after\n")
	for _, a := range thinned(f.Alike, mostLines) {
		after := "not within reach"
		if a.LocatedM != nil {
			after = fmt.Sprintf("%.0f m, %.0f s", *a.LocatedM, *a.LocatedS)
		}
		fmt.Fprintf(b, "%8.0f %7.0f %11.2g  %s\n", a.FromM, a.ToM, a.Ambiguity, after)
	}
}

// thinned keeps at most n of a list, evenly.
func thinned[T any](all []T, n int) []T {
	if len(all) <= n {
		return all
	}
	out := make([]T, n)
	for i := range out {
		out[i] = all[i*(len(all)-1)/(n-1)]
	}
	return out
}

func printSamples(b *strings.Builder, f *forecast.Forecast) {
	b.WriteString("\n   way m  time s  bound m  protected m")
	if f.Seed != nil {
		b.WriteString("  runs: stated m (5 to 95 %)  95 % of errors m  located")
	}
	b.WriteByte('\n')
	for _, s := range thinned(f.Samples, mostLines) {
		fmt.Fprintf(b, "%8.0f %7.0f %8.1f %12.1f", s.WayM, s.TimeS, s.BoundRadius95M, s.BoundProtectionM)
		if r := s.Runs; r != nil {
			fmt.Fprintf(b, "  %14.1f (%.1f to %.1f) %17.1f %8.0f%%", r.Radius95P50M, r.Radius95P5M, r.Radius95P95M, r.ErrorP95M, 100*r.Located)
		}
		b.WriteByte('\n')
	}
}

func printWeak(b *strings.Builder, f *forecast.Forecast) {
	if len(f.Weak) == 0 {
		b.WriteString("\nno stretch is beyond the limit\n")
		return
	}
	fmt.Fprintf(b, "\nstretches beyond the limit: %d\n", len(f.Weak))
	for i, s := range f.Weak {
		if i == mostWeak {
			fmt.Fprintf(b, "and %d more: --json lists them\n", len(f.Weak)-mostWeak)
			break
		}
		fmt.Fprintf(b, "%8.0f to %.0f m: up to %.1f m, at %.0f m\n", s.FromM, s.ToM, s.Radius95M, s.WorstM)
		if len(s.Help) == 0 && i < 5 {
			b.WriteString("         neither a fix nor a beacon that was tried there helps\n")
		}
		for _, h := range s.Help {
			fmt.Fprintf(b, "         a %s of %g m at %.0f m (lon %.6f, lat %.6f): by the %s from up to %.1f to %.1f m, beyond the limit on %.0f instead of %.0f m\n",
				h.What, h.SigmaM, h.WayM, h.Lon, h.Lat, h.By, h.BeforeM, h.AfterM, h.WeakAfterM, h.WeakBeforeM)
		}
	}
}

// printRoutes compares routes.
func printRoutes(w io.Writer, all []*forecast.Forecast) error {
	fmt.Fprintln(w)
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintln(t, "length m\ttime s\tmedian m\tworst m\tbeyond\tunprotected\telsewhere\tlocated m\t  route")
	for _, f := range all {
		elsewhere, located := "-", "-"
		if f.MostAmbiguous != nil {
			elsewhere = fmt.Sprintf("%.2g", *f.MostAmbiguous)
		}
		if f.LocateM != nil {
			located = fmt.Sprintf("%.0f", *f.LocateM)
		}
		fmt.Fprintf(t, "%.0f\t%.0f\t%.1f\t%.1f\t%.1f%%\t%.1f%%\t%s\t%s\t  %s\n", f.LengthM, f.DurationS, f.MedianM, f.WorstM, 100*f.Beyond, 100*f.Unprotected, elsewhere, located, oneLine(f.Route))
	}
	return t.Flush()
}
