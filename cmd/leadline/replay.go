package main

import (
	"bufio"
	"bytes"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"leadline/engine/drivefile"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/diagnose"
	"leadline/engine/study/replay"
	"leadline/engine/study/score"
	"leadline/engine/study/track"
	"leadline/network/roadfile"
	"leadline/terrain/heightfile"
)

// setting names the folder of results where nothing is varied.
const setting = "given"

type replayOptions struct {
	mapPath, suite, dir string
	asJSON              bool
	allowRefused        bool
	maxCells            int
	diagnose, explain   string
	explainWithin       time.Duration
}

func replayCommand() *cobra.Command {
	var o replayOptions
	c := &cobra.Command{
		Use:   "replay DRIVE... --map MAP",
		Short: "Run recorded drives and compare them with the truth they hold",
		Args:  cobra.MinimumNArgs(1),
		RunE:  func(c *cobra.Command, args []string) error { return replayDrives(c, o, args) },
	}
	f := c.Flags()
	f.StringVar(&o.mapPath, "map", "", "compiled map; without it the map that the drive's header names, beside the drive")
	f.StringVar(&o.suite, "suite", "", "suite file or starter name, in place of the one that the drive's header names")
	f.StringVar(&o.dir, "out", "", "write DIR/"+setting+"/DRIVE/{track.csv, track.geojson, track.png, score.json, timing.json}")
	f.BoolVar(&o.asJSON, "json", false, "print the scores as JSON, one object a line")
	f.BoolVar(&o.allowRefused, "allow-refused", false, "exit with status 0 although measurements were refused")
	f.StringVar(&o.diagnose, "diagnose", diagnoseAuto, "try the opening again with each usual mistake undone: always, never, or auto, when the run is suspect")
	f.StringVar(&o.explain, "explain", "", "say which measurement moved the belief how much around this time: RFC 3339, or seconds after the first measurement")
	f.DurationVar(&o.explainWithin, "explain-within", 2*time.Second, "how far around that time")
	f.IntVar(&o.maxCells, "max-cells", defaultCells, "greatest number of cells of a belief; decides how finely a wide start is searched")
	settable(c, "max-cells")
	return c
}

func replayDrives(c *cobra.Command, o replayOptions, paths []string) error {
	if o.maxCells < 1 {
		return fmt.Errorf("--max-cells is %d: give a whole number, 1 or more", o.maxCells)
	}
	if err := o.checkStudies(); err != nil {
		return err
	}
	names := map[string]string{}
	for _, path := range paths {
		name := driveName(path)
		if other, ok := names[name]; ok && o.dir != "" {
			return fmt.Errorf("%s and %s have one name, and so one folder under --out: rename one", other, path)
		}
		names[name] = path
	}
	maps := map[string]*mapFile{}
	defer func() {
		for _, m := range maps {
			m.Close()
		}
	}()
	var refused error
	for _, path := range paths {
		run, err := o.replay(c.ErrOrStderr(), maps, path)
		if err != nil {
			return err
		}
		if o.dir != "" {
			if err := run.write(filepath.Join(o.dir, setting, driveName(path))); err != nil {
				return err
			}
		}
		if err := o.say(c, run, path); err != nil {
			return err
		}
		if n := run.result.Refused; n > 0 && refused == nil && !o.allowRefused {
			refused = fmt.Errorf("%s: %d of %d measurements were refused, first %w; with --allow-refused this is no error",
				path, n, n+run.result.Accepted, run.result.Refusals[0])
		}
	}
	return refused
}

// say prints a run's score and what its studies find. A person reads what is
// known before the studies begin, which take longer than the replay.
func (o *replayOptions) say(c *cobra.Command, run *driveRun, path string) error {
	out := c.OutOrStdout()
	why, err := look(run, path)
	if err != nil {
		return err
	}
	if !o.asJSON {
		if err := errors.Join(printScore(out, run.score, run.result), why.printFindings(out)); err != nil {
			return err
		}
	}
	if err := o.study(c.ErrOrStderr(), why, run, path); err != nil {
		return err
	}
	if o.asJSON {
		return printJSONLine(out, struct {
			*score.Score
			*studies
		}{run.score, why})
	}
	return why.print(out)
}

// driveRun is a drive that was replayed.
type driveRun struct {
	m      *mapFile
	track  *track.Track
	score  *score.Score
	result *replay.Result
	// What it was made of, for studies.
	drive  *drivefile.Drive
	config session.Config
	record *diagnose.Record
}

