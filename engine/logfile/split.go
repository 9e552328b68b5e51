package logfile

import (
	"bytes"
	"errors"
	"fmt"
)

// cell is one cell of a row, and the byte of the line, from 1, at which it
// begins.
type cell struct {
	text []byte
	byte int
}

var errQuote = errors.New("a quote that opens a cell is not closed in its line")

// split appends the cells of a row to dst. A cell in double quotes may hold
// the delimiter, and a quote as two (RFC 4180); it may not hold a line's end.
// Spaces around a cell do not count. delim ' ' stands for one or more spaces or
// tabs, and such a row begins with its first cell.
func split(dst []cell, line []byte, delim byte) ([]cell, error) {
	at := 0
	if delim == ' ' {
		at = skipBlanks(line, 0)
		if at == len(line) {
			return dst, nil
		}
	}
	for {
		if len(dst) == maxCells {
			return dst, fmt.Errorf("the row has over %d cells", maxCells)
		}
		start := at
		if delim != ' ' && delim != '\t' {
			start = skipBlanks(line, at)
		}
		if start < len(line) && line[start] == '"' {
			text, end, err := quoted(line, start)
			if err != nil {
				return dst, err
			}
			dst = append(dst, cell{text, start + 1})
			at = end
			if delim != '\t' {
				at = skipBlanks(line, at)
			}
			if at < len(line) && line[at] != delim && (delim != ' ' || at == end) {
				return dst, fmt.Errorf("byte %d: the delimiter should follow a quoted cell", at+1)
			}
		} else {
			for at = start; at < len(line) && line[at] != delim && (delim != ' ' || line[at] != '\t'); {
				at++
			}
			text := line[start:at]
			dst = append(dst, cell{bytes.TrimRight(bytes.TrimLeft(text, " "), " \t"), start + 1})
		}
		if delim == ' ' {
			if at = skipBlanks(line, at); at == len(line) {
				return dst, nil
			}
			continue
		}
		if at == len(line) {
			return dst, nil
		}
		at++ // past the delimiter
	}
}

func skipBlanks(line []byte, at int) int {
	for at < len(line) && (line[at] == ' ' || line[at] == '\t') {
		at++
	}
	return at
}

// quoted reads a quoted cell that begins at at and returns where it ends.
func quoted(line []byte, at int) (text []byte, end int, err error) {
	from := at + 1
	doubled := false
	for i := from; i < len(line); i++ {
		if line[i] != '"' {
			continue
		}
		if i+1 < len(line) && line[i+1] == '"' {
			doubled = true
			i++
			continue
		}
		text = line[from:i]
		if doubled {
			text = bytes.ReplaceAll(text, []byte(`""`), []byte(`"`))
		}
		return text, i + 1, nil
	}
	return nil, 0, errQuote
}
