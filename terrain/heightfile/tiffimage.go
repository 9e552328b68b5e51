package heightfile

import (
	"bytes"
	"compress/zlib"
	"encoding/binary"
	"fmt"
	"io"
	"math"

	"golang.org/x/image/tiff/lzw"
)

// layout is how a TIFF image is stored: chunks are strips or tiles.
type layout struct {
	cols, rows     int
	bits, format   int // bits a sample; 1 unsigned, 2 signed, 3 float
	compression    int
	predictor      int
	tiled          bool
	chunkW, chunkH int
	across         int // chunks side by side
	offset, length []uint64
}

// maxChunk bounds a decoded strip or tile.
const maxChunk = 1 << 28

// expansion is the most that a byte of LZW or Deflate can become. Deflate
// reaches 1032 (258 bytes in two bits). TIFF's LZW reaches 1364 between two
// clear codes: strings of 1 to 3838 bytes in 254 codes of 9 bits, 512 of 10,
// 1024 of 11 and 2048 of 12.
const expansion = 1400

// layout reads and checks everything about the image but its samples.
func (t *tiff) layout(opt Options) (*layout, error) {
	var err error
	get := func(tag uint16, def uint64) uint64 {
		v, e := t.one(tag, def)
		if err == nil {
			err = e
		}
		return v
	}
	cols, rows := get(tagWidth, 0), get(tagHeight, 0)
	bits, format := get(tagBits, 1), get(tagSampleFormat, 1)
	compression, predictor := get(tagCompression, 1), get(tagPredictor, 1)
	bands, photo, fill, sub := get(tagSamples, 1), get(tagPhotometric, 1), get(tagFillOrder, 1), get(tagSubfile, 0)
	rps := get(tagRowsPerStrip, math.MaxUint32)
	tw, th := get(tagTileWidth, 0), get(tagTileHeight, 0)
	if err != nil {
		return nil, err
	}
	hint := func(why string, args ...any) (*layout, error) {
		return nil, fmt.Errorf(why, args...)
	}
	known := map[[2]uint64]bool{{1, 8}: true, {1, 16}: true, {1, 32}: true, {2, 8}: true, {2, 16}: true, {2, 32}: true, {3, 32}: true, {3, 64}: true}
	switch {
	case cols > math.MaxInt32 || rows > math.MaxInt32:
		return hint("tags 256, 257: the image is %d × %d", cols, rows)
	case bands != 1:
		return hint("tag 277: it has %d bands: take out the one with heights, for example with gdal_translate -b 1", bands)
	case photo > 1:
		return hint("tag 262: photometric interpretation %d is a colour picture, not heights", photo)
	case fill != 1:
		return hint("tag 266: fill order %d is not supported: convert with gdal_translate", fill)
	case sub&^2 != 0:
		return hint("tag 254: the first image is an overview or a mask (%d): convert with gdal_translate", sub)
	case !known[[2]uint64{format, bits}]:
		return hint("tags 258, 339: %d-bit samples of format %d are not supported: convert with gdal_translate -ot Float32", bits, format)
	case compression != 1 && compression != 5 && compression != 8 && compression != 32946:
		return hint("tag 259: compression %d%s is not supported: convert with gdal_translate -co COMPRESS=DEFLATE", compression, compressionName(compression))
	case predictor < 1 || predictor > 3 || predictor == 3 && format != 3:
		return hint("tag 317: predictor %d is not defined for samples of format %d", predictor, format)
	}
	if err := opt.room(int64(cols), int64(rows)); err != nil {
		return nil, err
	}
	l := &layout{cols: int(cols), rows: int(rows), bits: int(bits), format: int(format), compression: int(compression), predictor: int(predictor)}
	offTag, lenTag := uint16(tagStripOffsets), uint16(tagStripBytes)
	if l.tiled = tw != 0 || th != 0; l.tiled {
		if tw == 0 || th == 0 || tw > 1<<20 || th > 1<<20 || tw*th*bits/8 > maxChunk {
			return hint("tags 322, 323: tiles of %d × %d are not supported: convert with gdal_translate", tw, th)
		}
		l.chunkW, l.chunkH = int(tw), int(th)
		offTag, lenTag = tagTileOffsets, tagTileBytes
	} else {
		if rps == 0 || cols*min(rps, rows)*bits/8 > maxChunk {
			return hint("tag 278: strips of %d rows are not supported: convert with gdal_translate -co TILED=YES", rps)
		}
		l.chunkW, l.chunkH = l.cols, int(min(rps, rows))
	}
	l.across = (l.cols + l.chunkW - 1) / l.chunkW
	n := l.across * ((l.rows + l.chunkH - 1) / l.chunkH)
	if l.offset, err = t.ints(offTag); err != nil {
		return nil, err
	}
	if l.length, err = t.ints(lenTag); err != nil {
		return nil, err
	}
	if len(l.offset) < n || len(l.length) < n {
		return hint("tags %d, %d: %d offsets and %d lengths for %d strips or tiles", offTag, lenTag, len(l.offset), len(l.length), n)
	}
	l.offset, l.length = l.offset[:n], l.length[:n]
	return l, l.plausible(t.size)
}

