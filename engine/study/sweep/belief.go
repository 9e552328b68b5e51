package sweep

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"time"

	"leadline/engine/filter"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/belief"
	"leadline/engine/study/replay"
)

// moments are the times at which a run writes beliefs.
func (w *work) moments() []replay.Moment {
	if w.dir == "" {
		return nil
	}
	return w.job.Beliefs
}

// belief writes the session's belief.
func (w *work) belief(at sensor.Time, s *session.Session) error {
	b := &belief.Belief{TimeNS: int64(at), Drive: w.unit.drive.Name, Space: w.unit.drive.Map.Space}
	s.ReadBelief(&b.Cloud)
	b.Level, b.Lattice = s.Cells()
	stem := "belief-" + time.Unix(0, b.TimeNS).UTC().Format("20060102T150405.999999999Z")
	err := w.put(stem+b.Suffix(), b.Write)
	if _, roads := b.Space.(filter.LineSpace); err == nil && roads && w.job.Parquet {
		err = w.put(stem+".parquet", func(f io.Writer) error { return b.WriteParquet(f, w.job.Version) })
	}
	return err
}

// put writes a file of the run's folder.
func (w *work) put(name string, write func(io.Writer) error) error {
	f, err := os.Create(filepath.Join(w.dir, name))
	if err != nil {
		return fmt.Errorf("--out: %w", err)
	}
	out := bufio.NewWriter(f)
	if err := errors.Join(write(out), out.Flush(), f.Close()); err != nil {
		return fmt.Errorf("%s: %w", name, err)
	}
	return nil
}
