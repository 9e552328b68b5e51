package logfile

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/format"
)

// maxParquetBytes bounds a Parquet file, which is read whole.
const maxParquetBytes = 512 << 20

// maxParquetRows bounds its rows, of which a damaged file may claim any number.
const maxParquetRows = 50_000_000

// ParquetMagic is how a Parquet file begins.
const ParquetMagic = "PAR1"

// ReadParquet reads a Parquet file as the table that it is, by the same description
// as a CSV table; a delimiter, a header and lines to skip mean nothing in it. Places in
// errors and tallies count the header as line 1. Times that the file says are
// times are RFC 3339 in UTC, whatever their unit. Columns of lists, maps, decimals and half floats are
// left out; those of a group are named GROUP.COLUMN.
func ReadParquet(r io.Reader, name string, c *Columns, emit Emit) (*Tally, error) {
	text, err := openParquet(r, name)
	if err != nil {
		return newTally(name).Sum(), err
	}
	own := *c
	own.Delimiter, own.DecimalComma, own.Header, own.SkipLines, own.Comment = "", false, nil, 0, ""
	return ReadCSV(text, name, &own, emit)
}

// ReadParquetTrack reads positions of a Parquet file, as fixes or truths: columns time,
// lon_deg and lat_deg, those of a track that a replay wrote, or lon and lat; and if it
// has them height_m and sigma_m.
func ReadParquetTrack(r io.Reader, name string, truth bool, emit Emit) (*Tally, error) {
	text, err := openParquet(r, name)
	if err != nil {
		return newTally(name).Sum(), err
	}
	fields := map[string]Field{}
	has := func(field string, columns ...string) bool {
		for _, c := range columns {
			if slices.Contains(text.names, c) {
				fields[field] = Field{Column: c}
				return true
			}
		}
		return false
	}
	if !has("lon", "lon_deg", "lon") || !has("lat", "lat_deg", "lat") || !slices.Contains(text.names, "time") {
		return newTally(name).Sum(), fmt.Errorf("%s: a track has columns time, lon_deg and lat_deg, and this has %s: describe it with --columns", name, strings.Join(text.names, ", "))
	}
	if !has("sigma_m", "sigma_m") && !truth {
		sigma := float64(trackSigmaM)
		fields["sigma_m"] = Field{Value: &sigma}
	}
	c := &Columns{Time: TimeColumn{Column: "time", TimeFormat: TimeFormat{Format: "rfc3339"}}}
	if truth {
		has("height_m", "height_m")
		c.Truth = &SensorColumns{Fields: fields}
	} else {
		c.Sensors = []SensorColumns{{Kind: "fix", Fields: fields}}
	}
	var wrong problems
	if c.check(&wrong); len(wrong) > 0 {
		panic("logfile: " + wrong[0].Text)
	}
	return ReadCSV(text, name, c, emit)
}

// parquetText is a Parquet file as the text of a table, made as it is read.
type parquetText struct {
	name    string
	names   []string
	columns []parquetColumn // by the file's index; those that are left out have no text
	groups  []parquet.RowGroup
	rows    parquet.Rows
	buffer  [256]parquet.Row
	text    bytes.Buffer
	err     error
}

type parquetColumn struct {
	used bool
	text func(dst []byte, v parquet.Value) []byte
}

var _ io.Reader = (*parquetText)(nil)

func openParquet(r io.Reader, name string) (t *parquetText, err error) {
	data, err := io.ReadAll(io.LimitReader(r, maxParquetBytes+1))
	if err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	if len(data) > maxParquetBytes {
		return nil, fmt.Errorf("%s: it has over %d bytes: split it", name, maxParquetBytes)
	}
	t = &parquetText{name: name}
	defer t.caught(&err)
	f, err := parquet.OpenFile(bytes.NewReader(data), int64(len(data)), parquet.SkipPageIndex(true), parquet.SkipBloomFilters(true))
	if err != nil {
		return nil, t.broken(err)
	}
	if n := f.NumRows(); n < 0 || n > maxParquetRows {
		return nil, fmt.Errorf("%s: it has %d rows, and at most %d are read: split it", name, n, maxParquetRows)
	}
	schema := f.Schema()
	for _, path := range schema.Columns() {
		leaf, ok := schema.Lookup(path...)
		c := parquetColumn{used: ok && leaf.MaxRepetitionLevel == 0}
		if c.used {
			c.text = parquetCell(leaf.Node)
			c.used = c.text != nil
		}
		if c.used {
			t.names = append(t.names, strings.Join(path, "."))
		}
		t.columns = append(t.columns, c)
	}
	if len(t.names) == 0 || len(t.names) > maxCells {
		return nil, fmt.Errorf("%s: it has %d columns that could be used, and 1 to %d are read", name, len(t.names), maxCells)
	}
	t.groups = f.RowGroups()
	for i, n := range t.names {
		if i > 0 {
			t.text.WriteByte(',')
		}
		t.text.Write(asCell(nil, n))
	}
	t.text.WriteByte('\n')
	return t, nil
}

