package main

import (
	"bytes"
	"errors"
	"fmt"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"

	"leadline/engine/study/report"
	"leadline/engine/study/track"
)

type reportOptions struct {
	output, pictures string
	maps             []string
	asJSON           bool
}

func reportCommand() *cobra.Command {
	var o reportOptions
	c := &cobra.Command{
		Use:   "report RESULT... -o REPORT.html",
		Short: "Make one page of results, which needs no network and can be printed",
		Long: `Report makes one page of what replay --out wrote: of a whole folder, one setting
(DIR/SETTING), or one run (DIR/SETTING/DRIVE). It holds the runs' figures, maps
with truth, estimate and weak stretches, errors and protection radii, where the
truth fell in its posteriors, how measurements fell in what was expected, and what
all of it was made of. With several folders, or one of several settings, they are
compared with the first.`,
		Args: cobra.MinimumNArgs(1),
		RunE: func(c *cobra.Command, args []string) error { return makeReport(c, o, args) },
	}
	f := c.Flags()
	f.StringVarP(&o.output, "output", "o", "", "the page")
	f.StringVar(&o.pictures, "pictures", "", "write each picture as SVG and PNG, and all figures as figures.json, to this folder")
	f.StringArrayVar(&o.maps, "map", nil, "look for the runs' maps here, too, by their fingerprints; repeat")
	f.BoolVar(&o.asJSON, "json", false, "print all figures as JSON")
	return c
}

func makeReport(c *cobra.Command, o reportOptions, dirs []string) error {
	if o.output == "" && o.pictures == "" && !o.asJSON {
		return errors.New("say what to make: --output REPORT.html, --pictures FOLDER or --json")
	}
	if o.output != "" { // what goes into it takes a while
		if err := writable("--output", o.output, filepath.Dir(o.output), "."+filepath.Base(o.output)+"."); err != nil {
			return err
		}
	}
	grounds := &grounds{paths: o.maps}
	defer grounds.close()
	r, err := report.Make(report.Input{
		Dirs: dirs, Ground: grounds.find, Version: versionText(), Command: append([]string{"leadline"}, os.Args[1:]...),
	})
	if err != nil {
		return err
	}
	if o.output != "" {
		var page bytes.Buffer
		if err := r.WriteHTML(&page); err != nil {
			return err
		}
		if err := os.WriteFile(o.output, page.Bytes(), 0o644); err != nil {
			return fmt.Errorf("--output: %w", err)
		}
		if !o.asJSON {
			fmt.Fprintf(c.OutOrStdout(), "%s: %d runs, %.1f MB\n", o.output, len(r.Runs), float64(page.Len())/1e6)
		}
	}
	if o.pictures != "" {
		if err := r.WritePictures(o.pictures); err != nil {
			return fmt.Errorf("--pictures: %w", err)
		}
		if !o.asJSON {
			fmt.Fprintf(c.OutOrStdout(), "%s: pictures and figures.json\n", filepath.Clean(o.pictures))
		}
	}
	if o.asJSON {
		return printJSON(c.OutOrStdout(), r)
	}
	return nil
}

// grounds opens the maps of runs.
type grounds struct {
	paths []string
	open  []*mapFile
}

// find opens the file that a run had, or one of those given that is the same map.
func (g *grounds) find(path, fingerprint string) (*track.Ground, error) {
	var first error
	for _, p := range append([]string{path}, g.paths...) {
		m, err := openMap(p)
		if err == nil && m.Space.Fingerprint() != fingerprint {
			err = fmt.Errorf("%s is not the map that the run was on: give that with --map", p)
			m.Close()
		}
		if err != nil {
			if first == nil {
				first = err
			}
			continue
		}
		g.open = append(g.open, m)
		ground := m.forStudies().Ground()
		return &ground, nil
	}
	return nil, first
}

func (g *grounds) close() {
	for _, m := range g.open {
		m.Close()
	}
}
