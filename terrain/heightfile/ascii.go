package heightfile

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"leadline/terrain"
)

var nan = math.NaN()

// readASCII reads an ESRI ASCII grid: a header of keywords in any case
// (ncols, nrows, xllcorner or xllcenter, yllcorner or yllcenter, cellsize or
// GDAL's dx and dy, and optionally nodata_value, -9999 unless given), then
// rows from the north. Values may be separated and wrapped by any white space.
//
// Source: Esri, "Esri ASCII raster format".
func readASCII(r io.ReaderAt, size int64, _ string, opt Options) (*raw, error) {
	t := &tokens{r: bufio.NewReaderSize(io.NewSectionReader(r, 0, size), 1<<16), line: 1}
	head := map[string]float64{"nodata_value": -9999}
	seen := map[string]bool{}
	var first string
	for {
		word, err := t.next()
		if err != nil {
			return nil, t.at("%s in the header", eofText(err))
		}
		key := strings.ToLower(strings.TrimPrefix(word, "\ufeff"))
		if key == "" {
			continue
		}
		if c := key[0]; c >= '0' && c <= '9' || c == '-' || c == '+' || c == '.' || key == "nan" {
			first = word
			break
		}
		switch key {
		case "ncols", "nrows", "xllcorner", "xllcenter", "yllcorner", "yllcenter", "cellsize", "dx", "dy", "nodata_value":
		default:
			return nil, t.at("unknown keyword %s: expected ncols, nrows, xllcorner or xllcenter, yllcorner or yllcenter, cellsize, nodata_value", quote(word))
		}
		if seen[key] {
			return nil, t.at("%s is given twice", key)
		}
		seen[key] = true
		word, err = t.next()
		if err != nil {
			return nil, t.at("%s after %s", eofText(err), key)
		}
		if head[key], err = t.number(word); err != nil {
			return nil, err
		}
	}
	one := func(a, b string) error {
		switch {
		case seen[a] && seen[b]:
			return fmt.Errorf("the header has both %s and %s: one is enough", a, b)
		case !seen[a] && !seen[b]:
			return fmt.Errorf("the header lacks %s (or %s)", a, b)
		}
		return nil
	}
	for _, p := range [][2]string{{"ncols", ""}, {"nrows", ""}, {"xllcorner", "xllcenter"}, {"yllcorner", "yllcenter"}, {"cellsize", "dx"}, {"cellsize", "dy"}} {
		if p[1] == "" {
			if !seen[p[0]] {
				return nil, fmt.Errorf("the header lacks %s", p[0])
			}
		} else if err := one(p[0], p[1]); err != nil {
			return nil, err
		}
	}
	nc, nr := head["ncols"], head["nrows"]
	if nc != math.Trunc(nc) || nr != math.Trunc(nr) || !(nc >= 0 && nc < 1e9 && nr >= 0 && nr < 1e9) {
		return nil, fmt.Errorf("the header has ncols %v and nrows %v: whole numbers are needed", nc, nr)
	}
	cols, rows := int(nc), int(nr)
	if err := opt.room(int64(cols), int64(rows)); err != nil {
		return nil, err
	}
	if int64(cols)*int64(rows) > size/2+1 { // a digit and a space each
		return nil, fmt.Errorf("the header promises %d × %d values, more than %d bytes can hold: the file is cut short or the header wrong", cols, rows, size)
	}
	dx, dy := head["dx"], head["dy"]
	if seen["cellsize"] {
		dx, dy = head["cellsize"], head["cellsize"]
	}
	if !(dx > 0 && dy > 0) {
		return nil, fmt.Errorf("the cell size is %v × %v: it must be positive", dx, dy)
	}
	x, y := head["xllcenter"], head["yllcenter"]
	if seen["xllcorner"] {
		x = head["xllcorner"] + dx/2
	}
	if seen["yllcorner"] {
		y = head["yllcorner"] + dy/2
	}
	f := &raw{values: make([]float32, cols*rows)}
	f.grid = terrain.Grid{Cols: cols, Rows: rows, FirstX: x, FirstY: y + float64(float64(rows-1)*dy), StepX: dx, StepY: -dy}
	nodata := head["nodata_value"]
	word := first
	for i := range f.values {
		if i > 0 {
			var err error
			if word, err = t.next(); err != nil {
				return nil, t.at("%s after %d of %d values", eofText(err), i, len(f.values))
			}
		}
		v, err := t.number(word)
		if err != nil {
			return nil, err
		}
		if v == nodata {
			v = nan
		}
		f.values[i] = float32(v)
	}
	if word, err := t.next(); !errors.Is(err, io.EOF) {
		if err != nil {
			return nil, t.at("%v", err)
		}
		return nil, t.at("%s after the last of %d × %d values: the header does not fit the rows", quote(word), cols, rows)
	}
	return f, nil
}

// tokens splits a stream at white space and knows the line.
type tokens struct {
	r    *bufio.Reader
	line int
	buf  []byte
}

// maxToken bounds a word; no number needs more.
const maxToken = 64

func (t *tokens) next() (string, error) {
	t.buf = t.buf[:0]
	for {
		c, err := t.r.ReadByte()
		if err == io.EOF && len(t.buf) > 0 {
			return string(t.buf), nil
		}
		if err != nil {
			return "", err
		}
		switch c {
		case ' ', '\t', '\r', '\n':
			if len(t.buf) > 0 {
				if err := t.r.UnreadByte(); err != nil {
					return "", err
				}
				return string(t.buf), nil
			}
			if c == '\n' {
				t.line++
			}
		default:
			if len(t.buf) == maxToken {
				return "", fmt.Errorf("a word longer than %d bytes", maxToken)
			}
			t.buf = append(t.buf, c)
		}
	}
}

func (t *tokens) number(word string) (float64, error) {
	v, err := strconv.ParseFloat(word, 64)
	if err != nil {
		if strings.Contains(word, ",") {
			return 0, t.at("%s is no number: decimals need a point, not a comma", quote(word))
		}
		return 0, t.at("%s is no number", quote(word))
	}
	return v, nil
}

func (t *tokens) at(format string, args ...any) error {
	return fmt.Errorf("line %d: %s", t.line, fmt.Sprintf(format, args...))
}

func quote(s string) string { return strconv.Quote(s) }

func eofText(err error) string {
	if errors.Is(err, io.EOF) {
		return "the file ends"
	}
	return err.Error()
}