func compressionName(c uint64) string {
	switch c {
	case 2, 3, 4:
		return " (fax)"
	case 6, 7:
		return " (JPEG)"
	case 32773:
		return " (PackBits)"
	case 34887:
		return " (LERC)"
	case 34925:
		return " (LZMA)"
	case 50000:
		return " (ZSTD)"
	}
	return ""
}

// name is what errors call a chunk.
func (l *layout) name(i int) string {
	if l.tiled {
		return fmt.Sprintf("tile %d", i)
	}
	return fmt.Sprintf("strip %d", i)
}

// chunkRows is how many rows are stored: tiles are whole, the last strip not.
func (l *layout) chunkRows(i int) int {
	if l.tiled {
		return l.chunkH
	}
	return min(l.chunkH, l.rows-i*l.chunkH)
}

// plausible checks that every chunk lies in the file and can hold its samples,
// before room for them is made: a small file must not ask for much memory.
func (l *layout) plausible(size int64) error {
	limit := uint64(1)
	if l.compression != 1 {
		limit = expansion
	}
	empty := 0
	for i, n := range l.length {
		need := uint64(l.chunkW * l.chunkRows(i) * l.bits / 8)
		switch {
		case n == 0:
			empty++
		case l.offset[i] > uint64(size) || n > uint64(size)-l.offset[i]:
			return fmt.Errorf("%s should be %d bytes at byte %d, but the file ends at %d: is it cut short?", l.name(i), n, l.offset[i], size)
		case n < (need+limit-1)/limit:
			return fmt.Errorf("%s: %d bytes cannot hold its %d bytes of samples: the file is damaged", l.name(i), n, need)
		}
	}
	if empty == len(l.length) {
		return fmt.Errorf("none of its %d strips or tiles holds anything", empty)
	}
	return nil
}

