package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"leadline/engine/sensor"
	"leadline/engine/study/tune"
)

type tuneOptions struct {
	mapPath, suite, out, plots string
	figures                    []string
	holdEvery                  int
	asJSON                     bool
	tune.Options
}

func tuneCommand() *cobra.Command {
	var o tuneOptions
	c := &cobra.Command{
		Use:   "tune DRIVE... --suite SUITE --figure KEY",
		Short: "Find noise and drift figures of a suite in recorded drives",
		Args:  cobra.MinimumNArgs(1),
		RunE:  func(c *cobra.Command, args []string) error { return tuneSuite(c, o, args) },
	}
	f := c.Flags()
	f.StringVar(&o.mapPath, "map", "", "compiled map; without it the maps that the drives' headers name, beside the drives")
	f.StringVar(&o.suite, "suite", "", "suite file or starter name to begin with")
	f.StringArrayVar(&o.figures, "figure", nil, "figure to tune, as KEY or KEY=LOW:HIGH, such as sensors.odo.noise.sigma_m_per_sqrt_m=0.005:0.1; repeat. Without bounds a factor of 30 to either side of the suite's figure")
	f.IntVar(&o.holdEvery, "hold-out", 0, "hold every so-manyth drive out of the tuning, to compare before and after on; 0 holds none out")
	f.IntVar(&o.MaxEvaluations, "max-evaluations", 0, "end the search after so many sets of figures; ranges and profiles take more; 0: 60 a figure")
	f.BoolVar(&o.NoProfile, "no-profile", false, "leave out the profiles, which take more time than all else if there are several figures")
	f.StringVar(&o.out, "output", "", "write the suite with what was found to this file, its comments kept")
	f.StringVar(&o.plots, "plots", "", "write each figure's profile to this folder, as KEY.svg and KEY.png")
	f.IntVar(&o.MaxCells, "max-cells", defaultCells, "greatest number of cells of a belief; decides how finely a wide start is searched")
	f.BoolVar(&o.asJSON, "json", false, "print the result as JSON")
	settable(c, "max-cells")
	return c
}

func tuneSuite(c *cobra.Command, o tuneOptions, paths []string) error {
	switch {
	case o.suite == "" || len(o.figures) == 0:
		return errors.New("tune needs --suite and --figure: the suite to begin with, and which of its figures to look for")
	case o.MaxCells < 1:
		return fmt.Errorf("--max-cells is %d: give a whole number, 1 or more", o.MaxCells)
	case o.holdEvery < 0 || o.holdEvery == 1:
		return fmt.Errorf("--hold-out is %d: give 2 or more, or 0 to hold none out", o.holdEvery)
	case o.holdEvery > len(paths):
		return fmt.Errorf("--hold-out %d holds none out of so few drives, %d: give as many as that, a smaller number, or leave it out", o.holdEvery, len(paths))
	case o.plots != "" && o.NoProfile:
		return errors.New("--plots draws the profiles that --no-profile leaves out: give one of the two")
	}
	for _, s := range o.figures {
		f, err := parseFigure(s)
		if err != nil {
			return err
		}
		o.Figures = append(o.Figures, f)
	}
	text, err := suiteText(o.suite)
	if err != nil {
		return err
	}
	suite, err := sensor.ParseSuite(o.suite, text)
	if err != nil {
		return err
	}
	drives, held, end, err := o.open(paths)
	defer end()
	if err != nil {
		return err
	}
	show, done := progress(c.ErrOrStderr(), "evaluations")
	if show != nil {
		most := 100 * len(o.Figures)
		o.Progress = func(n int) { show(n, max(n, most)) }
	}
	ctx, stop := untilSignal()
	defer stop()
	o.Stop = ctx.Err
	r, err := tune.Run(suite, drives, held, o.Options)
	done()
	switch {
	case err != nil && ctx.Err() != nil:
		return failure{errors.New("interrupted before anything was found")}
	case err != nil:
		return err
	}
	if !r.Interrupted {
		if err := o.write(r, text); err != nil {
			return err
		}
	}
	if o.asJSON {
		err = printJSON(c.OutOrStdout(), r)
	} else {
		err = printTuned(c.OutOrStdout(), r)
	}
	if err == nil && r.Interrupted {
		err = failure{fmt.Errorf("interrupted after %d sets of figures: what is printed is the best so far, and no file was written", r.Evaluations)}
	}
	return err
}

// parseFigure reads KEY or KEY=LOW:HIGH.
func parseFigure(s string) (tune.Figure, error) {
	key, bounds, has := strings.Cut(s, "=")
	f := tune.Figure{Key: key}
	if !has {
		return f, nil
	}
	low, high, ok := strings.Cut(bounds, ":")
	var err1, err2 error
	f.Low, err1 = strconv.ParseFloat(low, 64)
	f.High, err2 = strconv.ParseFloat(high, 64)
	if !ok || err1 != nil || err2 != nil || f.Low <= 0 {
		return f, fmt.Errorf("--figure is %q: give KEY=LOW:HIGH with bounds above 0, such as %s=0.01:1", s, key)
	}
	return f, nil
}

