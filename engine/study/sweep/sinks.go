package sweep

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"leadline/engine/study/results"
	"leadline/engine/study/score"
	"leadline/engine/study/track"
	"leadline/engine/summary"
)

// sinks take the posteriors of a run.
type sinks struct {
	scorer      *score.Scorer
	innovations score.Innovations
	fixes       score.Fixes
	track       track.Track
	drawn       bool // where nothing is varied
	writers     []track.Writer
	files       []*file
	told        int // measurements that the meter knows of
	err         error
}

// file is a buffered file.
type file struct {
	*bufio.Writer
	f *os.File
}

func newSinks(w *work) (*sinks, error) {
	s := &sinks{
		scorer: score.New(score.Input{
			Drive: w.unit.drive.Name, Version: w.job.Version, Truth: w.truth, Roads: w.unit.drive.Map.Near,
			Offset: w.job.TruthOffset, Estimate: w.job.EstimateTruth,
		}),
		track: track.Track{Drive: w.unit.drive.Name, Truth: w.truth},
	}
	if w.dir == "" {
		return s, nil
	}
	s.drawn = len(w.unit.setting.Changes) == 0 && w.unit.drive.Map.Ground != nil
	writers := []writer{
		{results.TableFile, func(f io.Writer) (track.Writer, error) { return track.NewTable(f) }},
		{"track.geojson", func(f io.Writer) (track.Writer, error) { return track.NewFeatures(f, w.unit.drive.Name, w.truth) }},
	}
	if w.job.GPX {
		writers = append(writers, writer{results.GPXFile, func(f io.Writer) (track.Writer, error) {
			return track.NewGPX(f, w.unit.drive.Name, w.job.Version, w.truth)
		}})
	}
	if w.job.Parquet {
		writers = append(writers, writer{results.ParquetFile, func(f io.Writer) (track.Writer, error) {
			return track.NewParquet(f, w.unit.drive.Name, w.job.Version), nil
		}})
	}
	var err error
	if s.writers, err = s.open(w, writers); err != nil {
		s.drop()
		return nil, err
	}
	return s, nil
}

// writer makes one of a file.
type writer struct {
	name  string
	begin func(io.Writer) (track.Writer, error)
}

// open creates files and begins to write them.
func (s *sinks) open(w *work, writers []writer) (begun []track.Writer, err error) {
	for _, x := range writers {
		f, err := os.Create(filepath.Join(w.dir, x.name))
		if err != nil {
			return nil, fmt.Errorf("--out: %w", err)
		}
		b := &file{bufio.NewWriterSize(f, 1<<16), f}
		s.files = append(s.files, b)
		out, err := x.begin(b)
		if err != nil {
			return nil, fmt.Errorf("--out: %w", err)
		}
		begun = append(begun, out)
	}
	return begun, nil
}

// final takes a posterior. The first error stays.
func (s *sinks) final(p *summary.Posterior) {
	if s.err != nil {
		return
	}
	step := track.Step{Posterior: p}
	if step.Truth, step.ErrorM, step.Known, s.err = s.scorer.Add(p); s.err != nil {
		return
	}
	for _, w := range s.writers {
		s.err = errors.Join(s.err, w.Add(step))
	}
	if s.drawn {
		s.err = errors.Join(s.err, s.track.Add(step))
	}
}

// close completes the files.
func (s *sinks) close() error {
	err := s.err
	for _, w := range s.writers {
		err = errors.Join(err, w.Close())
	}
	for _, f := range s.files {
		err = errors.Join(err, f.Flush(), f.f.Close())
	}
	s.writers, s.files = nil, nil
	return err
}

// drop closes what is open.
func (s *sinks) drop() {
	for _, f := range s.files {
		_ = f.f.Close() // its folder goes, too
	}
	s.writers, s.files = nil, nil
}

// picture draws the track.
func (s *sinks) picture(w *work) error {
	if !s.drawn {
		return nil
	}
	f, err := os.Create(filepath.Join(w.dir, "track.png"))
	if err != nil {
		return fmt.Errorf("--out: %w", err)
	}
	g := w.unit.drive.Map.Ground()
	if suite := w.unit.suite; suite != nil {
		for _, p := range suite.Posts {
			g.Places = append(g.Places, track.Place{Name: p.ID, At: p.Position()})
		}
		for _, b := range suite.Beacons {
			g.Places = append(g.Places, track.Place{Name: b.ID, At: b.Position()})
		}
	}
	return errors.Join(s.track.Picture(f, g), f.Close())
}
