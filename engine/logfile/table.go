package logfile

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"math"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"

	"leadline/engine/sensor"
)

// table reads the rows of one CSV log.
type table struct {
	c     *Columns
	emit  Emit
	tally *Tally
	parse timeParser

	delim   byte
	missing map[string]bool
	names   []string // the header; nil without one
	times   []int    // indices of the time's columns
	streams []*stream
	width   int // one more than the greatest index in use

	row  []cell
	line int
}

// ReadCSV reads a table and hands on its records, row by row. name is the
// log's in errors and places. The error is one of the reader, of emit, of a
// header that lacks a column, or of a log in which nothing could be used.
func ReadCSV(r io.Reader, name string, c *Columns, emit Emit) (*Tally, error) {
	t := &table{c: c, emit: emit, tally: newTally(name), delim: c.delimiter(), missing: map[string]bool{"": true}}
	parse, wrong := c.Time.compile()
	if len(wrong) > 0 {
		panic("logfile: ReadCSV of columns that were not checked")
	}
	t.parse = parse
	missing := c.Missing
	if missing == nil {
		missing = defaultMissing
	}
	for _, m := range missing {
		t.missing[m] = true
	}
	lines := NewLines(r, maxRow)
	header := c.Header == nil || *c.Header
	if !header {
		if err := t.bind(); err != nil {
			return t.tally.Sum(), err
		}
	}
	for {
		line, whole, err := lines.Next()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return t.tally.Sum(), fmt.Errorf("%s:%d: %w", name, t.line+1, err)
		}
		t.line++
		t.tally.Lines++
		if t.line == 1 {
			line = bytes.TrimPrefix(line, []byte("\ufeff"))
		}
		switch {
		case t.line <= c.SkipLines, len(bytes.TrimSpace(line)) == 0:
			continue
		case c.Comment != "" && bytes.HasPrefix(line, []byte(c.Comment)):
			continue
		case !whole && header && t.streams == nil:
			return t.tally.Sum(), fmt.Errorf("%s:%d: the header is over %d bytes: is it a table?", name, t.line, maxRow)
		case !whole:
			t.refuse(1, "a row that is too long", fmt.Sprintf("over %d bytes", maxRow))
			continue
		case header && t.streams == nil:
			if err := t.header(line); err != nil {
				return t.tally.Sum(), fmt.Errorf("%s:%d: %w", name, t.line, err)
			}
			continue
		}
		if err := t.read(line); err != nil {
			return t.tally.Sum(), err
		}
	}
	if header && t.streams == nil {
		return t.tally.Sum(), fmt.Errorf("%s: it has no header: is it empty? Without one, write header: false in the column file", name)
	}
	return t.tally.Sum(), nil
}

func (t *table) refuse(byte int, reason, detail string) {
	t.tally.refuse(place{t.line, byte}, reason, detail)
}

// header takes the names of the columns.
func (t *table) header(line []byte) error {
	row, err := split(nil, line, t.delim)
	if err != nil {
		return fmt.Errorf("the header: %w", err)
	}
	for _, c := range row {
		t.names = append(t.names, string(c.text))
	}
	return t.bind()
}

// index finds a column by its name, or its number where there is no header.
func (t *table) index(column string) (int, error) {
	if t.names == nil {
		n, err := strconv.Atoi(column)
		if err != nil || n < 1 || n > maxCells {
			return 0, fmt.Errorf("column file: %.40q is no column: without a header columns are numbered from 1", column)
		}
		t.width = max(t.width, n)
		return n - 1, nil
	}
	i := slices.Index(t.names, column)
	if i < 0 {
		var known []string
		for _, n := range t.names {
			if len(known) == 20 {
				known = append(known, "…")
				break
			}
			known = append(known, printable(n))
		}
		return 0, fmt.Errorf("the header has no column %.40q: it has %s", column, strings.Join(known, ", "))
	}
	if slices.Contains(t.names[i+1:], column) {
		return 0, fmt.Errorf("the header has two columns %.40q: name them apart", column)
	}
	t.width = max(t.width, i+1)
	return i, nil
}

// bind finds the columns of everything.
func (t *table) bind() error {
	for _, name := range t.c.Time.columns() {
		i, err := t.index(name)
		if err != nil {
			return err
		}
		t.times = append(t.times, i)
	}
	sensors := t.c.Sensors
	if t.c.Truth != nil {
		truth := *t.c.Truth
		truth.Kind = kindTruth
		sensors = append(slices.Clone(sensors), truth)
	}
	t.streams = []*stream{}
	for i := range sensors {
		s, err := t.stream(&sensors[i])
		if err != nil {
			return err
		}
		t.streams = append(t.streams, s)
	}
	return nil
}

// read takes one row apart and hands on what it holds.
func (t *table) read(line []byte) error {
	var err error
	if t.row, err = split(t.row[:0], line, t.delim); err != nil {
		t.refuse(1, "not a row", err.Error())
		return nil
	}
	if len(t.row) < t.width {
		t.refuse(1, "too few cells", fmt.Sprintf("%d cells where column %d is needed", len(t.row), t.width))
		return nil
	}
	at, ok := t.time(t.times)
	if !ok {
		return nil
	}
	for _, s := range t.streams {
		r, ok := s.take(t, at)
		if !ok {
			continue
		}
		t.tally.took(r)
		if err := t.emit(r); err != nil {
			return err
		}
	}
	return nil
}

// time reads a time from columns. A row without one is refused.
func (t *table) time(columns []int) (sensor.Time, bool) {
	text := string(t.row[columns[0]].text)
	for _, i := range columns[1:] {
		text += " " + string(t.row[i].text)
	}
	if t.c.DecimalComma && t.c.Time.Format != "layout" {
		text = strings.Replace(text, ",", ".", 1)
	}
	at, err := t.parse(text)
	if err != nil {
		t.refuse(t.row[columns[0]].byte, "time", fmt.Sprintf("%s: %v", printable(text), err))
		return 0, false
	}
	return at, true
}

// number reads a cell; missing is one that holds nothing, bad was refused.
func (t *table) number(column int, field string) (v float64, missing, bad bool) {
	c := t.row[column]
	s := string(c.text)
	if t.missing[s] {
		return 0, true, false
	}
	if t.c.DecimalComma {
		s = strings.Replace(s, ",", ".", 1)
	}
	v, err := strconv.ParseFloat(s, 64)
	if !numeric(s) || err != nil || math.IsInf(v, 0) {
		t.refuse(c.byte, "not a number: "+field, printable(string(c.text)))
		return 0, false, true
	}
	return v, false, false
}

// word reads a cell that holds a name.
func (t *table) word(column int, field string) (s string, missing, bad bool) {
	c := t.row[column]
	s = string(c.text)
	switch {
	case t.missing[s]:
		return "", true, false
	case !utf8.ValidString(s) || len(s) > maxName:
		t.refuse(c.byte, "not a name: "+field, printable(s))
		return "", false, true
	}
	return s, false, false
}
