package main

import (
	"bufio"
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"leadline/engine/drivefile"
	"leadline/engine/logfile"
	"leadline/engine/sensor"
)

type importOptions struct {
	headerOptions
	sentenceOptions
	out, columns, date string
	truth              string
	truthTally         *logfile.Tally // of --truth
	maxRefused         float64
	asJSON             bool
}

func importCommand() *cobra.Command {
	var o importOptions
	c := &cobra.Command{
		Use:   "import LOG -o DRIVE" + drivefile.Suffix + " --vehicle NAME",
		Short: "Make a drive file of a log: a table (CSV or Parquet), NMEA 0183 sentences, a GPX, IGC or Parquet track",
		Long: `Import makes a drive file of a log of your own. A table (CSV) needs a column
file that says what its columns are; NMEA 0183 sentences are known, and so are
the tracks of GPX, IGC and Parquet files, whose points are fixes. What cannot be used is
counted, located and left out. With --truth another track says where the vehicle
was.`,
		Args: cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error { return o.run(c, args[0]) },
	}
	f := c.Flags()
	f.StringVarP(&o.out, "output", "o", "", "the drive file, NAME"+drivefile.Suffix)
	must(c.MarkFlagRequired("output"))
	o.headerOptions.flags(c)
	f.StringVar(&o.mapName, "map", "", "name of the map that the drive is for")
	f.StringVar(&o.suite, "suite", "", "name of the suite that the drive is for")
	f.StringVar(&o.columns, "columns", "", "CSV, Parquet: file (YAML) that says what the columns are")
	o.sentenceOptions.flags(c)
	f.StringVar(&o.date, "date", "", "NMEA: day of the first sentence, as 2030-05-01, where none says it or a receiver says it wrong")
	f.StringVar(&o.truth, "truth", "", "GPX, IGC or Parquet file whose points are truths, to compare with")
	f.Float64Var(&o.maxRefused, "max-refused", 10, "give up if more than this percentage cannot be used")
	f.BoolVar(&o.asJSON, "json", false, "print the summary as JSON")
	return c
}

// imported is the summary of an import.
type imported struct {
	Drive string `json:"drive"`
	*logfile.Tally
	Truth *logfile.Tally `json:"truth_log,omitempty"`
}

func (o *importOptions) run(c *cobra.Command, path string) error {
	if !(o.maxRefused >= 0 && o.maxRefused <= 100) {
		return fmt.Errorf("--max-refused is %v: give a percentage, 0 to 100", o.maxRefused)
	}
	if err := needSuffix(o.out, drivefile.Suffix); err != nil {
		return err
	}
	header, err := o.header()
	if err != nil {
		return err
	}
	if err := exists(path); err != nil {
		return err
	}
	read, err := o.reader(path)
	if err != nil {
		return err
	}
	f, err := os.Open(path)
	if err != nil {
		return err
	}
	defer f.Close()
	in, end := watch(c.ErrOrStderr(), f, filepath.Base(path))
	var tally *logfile.Tally
	var bad error // of the log, which is not the drive file's fault
	err = writeFile(o.out, func(w io.Writer) error {
		buffered := bufio.NewWriterSize(w, 1<<16)
		drive := drivefile.NewWriter(buffered)
		tally, bad = importLog(in, drive, header, read)
		if bad == nil {
			bad = o.judge(path, tally)
		}
		if bad == nil && o.truth != "" {
			bad = o.addTruth(drive, tally)
		}
		return errors.Join(bad, buffered.Flush())
	})
	end()
	if bad != nil {
		return bad
	}
	if err != nil {
		return err
	}
	if o.asJSON {
		return printJSON(c.OutOrStdout(), imported{o.out, tally, o.truthTally})
	}
	return o.print(c.OutOrStdout(), tally)
}

// readLog reads a log and hands on its records.
type readLog func(r io.Reader, emit logfile.Emit) (*logfile.Tally, error)

// reader finds out what kind of log it is.
func (o *importOptions) reader(path string) (readLog, error) {
	sentences, err := o.sentences()
	if err != nil {
		return nil, err
	}
	if o.date != "" {
		sentences.Time.Date = o.date
		if err := sentences.Validate(); err != nil {
			return nil, fmt.Errorf("--date: %w", err)
		}
	}
	flag := o.given()
	if o.date != "" {
		flag = "--date"
	}
	if o.columns != "" {
		if flag != "" {
			return nil, fmt.Errorf("--columns is for tables and %s for NMEA sentences: give one of them", flag)
		}
		text, err := readYAML("--columns", o.columns)
		if err != nil {
			return nil, err
		}
		columns, err := logfile.ParseColumns(o.columns, text)
		if err != nil {
			return nil, err
		}
		return func(r io.Reader, emit logfile.Emit) (*logfile.Tally, error) {
			b := bufio.NewReaderSize(r, 1<<16)
			if head, _ := b.Peek(len(logfile.ParquetMagic)); string(head) == logfile.ParquetMagic {
				return logfile.ReadParquet(b, path, columns, emit)
			}
			return logfile.ReadCSV(b, path, columns, emit)
		}, nil
	}
	return func(r io.Reader, emit logfile.Emit) (*logfile.Tally, error) {
		b := bufio.NewReaderSize(r, 1<<16)
		head, err := b.Peek(1 << 16)
		if err != nil && !errors.Is(err, io.EOF) {
			return nil, err
		}
		if len(bytes.TrimSpace(head)) == 0 {
			return nil, fmt.Errorf("%s is empty: nothing was logged", path)
		}
		if read := trackReader(head); read != nil {
			if flag != "" {
				return nil, fmt.Errorf("%s is for NMEA sentences, and %s is a track: leave it out", flag, path)
			}
			return read(b, path, false, emit)
		}
		if !bytes.ContainsAny(head, "$!") {
			return nil, fmt.Errorf("%s holds no NMEA sentence where it begins: say with --columns what the columns of a table are", path)
		}
		return logfile.ReadNMEA(b, path, sentences, emit)
	}, nil
}