// open reads drives and maps; the last of each holdEvery drives is held out.
func (o *tuneOptions) open(paths []string) (drives, held []tune.Drive, end func(), err error) {
	maps := map[string]*mapFile{}
	end = func() {
		for _, m := range maps {
			m.Close()
		}
	}
	for i, path := range paths {
		d, err := readDrive(path)
		if err == nil {
			err = vehicles(d.Header, path)
		}
		if err != nil {
			return nil, nil, end, err
		}
		mapPath := o.mapPath
		if mapPath == "" {
			if mapPath, err = headerMap(d.Header.Map, path); err != nil {
				return nil, nil, end, err
			}
		}
		m := maps[mapPath]
		if m == nil {
			if m, err = openMap(mapPath); err != nil {
				return nil, nil, end, err
			}
			maps[mapPath] = m
		}
		one := tune.Drive{Name: path, Drive: d, Space: m.Space, Names: m.Names}
		if o.holdEvery > 0 && (i+1)%o.holdEvery == 0 {
			held = append(held, one)
		} else {
			drives = append(drives, one)
		}
	}
	return drives, held, end, nil
}

// write writes suite and plots.
func (o *tuneOptions) write(r *tune.Result, text []byte) (err error) {
	if o.out != "" {
		for _, t := range r.Figures {
			if t.Known != tune.Estimated {
				continue
			}
			if text, err = sensor.EditSuite(o.suite, text, t.Key, tune.Text(*t.Value)); err != nil {
				return err
			}
		}
		if err := writeFile(o.out, func(w io.Writer) error { _, err := w.Write(text); return err }); err != nil {
			return err
		}
	}
	if o.plots == "" {
		return nil
	}
	if err := os.MkdirAll(o.plots, 0o755); err != nil {
		return fmt.Errorf("--plots: %w", err)
	}
	for i := range r.Figures {
		for _, format := range []string{"svg", "png"} {
			if err := writeFile(filepath.Join(o.plots, r.Figures[i].Key+"."+format), func(w io.Writer) error { return r.Figures[i].Plot(w, format) }); err != nil {
				return err
			}
		}
	}
	return nil
}

// printTuned says a result for a person.
func printTuned(w io.Writer, r *tune.Result) error {
	var b strings.Builder
	for _, t := range r.Figures {
		fmt.Fprintf(&b, "%s: ", t.Key)
		switch {
		case t.Known == tune.Silent:
			fmt.Fprintf(&b, "%s, from %s to %s", t.Known, tune.Text(t.Low), tune.Text(t.High))
		case t.Known == tune.BestSoFar:
			fmt.Fprintf(&b, "%s %s", t.Known, tune.Text(*t.Value))
		case t.Known != tune.Estimated:
			fmt.Fprintf(&b, "%s %s (95 %%)", t.Known, tune.Text(*t.Value))
		case t.LogSigma == nil:
			fmt.Fprintf(&b, "%s, without a standard error: the evidence has no sharp top, see the profile", tune.Text(*t.Value))
		default:
			fmt.Fprintf(&b, "%s, 95 %% from %s to %s", tune.Text(*t.Value), tune.Text(*t.From), tune.Text(*t.To))
		}
		if !r.Converged {
			b.WriteString(" (not firm: the search was cut short)")
		}
		if t.Given {
			fmt.Fprintf(&b, "; the suite had %s\n", tune.Text(t.Before))
		} else {
			fmt.Fprintf(&b, "; the suite did not say, and the search began at %s\n", tune.Text(t.Before))
		}
		if t.Bared > 0 {
			fmt.Fprintf(&b, "  the sigmas that %d of its measurements carry were left aside\n", t.Bared)
		}
	}
	fmt.Fprintf(&b, "log evidence of what was tuned on (drives: %d): %.1f before, %.1f after, %+.1f nats\n", r.Drives, r.Before, r.After, r.After-r.Before)
	if r.HeldBefore != nil {
		fmt.Fprintf(&b, "of what was held out (drives: %d): %.1f before, %.1f after, %+.1f nats", r.Held, *r.HeldBefore, *r.HeldAfter, *r.HeldAfter-*r.HeldBefore)
		if *r.HeldAfter < *r.HeldBefore {
			b.WriteString(": what was found does not hold there")
		}
		b.WriteByte('\n')
	} else if !r.Interrupted {
		b.WriteString("no drive was held out: whether it holds on others is not known (--hold-out)\n")
	}
	ended := "the search ended by itself"
	switch {
	case r.Interrupted && !r.Converged:
		ended = "the search was interrupted"
	case !r.Converged:
		ended = "the search was cut short: give more --max-evaluations"
	}
	fmt.Fprintf(&b, "%d sets of figures were tried, %d of them in the search; %s\n", r.Evaluations, r.Searched, ended)
	_, err := io.WriteString(w, oneLinePerLine(b.String()))
	return err
}

// oneLinePerLine keeps what names brought in from breaking lines.
func oneLinePerLine(s string) string {
	lines := strings.Split(s, "\n")
	for i, l := range lines {
		lines[i] = oneLine(l)
	}
	return strings.Join(lines, "\n")
}
