package roadfile

import (
	"bufio"
	"bytes"
	"compress/bzip2"
	"compress/gzip"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"leadline/network"
)

// Read reads a road map from a GeoJSON file or an OpenStreetMap extract, XML
// or PBF, and compiles it. Which it is shows in the first bytes; gzip and
// bzip2 are unpacked on the way. The error says where in the file what is
// wrong and what to do.
func Read(path string, opt Options) (*network.Map, Notes, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, Notes{}, err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return nil, Notes{}, err
	}
	if info.IsDir() {
		return nil, Notes{}, fmt.Errorf("%s is a directory, want a road map file", path)
	}
	if max := opt.withDefaults().MaxBytes; info.Size() > max {
		return nil, Notes{}, fmt.Errorf("%s has %d bytes, more than the %d that are read: cut the region or raise the bound", path, info.Size(), max)
	}
	if opt.Map.Source == "" {
		opt.Map.Source = filepath.Base(path)
	}
	m, notes, err := ReadFrom(f, opt)
	if err != nil {
		return nil, notes, fmt.Errorf("%s: %w", path, err)
	}
	return m, notes, nil
}

// ReadFrom is Read for an open file or text in memory, which it reads from the
// start.
func ReadFrom(r io.ReadSeeker, opt Options) (*network.Map, Notes, error) {
	if err := opt.Validate(); err != nil {
		return nil, Notes{}, err
	}
	c := &collector{opt: opt.withDefaults()}
	if err := c.read(r); err != nil {
		return nil, c.notes, err
	}
	c.byPlace = nil
	g, err := c.graph()
	if err != nil {
		return nil, c.notes, err
	}
	o := c.opt.Map
	if o.Licence == "" {
		o.Licence = c.licence
	}
	if o.Note == "" {
		o.Note = c.opt.describe(c.notes)
	}
	m, err := network.New(g, o)
	return m, c.notes, err
}

// unpackRatio bounds what a compressed file may unpack to, as a multiple of
// Options.MaxBytes.
const unpackRatio = 16

func (c *collector) read(r io.ReadSeeker) error {
	if _, err := r.Seek(0, io.SeekStart); err != nil {
		return err
	}
	b := bufio.NewReaderSize(io.LimitReader(r, c.opt.MaxBytes), 1<<16)
	head, err := b.Peek(16)
	if len(head) == 0 {
		if err == nil || errors.Is(err, io.EOF) {
			return errors.New("the file is empty")
		}
		return err
	}
	if bytes.HasPrefix(head, []byte("BZh")) || bytes.HasPrefix(head, []byte{0x1f, 0x8b}) {
		var unpacked io.Reader
		if head[0] == 'B' {
			unpacked = bzip2.NewReader(b)
		} else if unpacked, err = gzip.NewReader(b); err != nil {
			return fmt.Errorf("not valid gzip: %w", err)
		}
		b = bufio.NewReaderSize(&bounded{unpacked, c.opt.MaxBytes * unpackRatio}, 1<<16)
		if head, err = b.Peek(16); len(head) == 0 {
			return fmt.Errorf("nothing could be unpacked: %w", err)
		}
	} else if isPBF(head) {
		return c.readPBF(r)
	}
	switch first := firstByte(b); first {
	case '{', '[':
		return c.readGeoJSON(b)
	case '<':
		return c.readOSMXML(b)
	case 0:
		return errors.New("the file begins with nothing but white space")
	default:
		return fmt.Errorf("the file begins with %q: neither GeoJSON, nor OpenStreetMap XML, nor PBF", head)
	}
}

// firstByte skips white space and a byte order mark, and peeks; 0 means that
// nothing else is there.
func firstByte(b *bufio.Reader) byte {
	for skip := 0; ; {
		head, _ := b.Peek(skip + 3)
		rest := head[min(skip, len(head)):]
		switch {
		case len(rest) == 0 || skip > 4000: // of the reader's 65536 bytes
			return 0
		case skip == 0 && bytes.Equal(rest, []byte("\ufeff")):
			skip = 3
		case bytes.IndexByte([]byte(" \n\r\t"), rest[0]) >= 0:
			skip++
		default:
			if _, err := b.Discard(skip); err != nil {
				return 0
			}
			return rest[0]
		}
	}
}

// bounded fails when more than left bytes are read.
type bounded struct {
	r    io.Reader
	left int64
}

func (b *bounded) Read(p []byte) (int, error) {
	n, err := b.r.Read(p)
	if b.left -= int64(n); b.left < 0 {
		return 0, errors.New("the file unpacks to more than is read: cut the region or raise the bound")
	}
	return n, err
}

// describe records how the roads were read.
func (o *Options) describe(n Notes) string {
	s := fmt.Sprintf("join ends within %g m; split crossings: %t; classes: %q; private roads: %t. %s",
		o.JoinM, o.SplitCrossings, o.Classes, !o.SkipPrivate, n)
	return s
}