// importLog writes what a log holds. The header gets the time of the first
// record.
func importLog(r io.Reader, w *drivefile.Writer, header drivefile.Header, read readLog) (*logfile.Tally, error) {
	n := 0
	return read(r, func(rec logfile.Record) error {
		out := &drivefile.Record{}
		if t := rec.Truth; t != nil {
			out.Time = t.Time
			out.Truth = &drivefile.Truth{Position: t.Position, HasHeight: t.HasHeight, HeightM: t.HeightM, SigmaM: t.SigmaM}
		} else {
			out.Time, out.Event = rec.Event.Time, rec.Event
		}
		if n == 0 {
			begins := out.Time
			if out.Event != nil {
				if since, ok := sensor.Since(out.Event.Measurement); ok {
					begins = since
				}
			}
			if err := w.Write(&drivefile.Record{Time: begins, Header: &header}); err != nil {
				return err
			}
		}
		if n++; n > drivefile.MaxRecords {
			return fmt.Errorf("the log holds over %d records: split it", drivefile.MaxRecords)
		}
		return w.Write(out)
	})
}

// judge refuses a log of which too little could be used.
func (o *importOptions) judge(path string, t *logfile.Tally) error {
	used, refused := t.Usable(), t.Unusable()
	switch share := 100 * float64(refused) / float64(max(1, used+t.Truths+refused)); {
	case used == 0 && refused > 0:
		return fmt.Errorf("%s: no measurement can be used; %d refused, first %s", path, refused, t.FirstRefusal())
	case used == 0:
		return fmt.Errorf("%s: it holds no measurement in %d lines%s", path, t.Lines, passedOver(t, ", passed over: "))
	case share > o.maxRefused:
		return fmt.Errorf("%s: %d of %d are refused, first %s; with --max-refused %.0f this is no error", path, refused, used+t.Truths+refused, t.FirstRefusal(), share+0.5)
	}
	return nil
}

// passedOver lists what was passed over, at most ten of it.
func passedOver(t *logfile.Tally, before string) string {
	names := t.Passed()
	if len(names) == 0 {
		return ""
	}
	var all []string
	for i, name := range names {
		if i == 10 {
			all = append(all, fmt.Sprintf("and %d more", len(names)-10))
			break
		}
		all = append(all, fmt.Sprintf("%s %d", name, t.PassedOver[name]))
	}
	return before + strings.Join(all, ", ")
}

func (o *importOptions) print(w io.Writer, t *logfile.Tally) error {
	fmt.Fprintf(w, "%s: %d measurements and %d truths from %d lines of %s\n", o.out, t.Usable(), t.Truths, t.Lines, t.Log)
	printTally(w, t)
	if o.truthTally != nil {
		fmt.Fprintf(w, "%d truths from %d lines of %s\n", o.truthTally.Truths, o.truthTally.Lines, o.truthTally.Log)
		printTally(w, o.truthTally)
	}
	next := programName() + " replay " + shellWord(o.out)
	if o.mapName == "" {
		next += " --map MAP"
	}
	_, err := fmt.Fprintf(w, "next: %s\n", next)
	return err
}

// stampTime is a time as people read it.
func stampTime(at time.Time) string { return at.Format("2006-01-02T15:04:05.999Z") }

// printTally prints what became of a log.
func printTally(w io.Writer, t *logfile.Tally) {
	if t.From != nil {
		fmt.Fprintf(w, "  %-14s %s to %s, %v\n", "time", stampTime(*t.From), stampTime(*t.To), t.To.Sub(*t.From).Round(time.Millisecond))
	}
	for _, c := range t.Measurements {
		fmt.Fprintf(w, "  %-14s %-18s %8d, %s to %s\n", c.Sensor, c.Kind, c.Count, stampTime(c.From), stampTime(c.To))
	}
	if text := passedOver(t, ""); text != "" {
		fmt.Fprintf(w, "  %-14s %s\n", "passed over", text)
	}
	for _, r := range t.Refused {
		fmt.Fprintf(w, "  %-14s %s: %d, first %s\n", "refused", r.Reason, r.Count, r.First[0])
	}
}

// watch shows how much of a file is read.
func watch(errs io.Writer, f *os.File, task string) (io.Reader, func()) {
	show, end := progress(errs, task)
	info, err := f.Stat()
	if show == nil || err != nil || !info.Mode().IsRegular() {
		return f, end
	}
	return &watched{Reader: f, show: show, size: int(info.Size())}, end
}

type watched struct {
	io.Reader
	show       func(done, total int)
	done, size int
}

// Read implements io.Reader.
func (w *watched) Read(b []byte) (int, error) {
	n, err := w.Reader.Read(b)
	w.done += n
	w.show(w.done, w.size)
	return n, err
}
