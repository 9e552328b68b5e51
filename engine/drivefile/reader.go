package drivefile

import (
	"bufio"
	"bytes"
	"errors"
	"fmt"
	"io"
	"regexp"
	"strings"

	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"

	"leadline/engine/sensor"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Error is what is wrong with a drive file, and where.
type Error struct {
	File string
	Line int
	Err  error
}

// Error returns FILE:LINE: what is wrong.
func (e *Error) Error() string { return fmt.Sprintf("%s:%d: %v", e.File, e.Line, e.Err) }

// Unwrap returns what is wrong, without the place.
func (e *Error) Unwrap() error { return e.Err }

// Reader reads a drive file line by line and holds one line at a time.
type Reader struct {
	name   string
	r      *bufio.Reader
	buf    []byte // a line longer than r's own buffer
	line   int
	header *Header
	truths bool  // pass over measurements
	err    error // sticky
	quick  quick
}

// NewReader reads from r; errors call it name.
func NewReader(r io.Reader, name string) *Reader {
	return &Reader{name: name, r: bufio.NewReader(r)}
}

// TruthsAlone has measurements passed over from here on, unread and unchecked:
// some twenty times as fast. One whose line has an escape or says truth
// somewhere is still given.
func (r *Reader) TruthsAlone() { r.truths = true }

// Read returns the next record, io.EOF after the last one, and otherwise an
// *Error, after which it returns the same again. A file without a header is
// an error, an empty one too.
func (r *Reader) Read() (*Record, error) {
	if r.err != nil {
		return nil, r.err
	}
	rec, err := r.read()
	if err != nil {
		if !errors.Is(err, io.EOF) {
			err = &Error{r.name, max(r.line, 1), err}
		}
		r.err = err
		return nil, err
	}
	return rec, nil
}

func (r *Reader) read() (*Record, error) {
	for {
		line, err := r.next()
		if errors.Is(err, io.EOF) && len(line) == 0 {
			if r.header == nil {
				return nil, errors.New("no header: the file is empty; begin it with a line {\"time\":…,\"header\":{…}}")
			}
			return nil, io.EOF
		}
		if err != nil && !errors.Is(err, io.EOF) {
			return nil, err
		}
		if len(bytes.TrimSpace(line)) == 0 {
			continue
		}
		if r.truths && r.header != nil && !bytes.Contains(line, []byte("truth")) && bytes.IndexByte(line, '\\') < 0 {
			continue
		}
		m := &leadlinev1.DriveRecord{}
		if r.quick.read(line, m) {
			return r.record(m)
		}
		proto.Reset(m)
		if bad := protojson.Unmarshal(line, m); bad != nil {
			bad = plain(bad)
			if errors.Is(err, io.EOF) {
				bad = fmt.Errorf("%w (the file's last line does not end: is the file cut off?)", bad)
			}
			return nil, bad
		}
		return r.record(m)
	}
}

// next returns the next line without its end, valid until the next call;
// io.EOF beside a line means that it did not end.
func (r *Reader) next() ([]byte, error) {
	r.buf = r.buf[:0]
	for {
		part, err := r.r.ReadSlice('\n')
		if len(r.buf) == 0 && len(part) > 0 {
			r.line++
		}
		if len(r.buf)+len(part) > MaxLine+len("\r\n") {
			return nil, fmt.Errorf("the line is over %d bytes: a drive file has one record a line", MaxLine)
		}
		if errors.Is(err, bufio.ErrBufferFull) {
			r.buf = append(r.buf, part...)
			continue
		}
		if len(r.buf) > 0 {
			r.buf = append(r.buf, part...)
			part = r.buf
		}
		return bytes.TrimRight(part, "\r\n"), err
	}
}

// record converts a line's message and checks its place in the file.
func (r *Reader) record(m *leadlinev1.DriveRecord) (*Record, error) {
	rec := &Record{Line: r.line, Message: m}
	var err error
	if rec.Time, err = wire.Time(m.GetTime()); err != nil {
		return nil, fmt.Errorf("time: %w", err)
	}
	_, measured := m.GetRecord().(*leadlinev1.DriveRecord_Measurement)
	_, headed := m.GetRecord().(*leadlinev1.DriveRecord_Header)
	switch {
	case m.GetRecord() == nil:
		return nil, errors.New("no record: set exactly one of header, measurement and truth beside the time")
	case !measured && (m.GetSensor() != "" || m.Number != nil):
		return nil, errors.New("sensor and number belong beside a measurement: remove them")
	case headed && r.header != nil:
		return nil, errors.New("a second header: begin another file for another drive")
	case !headed && r.header == nil:
		return nil, errors.New("no header before this line: begin the file with {\"time\":…,\"header\":{…}}")
	}
	switch k := m.GetRecord().(type) {
	case *leadlinev1.DriveRecord_Header:
		h, err := wire.ToHeader(k.Header)
		if err != nil {
			return nil, fmt.Errorf("header: %w", err)
		}
		r.header, rec.Header = &h, &h
	case *leadlinev1.DriveRecord_Truth:
		t, err := wire.ToTruth(k.Truth)
		if err != nil {
			return nil, fmt.Errorf("truth: %w", err)
		}
		rec.Truth = &t
	case *leadlinev1.DriveRecord_Measurement:
		if m.Number == nil {
			m.Number = proto.Uint64(uint64(r.line))
		}
		ev, err := wire.ToEvent(&leadlinev1.SensorMeasurement{
			Time: m.GetTime(), Sensor: m.GetSensor(), Number: m.GetNumber(), Measurement: k.Measurement,
		})
		if err != nil {
			return nil, err
		}
		m.Sensor = ev.Sensor
		rec.Event = &ev
	}
	return rec, nil
}

// position matches the beginning of protojson's errors, whose spacing is
// varied on purpose.
var position = regexp.MustCompile(`^proto:[\s\x{a0}]*(syntax error[\s\x{a0}]*)?\(line \d+:(\d+)\):[\s\x{a0}]*`)

// plain puts an error of protojson into our words: what, at which column.
func plain(err error) error {
	s := err.Error()
	if strings.HasSuffix(s, "unexpected EOF") { // of the line, which is all that protojson sees
		return errors.New("the line ends within a record")
	}
	if m := position.FindStringSubmatch(s); m != nil {
		said := s[len(m[0]):]
		return fmt.Errorf("column %s: %s%s", m[2], said, advice(said))
	}
	s = strings.TrimLeft(strings.TrimPrefix(s, "proto:"), " \u00a0")
	return errors.New(strings.Replace(s, "syntax error ", "", 1))
}

// advice is what to do about an error of protojson.
func advice(said string) string {
	switch {
	case strings.HasPrefix(said, "unknown field"):
		return ": docs/drives.md names those of a record, and under Measurement kinds those of each kind"
	case strings.HasPrefix(said, "invalid google.protobuf.Timestamp"):
		return ": give a time of RFC 3339, such as 2030-05-01T12:00:00.5Z"
	case strings.HasPrefix(said, "error parsing"): // of a oneof
		return ": give one of header, measurement and truth, and one kind"
	case strings.HasPrefix(said, "invalid value for"):
		return ""
	}
	return ": a drive file has one record in JSON a line"
}

// MaxRecords is the most that ReadAll keeps: a day at 100 Hz with truth at
// 10 Hz, about 2 GB.
const MaxRecords = 10_000_000

// ReadAll reads a whole drive: its header with its time, its measurements and its
// truths in the order of the file. Beside an error it returns what came before.
func ReadAll(rd io.Reader, name string) (*Drive, error) {
	r := NewReader(rd, name)
	d := &Drive{}
	for {
		rec, err := r.Read()
		if err == nil && len(d.Events)+len(d.Truths) == MaxRecords {
			err = &Error{name, rec.Line, fmt.Errorf("more than %d records: split the drive", MaxRecords)}
		}
		switch {
		case errors.Is(err, io.EOF):
			return d, nil
		case err != nil:
			return d, err
		case rec.Header != nil:
			d.Header, d.Time = *rec.Header, rec.Time
		case rec.Event != nil:
			d.Events = append(d.Events, *rec.Event)
		case rec.Truth != nil:
			d.Truths = append(d.Truths, TimedTruth{rec.Time, *rec.Truth})
		}
	}
}

// Drive is a whole drive.
type Drive struct {
	Header Header
	Time   sensor.Time // of the header: when the drive began
	Events []sensor.Event
	Truths []TimedTruth
}

// TimedTruth is where a vehicle was at a time.
type TimedTruth struct {
	Time sensor.Time
	Truth
}
