// Package results is what a replay leaves in a folder, and how it is found again:
//
//	DIR/SETTING/DRIVE/{run.json, score.json, timing.json, track.csv, …}
//
// run.json says what the run was made of; SETTING is Given where nothing was
// varied.
package results

import (
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"leadline/engine/study/score"
)

// Given is the setting in which nothing is varied.
const Given = "given"

// The files of a run's folder.
const (
	RunFile    = "run.json"
	ScoreFile  = "score.json"
	TimingFile = "timing.json"
	TableFile  = "track.csv"

	FindingsFile = "findings.json" // where nothing is varied

	GPXFile     = "track.gpx"     // if asked for
	ParquetFile = "track.parquet" // if asked for

	SmoothedFile = "smoothed.csv" // if asked for
	PathFile     = "path.csv"     // if asked for
)

// Run is what a run was made of.
type Run struct {
	Drive       string `json:"drive"`
	DriveFile   string `json:"drive_file"`
	DriveSHA256 string `json:"drive_sha256"`
	Vehicle     string `json:"vehicle"`
	// Map is the file and MapFingerprint what is in it.
	Map            string `json:"map"`
	MapFingerprint string `json:"map_fingerprint"`
	MapSource      string `json:"map_source"`
	MapLicence     string `json:"map_licence"`
	// Suite is its name, "" without one, SuiteSHA256 that of the suite with its
	// defaults and what the setting changes in it.
	Suite       string `json:"suite"`
	SuiteSHA256 string `json:"suite_sha256"`
	Setting     string `json:"setting"`
	// Set are the setting's changes, KEY=VALUE.
	Set     []string `json:"set"`
	HeldOut bool     `json:"held_out"`
	// Places are the suite's posts and beacons.
	Places []Place `json:"places"`

	MaxCells    int          `json:"max_cells"`
	AlertLimitM float64      `json:"alert_limit_m"`
	TruthOffset score.Offset `json:"truth_offset"`

	Version      string `json:"version"`
	Program      string `json:"program_sha256"`
	Architecture string `json:"architecture"`
	// Command makes the run again.
	Command []string `json:"command"`

	Accepted     uint64 `json:"accepted"`
	Refused      uint64 `json:"refused"`
	FirstRefusal string `json:"first_refusal,omitempty"`
	// Partial says that the run ended before its drive did, Stopped why.
	Partial bool   `json:"partial"`
	Stopped string `json:"stopped,omitempty"`
	// Key sums up all that the posteriors depend on.
	Key string `json:"key"`
}

// Place is a post or a beacon, in degrees.
type Place struct {
	Name string  `json:"name"`
	Lon  float64 `json:"lon"`
	Lat  float64 `json:"lat"`
}

// Findings are what a replay found of itself, in words.
type Findings struct {
	// Suspect is what speaks for a mistake; none if nothing does.
	Suspect []string `json:"suspect"`
	// Verdict is that of the usual mistakes that were tried, "" where none were.
	Verdict string `json:"verdict,omitempty"`
}

// Result is a run's folder that was read.
type Result struct {
	Dir string
	Run
	Score *score.Score
}

// Read reads a run's folder.
func Read(dir string) (*Result, error) {
	r := &Result{Dir: dir, Score: &score.Score{}}
	if err := ReadJSON(filepath.Join(dir, RunFile), &r.Run); err != nil {
		return nil, err
	}
	if err := ReadJSON(filepath.Join(dir, ScoreFile), r.Score); err != nil {
		return nil, err
	}
	return r, nil
}

// maxJSON bounds the files that are read whole.
const maxJSON = 16 << 20

// ReadJSON reads a file of results.
func ReadJSON(path string, into any) error {
	info, err := os.Stat(path)
	if err != nil {
		return err
	}
	if info.Size() > maxJSON {
		return fmt.Errorf("%s has %d bytes: at most %d are read", path, info.Size(), maxJSON)
	}
	text, err := os.ReadFile(path)
	if err != nil {
		return err
	}
	if err := json.Unmarshal(text, into); err != nil {
		return fmt.Errorf("%s: %w: make it again with `leadline replay --out`", path, err)
	}
	return nil
}

// Find reads the runs in a folder: of one run, of a setting, or of all settings;
// by setting and drive. A folder without any is an error.
func Find(dir string) ([]*Result, error) {
	if info, err := os.Stat(dir); errors.Is(err, fs.ErrNotExist) || err == nil && !info.IsDir() {
		return nil, fmt.Errorf("there is no folder %s: give one that `leadline replay --out` wrote", dir)
	} else if err != nil {
		return nil, err
	}
	var out []*Result
	for _, pattern := range []string{"", "*", "*/*"} {
		paths, err := filepath.Glob(filepath.Join(escape(dir), pattern, RunFile))
		if err != nil {
			return nil, fmt.Errorf("%s: %w", dir, err)
		}
		for _, p := range paths {
			at := filepath.Dir(p)
			if strings.HasPrefix(filepath.Base(at), ".") { // a run that is being written
				continue
			}
			r, err := Read(at)
			if err != nil {
				return nil, err
			}
			out = append(out, r)
		}
		if len(out) > 0 {
			slices.SortStableFunc(out, func(a, b *Result) int {
				return strings.Compare(a.Setting+"\x00"+a.Drive, b.Setting+"\x00"+b.Drive)
			})
			return out, nil
		}
	}
	return nil, fmt.Errorf("%s holds no results: give a folder that `leadline replay --out` wrote", dir)
}

// Settings lists the settings that have runs in a folder.
func Settings(dir string) ([]string, error) {
	paths, err := filepath.Glob(filepath.Join(escape(dir), "*", "*", RunFile))
	if err != nil {
		return nil, fmt.Errorf("%s: %w", dir, err)
	}
	seen := map[string]bool{}
	for _, p := range paths {
		if !strings.HasPrefix(filepath.Base(filepath.Dir(p)), ".") {
			seen[filepath.Base(filepath.Dir(filepath.Dir(p)))] = true
		}
	}
	return slices.Sorted(maps.Keys(seen)), nil
}

// escape keeps a folder's name from being taken for a pattern.
func escape(dir string) string {
	return strings.NewReplacer(`[`, `\[`, `*`, `\*`, `?`, `\?`, `\`, `\\`).Replace(dir)
}

// WriteJSON writes a value as indented JSON.
func WriteJSON(path string, v any) error {
	text, err := json.MarshalIndent(v, "", "  ")
	if err != nil {
		return fmt.Errorf("%s: %w", path, err)
	}
	return os.WriteFile(path, append(text, '\n'), 0o644)
}