// broken words an error of the file.
func (t *parquetText) broken(err error) error {
	return fmt.Errorf("%s: it is no Parquet file that can be read: %s", t.name, strings.Join(strings.Fields(err.Error()), " "))
}

// caught turns a panic of the library over a damaged file into an error.
func (t *parquetText) caught(err *error) {
	if p := recover(); p != nil {
		*err = t.broken(fmt.Errorf("%v", p))
	}
}

// Read implements io.Reader.
func (t *parquetText) Read(p []byte) (int, error) {
	for t.text.Len() == 0 && t.err == nil {
		t.err = t.more()
	}
	if t.text.Len() == 0 {
		return 0, t.err
	}
	return t.text.Read(p)
}

// more makes text of some rows.
func (t *parquetText) more() (err error) {
	defer t.caught(&err)
	if t.rows == nil {
		if len(t.groups) == 0 {
			return io.EOF
		}
		t.rows, t.groups = t.groups[0].Rows(), t.groups[1:]
	}
	n, err := t.rows.ReadRows(t.buffer[:])
	var line []byte
	for _, row := range t.buffer[:n] {
		line = line[:0]
		first := true
		row.Range(func(i int, values []parquet.Value) bool {
			if i >= len(t.columns) || !t.columns[i].used {
				return true
			}
			if !first {
				line = append(line, ',')
			}
			first = false
			if len(values) == 1 && !values[0].IsNull() {
				line = t.columns[i].text(line, values[0])
			}
			return true
		})
		t.text.Write(append(line, '\n'))
	}
	switch {
	case errors.Is(err, io.EOF):
		err = t.rows.Close()
		t.rows = nil
	case err == nil && n == 0:
		return t.broken(io.ErrNoProgress)
	}
	if err != nil {
		return t.broken(err)
	}
	return nil
}

// parquetCell says how values of a column are written; nil for those that are left
// out.
func parquetCell(node parquet.Node) func([]byte, parquet.Value) []byte {
	if l := node.Type().LogicalType(); l != nil {
		switch l := l.Value.(type) {
		case *format.TimestampType:
			unit := l.Unit.Value.Duration()
			return func(dst []byte, v parquet.Value) []byte {
				n := v.Int64()
				at := time.Unix(0, n)
				switch unit { // without overflow
				case time.Millisecond:
					at = time.UnixMilli(n)
				case time.Microsecond:
					at = time.UnixMicro(n)
				}
				return at.UTC().AppendFormat(dst, time.RFC3339Nano)
			}
		case *format.DecimalType, *format.Float16Type, *format.UUIDType:
			return nil
		}
	}
	switch node.Type().Kind() {
	case parquet.Boolean:
		return func(dst []byte, v parquet.Value) []byte { return strconv.AppendBool(dst, v.Boolean()) }
	case parquet.Int32:
		return func(dst []byte, v parquet.Value) []byte { return strconv.AppendInt(dst, int64(v.Int32()), 10) }
	case parquet.Int64:
		return func(dst []byte, v parquet.Value) []byte { return strconv.AppendInt(dst, v.Int64(), 10) }
	case parquet.Float:
		return func(dst []byte, v parquet.Value) []byte {
			return strconv.AppendFloat(dst, float64(v.Float()), 'g', -1, 32)
		}
	case parquet.Double:
		return func(dst []byte, v parquet.Value) []byte { return strconv.AppendFloat(dst, v.Double(), 'g', -1, 64) }
	}
	return func(dst []byte, v parquet.Value) []byte { return asCell(dst, string(v.ByteArray())) }
}

// asCell is text as a cell: on one line, in quotes.
func asCell(dst []byte, s string) []byte {
	dst = append(dst, '"')
	for _, c := range []byte(s) {
		switch c {
		case '"':
			dst = append(dst, '"', '"')
		case '\n', '\r':
			dst = append(dst, ' ')
		default:
			dst = append(dst, c)
		}
	}
	return append(dst, '"')
}
