package heightfile

import (
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"strings"
)

// Tags of TIFF 6.0, GeoTIFF 1.1 and, from 42112 on, GDAL's documented own.
const (
	tagSubfile      = 254
	tagWidth        = 256
	tagHeight       = 257
	tagBits         = 258
	tagCompression  = 259
	tagPhotometric  = 262
	tagFillOrder    = 266
	tagDescription  = 270
	tagStripOffsets = 273
	tagSamples      = 277
	tagRowsPerStrip = 278
	tagStripBytes   = 279
	tagPlanar       = 284
	tagSoftware     = 305
	tagPredictor    = 317
	tagTileWidth    = 322
	tagTileHeight   = 323
	tagTileOffsets  = 324
	tagTileBytes    = 325
	tagSampleFormat = 339
	tagCopyright    = 33432
	tagPixelScale   = 33550
	tagTiepoint     = 33922
	tagTransform    = 34264
	tagGeoKeys      = 34735
	tagGeoDoubles   = 34736
	tagGeoASCII     = 34737
	tagMetadata     = 42112
	tagNodata       = 42113
)

// tiff is the first image directory of a TIFF or BigTIFF file.
type tiff struct {
	r     io.ReaderAt
	size  int64
	order binary.ByteOrder
	tags  map[uint16]tiffTag
}

type tiffTag struct {
	kind   uint16
	count  uint64
	inline [8]byte // the value if it fits, else its offset
	inRoom int     // bytes that fit
}

var tiffSizes = [...]int{1: 1, 2: 1, 3: 2, 4: 4, 5: 8, 6: 1, 7: 1, 8: 2, 9: 4, 10: 8, 11: 4, 12: 8, 13: 4, 16: 8, 17: 8, 18: 8}

// maxTagBytes bounds what is read for one tag: the offsets of MaxSamples/64
// chunks, far more than any file has.
const maxTagBytes = 64 << 20

// maxTags bounds a directory; files in use have some thirty.
const maxTags = 1 << 12

func openTIFF(r io.ReaderAt, size int64) (*tiff, error) {
	var head [16]byte
	if _, err := r.ReadAt(head[:min(size, 16)], 0); err != nil && err != io.EOF {
		return nil, err
	}
	t := &tiff{r: r, size: size, order: binary.LittleEndian, tags: map[uint16]tiffTag{}}
	if head[0] == 'M' {
		t.order = binary.BigEndian
	}
	big := t.order.Uint16(head[2:]) == 43
	at, countLen, entryLen, room := uint64(t.order.Uint32(head[4:])), 2, 12, 4
	if big {
		if t.order.Uint16(head[4:]) != 8 {
			return nil, fmt.Errorf("it is a BigTIFF with offsets of %d bytes; only 8 are defined", t.order.Uint16(head[4:]))
		}
		at, countLen, entryLen, room = t.order.Uint64(head[8:]), 8, 20, 8
	}
	buf, err := t.bytes(at, uint64(countLen), "the number of tags")
	if err != nil {
		return nil, err
	}
	n := uint64(t.order.Uint16(buf))
	if big {
		n = t.order.Uint64(buf)
	}
	if n > maxTags {
		return nil, fmt.Errorf("the directory at byte %d has %d tags, over the limit of %d", at, n, maxTags)
	}
	buf, err = t.bytes(at+uint64(countLen), n*uint64(entryLen), "the directory of tags")
	if err != nil {
		return nil, err
	}
	for ; len(buf) > 0; buf = buf[entryLen:] {
		e := tiffTag{kind: t.order.Uint16(buf[2:]), count: uint64(t.order.Uint32(buf[4:])), inRoom: room}
		if big {
			e.count = t.order.Uint64(buf[4:])
		}
		copy(e.inline[:], buf[entryLen-room:entryLen])
		t.tags[t.order.Uint16(buf)] = e
	}
	return t, nil
}

// bytes reads n bytes at an offset, or says what is missing.
func (t *tiff) bytes(at, n uint64, what string) ([]byte, error) {
	if at > uint64(t.size) || n > uint64(t.size)-at {
		return nil, fmt.Errorf("%s should be %d bytes at byte %d, but the file ends at %d: is it cut short?", what, n, at, t.size)
	}
	buf := make([]byte, n)
	if _, err := t.r.ReadAt(buf, int64(at)); err != nil && err != io.EOF {
		return nil, fmt.Errorf("%s at byte %d: %w", what, at, err)
	}
	return buf, nil
}

// value returns the raw bytes of a tag; nil if there is none.
func (t *tiff) value(tag uint16) ([]byte, tiffTag, error) {
	e, ok := t.tags[tag]
	if !ok {
		return nil, e, nil
	}
	width := 0
	if int(e.kind) < len(tiffSizes) {
		width = tiffSizes[e.kind]
	}
	if width == 0 {
		return nil, e, fmt.Errorf("tag %d has unknown type %d", tag, e.kind)
	}
	if e.count > maxTagBytes/uint64(width) {
		return nil, e, fmt.Errorf("tag %d has %d values, over the limit of %d bytes", tag, e.count, maxTagBytes)
	}
	n := e.count * uint64(width)
	if n <= uint64(e.inRoom) {
		return e.inline[:n], e, nil
	}
	at := uint64(t.order.Uint32(e.inline[:]))
	if e.inRoom == 8 {
		at = t.order.Uint64(e.inline[:])
	}
	buf, err := t.bytes(at, n, fmt.Sprintf("tag %d", tag))
	return buf, e, err
}

// ints returns the values of an unsigned integer tag; nil if there is none.
func (t *tiff) ints(tag uint16) ([]uint64, error) {
	buf, e, err := t.value(tag)
	if buf == nil || err != nil {
		return nil, err
	}
	out := make([]uint64, e.count)
	for i := range out {
		switch e.kind {
		case 1:
			out[i] = uint64(buf[i])
		case 3:
			out[i] = uint64(t.order.Uint16(buf[2*i:]))
		case 4, 13:
			out[i] = uint64(t.order.Uint32(buf[4*i:]))
		case 16, 18:
			out[i] = t.order.Uint64(buf[8*i:])
		default:
			return nil, fmt.Errorf("tag %d has type %d, not an unsigned integer", tag, e.kind)
		}
	}
	return out, nil
}

// one returns a single unsigned integer, def if there is none. Several equal
// ones (a value for each band) count as one.
func (t *tiff) one(tag uint16, def uint64) (uint64, error) {
	v, err := t.ints(tag)
	if err != nil || len(v) == 0 {
		return def, err
	}
	for _, x := range v {
		if x != v[0] {
			return 0, fmt.Errorf("tag %d has different values %d and %d", tag, v[0], x)
		}
	}
	return v[0], nil
}

// floats returns the values of a tag of doubles; nil if there is none.
func (t *tiff) floats(tag uint16) ([]float64, error) {
	buf, e, err := t.value(tag)
	if buf == nil || err != nil {
		return nil, err
	}
	if e.kind != 12 {
		return nil, fmt.Errorf("tag %d has type %d, not double", tag, e.kind)
	}
	out := make([]float64, e.count)
	for i := range out {
		out[i] = math.Float64frombits(t.order.Uint64(buf[8*i:]))
	}
	return out, nil
}

// text returns an ASCII tag without the closing NUL; "" if there is none.
func (t *tiff) text(tag uint16) (string, error) {
	buf, e, err := t.value(tag)
	if buf == nil || err != nil {
		return "", err
	}
	if e.kind != 2 {
		return "", fmt.Errorf("tag %d has type %d, not text", tag, e.kind)
	}
	return strings.TrimRight(string(buf), "\x00"), nil
}
