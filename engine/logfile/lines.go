package logfile

import (
	"bufio"
	"bytes"
	"errors"
	"io"
)

// Lines takes a stream apart into lines of bounded length and goes on after
// one that is longer.
type Lines struct {
	r    *bufio.Reader
	most int
	buf  []byte
}

// NewLines reads lines of at most most bytes, their ends not counted.
func NewLines(r io.Reader, most int) *Lines {
	return &Lines{r: bufio.NewReader(r), most: most}
}

// Next returns the next line without its end, \n or \r\n, valid until the next
// call. Of a line that is too long it returns the beginning and whole false.
// The last line need not end. The error is that of the stream, io.EOF at its
// end, and comes without a line.
func (l *Lines) Next() (line []byte, whole bool, err error) {
	l.buf = l.buf[:0]
	whole = true
	any := false
	for {
		part, err := l.r.ReadSlice('\n')
		any = any || len(part) > 0
		if room := l.most + len("\r\n") - len(l.buf); len(part) > room {
			whole = false
			part = part[:max(room, 0)]
		}
		l.buf = append(l.buf, part...)
		switch {
		case errors.Is(err, bufio.ErrBufferFull):
			continue
		case err != nil && !any:
			return nil, true, err
		case err != nil && !errors.Is(err, io.EOF):
			return nil, true, err // the stream broke within a line
		}
		line = bytes.TrimSuffix(bytes.TrimSuffix(l.buf, []byte("\n")), []byte("\r"))
		if len(line) > l.most {
			line, whole = line[:l.most], false
		}
		return line, whole, nil
	}
}
