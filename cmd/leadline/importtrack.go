package main

import (
	"bufio"
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"regexp"

	"leadline/engine/drivefile"
	"leadline/engine/logfile"
)

// readTrack is a reader of positions, which are fixes or truths.
type readTrack func(r io.Reader, name string, truth bool, emit logfile.Emit) (*logfile.Tally, error)

// igcHead is how an IGC file begins: the maker and the number of the recorder.
var igcHead = regexp.MustCompile(`\AA[A-Z0-9]{3}[^$!\r\n]*\r?\n`)

// trackReader tells tracks from other logs by their beginning; nil for those.
func trackReader(head []byte) readTrack {
	head = bytes.TrimLeft(bytes.TrimPrefix(head, []byte("\ufeff")), " \t\r\n")
	switch {
	case bytes.HasPrefix(head, []byte("<")):
		return logfile.ReadGPX
	case bytes.HasPrefix(head, []byte(logfile.ParquetMagic)):
		return logfile.ReadParquetTrack
	case igcHead.Match(head):
		return logfile.ReadIGC
	}
	return nil
}

// addTruth writes the points of a track as truths of a drive, which must have
// happened while it was recorded, at least in part.
func (o *importOptions) addTruth(w *drivefile.Writer, log *logfile.Tally) error {
	if err := exists(o.truth); err != nil {
		return fmt.Errorf("--truth: %w", err)
	}
	f, err := os.Open(o.truth)
	if err != nil {
		return fmt.Errorf("--truth: %w", err)
	}
	defer f.Close()
	b := bufio.NewReaderSize(f, 1<<16)
	head, err := b.Peek(1 << 10)
	if err != nil && !errors.Is(err, io.EOF) {
		return fmt.Errorf("--truth: %w", err)
	}
	read := trackReader(head)
	if read == nil {
		return fmt.Errorf("--truth: %s is neither GPX nor IGC nor Parquet by its beginning", o.truth)
	}
	n := log.Usable() + log.Truths
	t, err := read(b, o.truth, true, func(rec logfile.Record) error {
		if n++; n > drivefile.MaxRecords {
			return fmt.Errorf("log and truth hold over %d records: split them", drivefile.MaxRecords)
		}
		x := rec.Truth
		return w.Write(&drivefile.Record{Time: x.Time, Truth: &drivefile.Truth{Position: x.Position, HasHeight: x.HasHeight, HeightM: x.HeightM, SigmaM: x.SigmaM}})
	})
	switch {
	case err != nil:
		return fmt.Errorf("--truth: %w", err)
	case t.Truths == 0 && t.Unusable() > 0:
		return fmt.Errorf("--truth: %s: no point can be used; %d refused, first %s", o.truth, t.Unusable(), t.FirstRefusal())
	case t.Truths == 0:
		return fmt.Errorf("--truth: %s holds no track point", o.truth)
	case t.To.Before(*log.From) || t.From.After(*log.To):
		return fmt.Errorf("--truth: %s is of %s to %s and the log of %s to %s: they have no time in common", o.truth, stampTime(*t.From), stampTime(*t.To), stampTime(*log.From), stampTime(*log.To))
	}
	o.truthTally = t
	return nil
}
