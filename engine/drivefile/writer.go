package drivefile

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"strconv"
	"time"

	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"

	"leadline/engine/sensor"
	"leadline/engine/wire"
)

// Writer writes a drive file. The same records give the same bytes.
type Writer struct {
	w      io.Writer
	buf    bytes.Buffer
	headed bool
}

// NewWriter writes to w, one call of Write a line; give it a buffer.
func NewWriter(w io.Writer) *Writer { return &Writer{w: w} }

// Write writes one record; the first must be the header, and no other. What
// Reader gives is written so that reading it gives the same again, bit for
// bit. Errors are those of the writer below, of a record that is no line of a
// drive file, and of one that would be longer than MaxLine.
func (w *Writer) Write(rec *Record) error {
	w.buf.Reset()
	w.buf.WriteString(`{"time":"`)
	w.buf.WriteString(time.Unix(0, int64(rec.Time)).UTC().Format(time.RFC3339Nano))
	w.buf.WriteByte('"')
	var err error
	switch {
	case (rec.Header != nil) == w.headed:
		return errors.New("drivefile: write the header first, and only once")
	case rec.Header != nil:
		err = w.field("header", wire.FromHeader(*rec.Header))
	case rec.Event != nil && rec.Truth == nil && rec.Event.Time == rec.Time:
		var name []byte
		if name, err = json.Marshal(rec.Event.Sensor); err == nil {
			w.buf.WriteString(`,"sensor":`)
			w.buf.Write(name)
			w.buf.WriteString(`,"number":`)
			w.buf.Write(strconv.AppendUint(nil, rec.Event.Number, 10))
			err = w.field("measurement", wire.FromMeasurement(rec.Event.Measurement))
		}
	case rec.Truth != nil && rec.Event == nil:
		err = w.field("truth", wire.FromTruth(*rec.Truth))
	default:
		err = errors.New("set exactly one of Header, Event and Truth, and an event's time as the record's")
	}
	if err != nil {
		return fmt.Errorf("drivefile: %w", err)
	}
	w.buf.WriteByte('}')
	if w.buf.Len() > MaxLine {
		return fmt.Errorf("drivefile: the record takes %d bytes: at most %d", w.buf.Len(), MaxLine)
	}
	w.buf.WriteByte('\n')
	if _, err := w.w.Write(w.buf.Bytes()); err != nil {
		return err
	}
	w.headed = true
	return nil
}

// field appends a message. The spacing of protojson is varied on purpose, so
// it is taken out.
func (w *Writer) field(name string, m proto.Message) error {
	b, err := protojson.MarshalOptions{UseProtoNames: true}.Marshal(m)
	if err != nil {
		return err
	}
	w.buf.WriteString(`,"` + name + `":`)
	return json.Compact(&w.buf, b)
}

// WriteEvent writes a measurement.
func (w *Writer) WriteEvent(ev sensor.Event) error {
	return w.Write(&Record{Time: ev.Time, Event: &ev})
}
