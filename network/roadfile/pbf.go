package roadfile

import (
	"bytes"
	"compress/zlib"
	"encoding/binary"
	"errors"
	"fmt"
	"io"

	"github.com/paulmach/osm"
	"google.golang.org/protobuf/encoding/protowire"
)

// OpenStreetMap's PBF is blocks of protobuf, each after its length and a
// header (fileformat.proto, osmformat.proto in the OpenStreetMap wiki). The
// decoder of package osmpbf indexes strings and coordinates by what the file
// says and panics, in goroutines of its own where nobody can catch it, on files
// that say something else; so the few messages that roads need are decoded
// here, into that module's types.

// Bounds of the format: a header must be below 64 KiB, a block, packed or not,
// below 32 MiB.
const (
	maxPBFHeader = 64 << 10
	maxPBFBlock  = 32 << 20
)

// isPBF recognises the first block's header: its length, then field 1, the
// type "OSMHeader".
func isPBF(head []byte) bool {
	return len(head) >= 15 && head[0] == 0 && head[1] == 0 && string(head[4:15]) == "\n\tOSMHeader"
}

// readPBF reads the file twice: ways and relations first, then those nodes
// that the ways need, as nodes come first in such files and are many.
func (c *collector) readPBF(r io.ReadSeeker) error {
	c.notes.Format = "OpenStreetMap PBF"
	o := &osmReader{collector: c, places: map[osm.NodeID][2]float64{}}
	pass := func(b *pbfBlock) error {
		if _, err := r.Seek(0, io.SeekStart); err != nil {
			return err
		}
		return eachBlock(io.LimitReader(r, c.opt.MaxBytes), b.decode)
	}
	err := pass(&pbfBlock{
		way:      o.way,
		relation: o.relation,
	})
	if err != nil {
		return err
	}
	needed := map[osm.NodeID]struct{}{}
	for i := range o.ways {
		for _, n := range o.ways[i].nodes {
			needed[n] = struct{}{}
		}
	}
	err = pass(&pbfBlock{node: func(id osm.NodeID, lon, lat float64) error {
		if _, ok := needed[id]; !ok {
			return nil
		}
		return o.place(id, lon, lat)
	}})
	if err != nil {
		return err
	}
	return o.finish()
}

// eachBlock calls f with the content of each data block. Errors say at which
// byte the block begins.
func eachBlock(r io.Reader, f func([]byte) error) error {
	count := &counter{r: r}
	var packed []byte
	var unpacked bytes.Buffer
	for {
		at := count.n
		err := func() error {
			var size [4]byte
			if _, err := io.ReadFull(count, size[:]); err != nil {
				return err // io.EOF here is the end of the file
			}
			n := binary.BigEndian.Uint32(size[:])
			if n > maxPBFHeader {
				return fmt.Errorf("a block header of %d bytes, more than the format's %d", n, maxPBFHeader)
			}
			header, err := readExactly(count, packed[:0], int(n))
			if err != nil {
				return err
			}
			kind, length, err := blobHeader(header)
			if err != nil {
				return err
			}
			if packed, err = readExactly(count, header[:0], length); err != nil {
				return err
			}
			content, err := unpackBlob(packed, &unpacked)
			if err != nil {
				return err
			}
			switch kind {
			case "OSMHeader":
				return checkFeatures(content)
			case "OSMData":
				return f(content)
			}
			return nil // other kinds are to be skipped, says the format
		}()
		switch {
		case errors.Is(err, io.EOF) && !errors.Is(err, io.ErrUnexpectedEOF):
			return nil
		case errors.Is(err, io.ErrUnexpectedEOF):
			return fmt.Errorf("block at byte %d: the file ends in the middle of it: it is truncated", at)
		case err != nil:
			return fmt.Errorf("block at byte %d: %w", at, err)
		}
	}
}

func readExactly(r io.Reader, b []byte, n int) ([]byte, error) {
	if cap(b) < n {
		b = make([]byte, n)
	}
	b = b[:n]
	_, err := io.ReadFull(r, b)
	if err == io.EOF && n > 0 {
		err = io.ErrUnexpectedEOF
	}
	return b, err
}

func blobHeader(b []byte) (kind string, length int, err error) {
	err = eachField(b, func(f field) error {
		switch f.number {
		case 1:
			kind = string(f.bytes)
		case 3:
			if f.value > maxPBFBlock {
				return fmt.Errorf("a block of %d bytes, more than the format's %d", f.value, maxPBFBlock)
			}
			length = int(f.value)
		}
		return nil
	})
	return kind, length, err
}

// unpackBlob returns the content, which is valid until the next call with the
// same buffer.
func unpackBlob(b []byte, buffer *bytes.Buffer) ([]byte, error) {
	var raw, packed []byte
	other := protowire.Number(0)
	err := eachField(b, func(f field) error {
		switch f.number {
		case 1:
			raw = f.bytes
		case 2: // size of the content, which the content itself tells
		case 3:
			packed = f.bytes
		default:
			other = f.number
		}
		return nil
	})
	switch {
	case err != nil:
		return nil, err
	case raw != nil:
		return raw, nil
	case packed == nil && other != 0:
		return nil, fmt.Errorf("it is packed by method %d; zlib and none are read: convert the file", other)
	case packed == nil:
		return nil, nil
	}
	z, err := zlib.NewReader(bytes.NewReader(packed))
	if err != nil {
		return nil, fmt.Errorf("unpacking it: %w", err)
	}
	buffer.Reset()
	n, err := buffer.ReadFrom(io.LimitReader(z, maxPBFBlock+1))
	if err != nil {
		return nil, errors.New("unpacking it: " + err.Error()) // not wrapped: its "unexpected EOF" is not the file's
	}
	if n > maxPBFBlock {
		return nil, fmt.Errorf("it unpacks to more than the format's %d bytes", maxPBFBlock)
	}
	return buffer.Bytes(), nil
}

// checkFeatures refuses files that need more of a reader than this one knows.
func checkFeatures(b []byte) error {
	return eachField(b, func(f field) error {
		if f.number == 4 && string(f.bytes) != "OsmSchema-V0.6" && string(f.bytes) != "DenseNodes" {
			return fmt.Errorf("the file needs a reader with %.50q, which this one has not: convert the file", f.bytes)
		}
		return nil
	})
}