// decode reads all samples into dst, row by row. Chunks that the file leaves
// out (length 0) stay as they are in dst.
func (t *tiff) decode(dst []float32, l *layout, isVoid func(float64) bool) (err error) {
	width := l.bits / 8
	var buf, packed []byte
	for i := range l.offset {
		x0, y0 := i%l.across*l.chunkW, i/l.across*l.chunkH
		if l.length[i] == 0 {
			continue
		}
		h, what := l.chunkRows(i), l.name(i)
		need := l.chunkW * h * width
		// Compressed data never needs much more room than plain data; what
		// follows is not read.
		n := min(l.length[i], uint64(need)+uint64(need)/2+1024)
		if l.compression == 1 {
			n = uint64(need)
		}
		if packed, err = t.bytes(l.offset[i], n, what); err != nil {
			return err
		}
		if l.compression == 1 {
			buf = packed
		} else {
			if cap(buf) < need {
				buf = make([]byte, need)
			}
			buf = buf[:need]
			if err := unpack(buf, packed, l.compression); err != nil {
				return fmt.Errorf("%s at byte %d: %s after decompression: the file is damaged", what, l.offset[i], eofText(err))
			}
		}
		for y := range h {
			row := buf[y*l.chunkW*width : (y+1)*l.chunkW*width]
			order := t.order
			switch l.predictor {
			case 2:
				undoDifference(row, width, order)
			case 3:
				row, order = undoFloat(row, width), binary.BigEndian
			}
			if y0+y >= l.rows {
				break
			}
			out := dst[(y0+y)*l.cols+x0:]
			out = out[:min(l.chunkW, l.cols-x0)]
			convert(out, row, l, order, isVoid)
		}
	}
	return nil
}

func unpack(dst, packed []byte, compression int) error {
	var r io.ReadCloser
	if compression == 5 {
		r = lzw.NewReader(bytes.NewReader(packed), lzw.MSB, 8)
	} else {
		var err error
		if r, err = zlib.NewReader(bytes.NewReader(packed)); err != nil {
			return err
		}
	}
	defer r.Close()
	n, err := io.ReadFull(r, dst)
	if err == io.ErrUnexpectedEOF || err == io.EOF {
		return fmt.Errorf("only %d of %d bytes", n, len(dst))
	}
	return err
}

// undoDifference undoes TIFF's predictor 2: each sample is stored as the
// difference from the one before it, modulo its width.
func undoDifference(row []byte, width int, order binary.ByteOrder) {
	switch width {
	case 1:
		for i := 1; i < len(row); i++ {
			row[i] += row[i-1]
		}
	case 2:
		for i := 2; i+2 <= len(row); i += 2 {
			order.PutUint16(row[i:], order.Uint16(row[i:])+order.Uint16(row[i-2:]))
		}
	case 4:
		for i := 4; i+4 <= len(row); i += 4 {
			order.PutUint32(row[i:], order.Uint32(row[i:])+order.Uint32(row[i-4:]))
		}
	case 8:
		for i := 8; i+8 <= len(row); i += 8 {
			order.PutUint64(row[i:], order.Uint64(row[i:])+order.Uint64(row[i-8:]))
		}
	}
}

// undoFloat undoes predictor 3: a row's bytes are sorted by significance, most
// significant first, and stored as differences. The result is big-endian.
//
// Source: Adobe Photoshop TIFF Technical Note 3 (2005).
func undoFloat(row []byte, width int) []byte {
	for i := 1; i < len(row); i++ {
		row[i] += row[i-1]
	}
	n := len(row) / width
	out := make([]byte, len(row))
	for i := range n {
		for b := range width {
			out[i*width+b] = row[b*n+i]
		}
	}
	return out
}

// convert turns the first len(dst) samples of a row into heights.
func convert(dst []float32, row []byte, l *layout, order binary.ByteOrder, isVoid func(float64) bool) {
	for i := range dst {
		var v float64
		switch {
		case l.format == 3 && l.bits == 32:
			v = float64(math.Float32frombits(order.Uint32(row[4*i:])))
		case l.format == 3:
			v = math.Float64frombits(order.Uint64(row[8*i:]))
		case l.format == 2 && l.bits == 8:
			v = float64(int8(row[i]))
		case l.format == 2 && l.bits == 16:
			v = float64(int16(order.Uint16(row[2*i:])))
		case l.format == 2:
			v = float64(int32(order.Uint32(row[4*i:])))
		case l.bits == 8:
			v = float64(row[i])
		case l.bits == 16:
			v = float64(order.Uint16(row[2*i:]))
		default:
			v = float64(order.Uint32(row[4*i:]))
		}
		if isVoid(v) {
			v = nan
		}
		dst[i] = float32(v)
	}
}