func (o *replayOptions) replay(errs io.Writer, maps map[string]*mapFile, path string) (*driveRun, error) {
	d, err := readDrive(path)
	if err != nil {
		return nil, err
	}
	mapPath := o.mapPath
	if mapPath == "" {
		if mapPath, err = headerMap(d.Header.Map, path); err != nil {
			return nil, err
		}
	}
	m := maps[mapPath]
	if m == nil {
		if m, err = openMap(mapPath); err != nil {
			return nil, err
		}
		maps[mapPath] = m
	}
	suite, err := driveSuite(o.suite, d.Header.Suite, path)
	if err != nil {
		return nil, err
	}
	show, end := progress(errs, driveName(path))
	config := session.Config{Space: m.Space, Names: m.Names, Suite: suite, MaxCells: o.maxCells}
	var record diagnose.Record
	res, err := replay.Run(d, config, replay.Options{Progress: show, Watch: record.Add})
	end()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	truth := replay.Truth(d)
	s, err := score.Of(score.Input{
		Drive: driveName(path), Version: versionText(), Posteriors: res.Posteriors, SHA256: res.Hash,
		StartNS: int64(res.Start), Truth: truth, Roads: m.near(),
	})
	if err != nil {
		return nil, fmt.Errorf("%s: comparing with the truth: %w", path, err)
	}
	return &driveRun{
		m, &track.Track{Drive: driveName(path), Posteriors: res.Posteriors, Truth: truth}, s, res,
		d, config, &record,
	}, nil
}

// write writes a run's files into a folder.
func (r *driveRun) write(dir string) error {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return fmt.Errorf("--out: %w", err)
	}
	for name, write := range map[string]func(io.Writer) error{
		"track.csv":     r.track.WriteCSV,
		"track.geojson": r.track.WriteGeoJSON,
		"score.json":    func(w io.Writer) error { return printJSON(w, r.score) },
		"timing.json":   func(w io.Writer) error { return printJSON(w, r.result.Timing) },
		"track.png":     r.picture,
	} {
		if err := writeFile(filepath.Join(dir, name), write); err != nil {
			return err
		}
	}
	return nil
}

func (r *driveRun) picture(w io.Writer) error {
	return r.track.Picture(w, track.Ground{Frame: r.m.Space.Frame(), Roads: r.m.lines(), Relief: r.m.field(), Places: places(r.config.Suite)})
}

// places are a suite's posts and beacons.
func places(s *sensor.Suite) (out []track.Place) {
	if s == nil {
		return nil
	}
	for _, p := range s.Posts {
		out = append(out, track.Place{Name: p.ID, At: p.Position()})
	}
	for _, b := range s.Beacons {
		out = append(out, track.Place{Name: b.ID, At: b.Position()})
	}
	return out
}

// readDrive reads a drive file whole.
func readDrive(path string) (*drivefile.Drive, error) {
	f, err := os.Open(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("there is no drive file %s: check the path", path)
	}
	if err != nil {
		return nil, err
	}
	defer f.Close()
	b := bufio.NewReader(f)
	if err := startsAsDrive(b, path); err != nil {
		return nil, err
	}
	return drivefile.ReadAll(b, path)
}

// startsAsDrive tells logs of other kinds from drive files, whose lines begin
// with a brace.
func startsAsDrive(b *bufio.Reader, path string) error {
	head, err := b.Peek(512)
	if err != nil && !errors.Is(err, io.EOF) {
		return fmt.Errorf("%s: %w", path, err)
	}
	head = bytes.TrimLeft(head, " \t\r\n\ufeff")
	if strings.HasSuffix(path, drivefile.Suffix) || len(head) == 0 || head[0] == '{' {
		return nil
	}
	how := "--columns COLUMNS.yaml "
	if head[0] == '$' || head[0] == '!' || head[0] == '\\' {
		how = ""
	}
	return fmt.Errorf("%s is no drive file: make one of a log with `leadline import %s %s-o %s%s --vehicle NAME`", path, path, how, driveName(path), drivefile.Suffix)
}

// driveName is a drive file's name without folder and suffix.
func driveName(path string) string {
	name := filepath.Base(path)
	if n, ok := strings.CutSuffix(name, drivefile.Suffix); ok && n != "" {
		return n
	}
	return strings.TrimSuffix(name, filepath.Ext(name))
}

// headerMap finds the map that a drive's header names, in the drive's folder.
func headerMap(name, drivePath string) (string, error) {
	if name == "" {
		return "", fmt.Errorf("%s: its header names no map: give one with --map", drivePath)
	}
	if path, ok := beside(drivePath, name, "", roadfile.Suffix, heightfile.Suffix); ok {
		return path, nil
	}
	return "", fmt.Errorf("%s: the map %q that its header names is not beside the drive: give the file with --map", drivePath, name)
}
