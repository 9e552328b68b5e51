package main

import (
	"fmt"
	"io"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"leadline/engine/study/compare"
	"leadline/engine/study/results"
)

func compareCommand() *cobra.Command {
	var asJSON bool
	var failIf []string
	c := &cobra.Command{
		Use:   "compare A B",
		Short: "Say what changed from one folder of results to another, drive by drive",
		Long: `Compare sets two folders that replay --out wrote against each other: the whole, one
setting (DIR/SETTING), or one run (DIR/SETTING/DRIVE). Drives are paired by name.

--fail-if takes comparisons of figures joined by and, or, not and brackets, with
numbers, + - * /. A figure such as p95_m is its mean over the drives of B; with
a. before it that of A, diff. the mean difference, low. and high. the ends of its
95 % interval, worst. the worst run of B, better. and worse. in how many drives
B is; drives is how many are compared. Where one holds the exit status is 1:

    leadline compare before after --fail-if 'p95_m > 8 or low.p95_m > 0'`,
		Args: cobra.ExactArgs(2),
		RunE: func(c *cobra.Command, args []string) error {
			var gates []*compare.Gate
			for _, text := range failIf {
				g, err := compare.ParseGate(text)
				if err != nil {
					return fmt.Errorf("--fail-if %w", err)
				}
				gates = append(gates, g)
			}
			cmp, err := comparison(args[0], args[1])
			if err != nil {
				return err
			}
			print := printComparison
			if asJSON {
				print = func(w io.Writer, c *compare.Comparison) error { return printJSON(w, c) }
			}
			if err := print(c.OutOrStdout(), cmp); err != nil {
				return err
			}
			for _, g := range gates {
				holds, err := g.Holds(cmp)
				if err != nil {
					return fmt.Errorf("--fail-if %w", err)
				}
				if holds {
					return failure{fmt.Errorf("--fail-if %q holds", g.Text)}
				}
			}
			return nil
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print the comparison as JSON")
	c.Flags().StringArrayVar(&failIf, "fail-if", nil, "exit with status 1 if this holds, such as 'p95_m > 8'; repeat")
	return c
}

// comparison reads and compares two folders.
func comparison(a, b string) (*compare.Comparison, error) {
	ra, err := results.Find(a)
	if err != nil {
		return nil, err
	}
	rb, err := results.Find(b)
	if err != nil {
		return nil, err
	}
	c, err := compare.Of(ra, rb)
	if err != nil {
		return nil, fmt.Errorf("comparing %s with %s: %w", a, b, err)
	}
	c.A, c.B = a, b
	return c, nil
}

// printComparison prints what a person wants to know of a comparison.
func printComparison(w io.Writer, c *compare.Comparison) error {
	var b strings.Builder
	compared := fmt.Sprintf("%d drives", c.Drives)
	if c.Runs != c.Drives {
		compared = fmt.Sprintf("%d runs of %d drives", c.Runs, c.Drives)
	}
	fmt.Fprintf(&b, "A %s\nB %s\n%s\n%s compared, %d with the same posteriors\n", c.A, c.B, c.How, compared, c.SameBits)
	for _, only := range []struct {
		side  string
		names []string
	}{{"A", c.OnlyA}, {"B", c.OnlyB}} {
		if len(only.names) > 0 {
			fmt.Fprintf(&b, "only in %s: %s\n", only.side, strings.Join(only.names, ", "))
		}
	}
	for _, n := range append(slices.Clone(c.Notes), c.Apart()) {
		if n != "" {
			fmt.Fprintf(&b, "note: %s\n", n)
		}
	}
	fmt.Fprintf(&b, "%-20s %6s %10s %10s %10s  %-23s %6s %6s  %s\n", "figure", "drives", "A", "B", "B - A", "95 % interval", "better", "worse", "worst of B")
	for _, f := range c.Figures {
		interval := "–"
		if f.Low != nil {
			interval = fmt.Sprintf("%+.4g to %+.4g", *f.Low, *f.High)
		}
		fmt.Fprintf(&b, "%-20s %6d %10.4g %10.4g %+10.4g  %-23s %6d %6d  %.4g in %s\n", f.Name, f.Drives, f.A, f.B, f.Difference, interval, f.Better, f.Worse, f.WorstB, f.WorstDrive)
	}
	if few := c.Few(); few != "" {
		fmt.Fprintf(&b, "note: %s\n", few)
	}
	for _, p := range c.Pairs {
		for _, s := range p.Stretches {
			word := "better"
			if s.Worse {
				word = "worse"
			}
			fmt.Fprintf(&b, "%s: %s for %.0f s from %s on, mean error %.1f m to %.1f m\n", p.Name, word, s.ForS, s.From, s.AM, s.BM)
		}
	}
	_, err := io.WriteString(w, b.String())
	return err
}
