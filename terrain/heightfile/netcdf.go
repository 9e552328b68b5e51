package heightfile

import (
	"bufio"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"
	"strings"
)

// netCDF is the header of a netCDF classic file, CDF-1 or CDF-2 (64-bit
// offset).
//
// Source: Unidata, "NetCDF Classic Format Specification".
type netCDF struct {
	r       io.ReaderAt
	size    int64
	records int64
	recSize int64 // bytes of one record of all record variables
	dims    []ncDim
	atts    []ncAtt
	vars    []ncVar
}

type ncDim struct {
	name   string
	length int64 // 0 is the record dimension
}

type ncAtt struct {
	name string
	text string
	nums []float64
}

type ncVar struct {
	name  string
	dims  []int
	atts  []ncAtt
	kind  int
	begin int64
}

// External types.
const (
	ncByte = 1 + iota
	ncChar
	ncShort
	ncInt
	ncFloat
	ncDouble
)

var ncSizes = [...]int64{ncByte: 1, ncChar: 1, ncShort: 2, ncInt: 4, ncFloat: 4, ncDouble: 8}

// Bounds on what a header may hold; files in use stay far below.
const (
	maxNCList = 1 << 13 // dimensions, variables, or attributes of one
	maxNCName = 1 << 12
	maxNCAtt  = 1 << 20 // bytes of one attribute
)

// ncHeader is a cursor with a sticky error.
type ncHeader struct {
	r   *bufio.Reader
	at  int64
	err error
}

func (h *ncHeader) fail(format string, args ...any) {
	if h.err == nil {
		h.err = fmt.Errorf("header at byte %d: %s", h.at, fmt.Sprintf(format, args...))
	}
}

func (h *ncHeader) bytes(n int64) []byte {
	if h.err != nil {
		return make([]byte, n)
	}
	buf := make([]byte, n)
	if _, err := io.ReadFull(h.r, buf); err != nil {
		if errors.Is(err, io.EOF) || errors.Is(err, io.ErrUnexpectedEOF) {
			err = errors.New("the file ends: is it cut short?")
		}
		h.fail("%v", err)
	}
	h.at += n
	return buf
}

func (h *ncHeader) int() int64 {
	v := int64(int32(binary.BigEndian.Uint32(h.bytes(4))))
	if v < 0 {
		h.fail("a negative count or offset (%d)", v)
		return 0
	}
	return v
}

func (h *ncHeader) name() string {
	n := h.int()
	if n > maxNCName {
		h.fail("a name of %d bytes, over the limit of %d", n, maxNCName)
		return ""
	}
	return string(h.bytes((n + 3) &^ 3)[:n])
}

// list reads a list's tag and length.
func (h *ncHeader) list(tag int64, what string) int64 {
	got, n := h.int(), h.int()
	switch {
	case h.err != nil || got == 0 && n == 0:
		return 0
	case got != tag:
		h.fail("tag %d where the list of %s (%d) should be", got, what, tag)
	case n > maxNCList:
		h.fail("%d %s, over the limit of %d", n, what, maxNCList)
	default:
		return n
	}
	return 0
}

func (h *ncHeader) attributes() (atts []ncAtt) {
	for n := h.list(12, "attributes"); n > 0 && h.err == nil; n-- {
		a := ncAtt{name: h.name()}
		kind, count := h.int(), h.int()
		if kind < ncByte || kind > ncDouble {
			h.fail("attribute %s has unknown type %d", quote(a.name), kind)
			return atts
		}
		if count > maxNCAtt/ncSizes[kind] {
			h.fail("attribute %s has %d values, over the limit of %d bytes", quote(a.name), count, maxNCAtt)
			return atts
		}
		buf := h.bytes((count*ncSizes[kind] + 3) &^ 3)[:count*ncSizes[kind]]
		if kind == ncChar {
			a.text = strings.TrimRight(string(buf), "\x00")
		} else {
			a.nums = make([]float64, count)
			ncNumbers(a.nums, buf, int(kind))
		}
		atts = append(atts, a)
	}
	return atts
}

func openNetCDF(r io.ReaderAt, size int64) (*netCDF, error) {
	f := &netCDF{r: r, size: size}
	h := &ncHeader{r: bufio.NewReader(io.NewSectionReader(r, 0, size))}
	version := h.bytes(4)[3]
	if version == 5 {
		return nil, errors.New("it is a netCDF CDF-5 file, which is not supported: convert it with nccopy -k 64-bit-offset")
	}
	if rec := binary.BigEndian.Uint32(h.bytes(4)); rec == math.MaxUint32 {
		return nil, errors.New("it was left open while written (no record count): copy it with nccopy")
	} else {
		f.records = int64(rec)
	}
	for n := h.list(10, "dimensions"); n > 0 && h.err == nil; n-- {
		f.dims = append(f.dims, ncDim{h.name(), h.int()})
	}
	f.atts = h.attributes()
	recVars, lastRec := 0, int64(0)
	for n := h.list(11, "variables"); n > 0 && h.err == nil; n-- {
		v := ncVar{name: h.name()}
		rank := h.int()
		if rank > 64 {
			h.fail("variable %s has %d dimensions, over the limit of 64", quote(v.name), rank)
			break
		}
		for range rank {
			d := h.int()
			if d >= int64(len(f.dims)) {
				h.fail("variable %s has no dimension %d", quote(v.name), d)
				break
			}
			v.dims = append(v.dims, int(d))
		}
		v.atts = h.attributes()
		v.kind = int(h.int())
		h.bytes(4) // vsize: redundant, and wrong where it would not fit
		if version == 2 {
			v.begin = int64(binary.BigEndian.Uint64(h.bytes(8)))
		} else {
			v.begin = h.int()
		}
		if v.kind < ncByte || v.kind > ncDouble {
			h.fail("variable %s has unknown type %d", quote(v.name), v.kind)
		}
		if h.err != nil {
			break
		}
		if len(v.dims) > 0 && f.dims[v.dims[0]].length == 0 {
			one := ncSizes[v.kind]
			for _, d := range v.dims[1:] {
				if one *= max(1, f.dims[d].length); one > 1<<40 {
					h.fail("variable %s is larger than any file", quote(v.name))
					break
				}
			}
			recVars, lastRec = recVars+1, one
			f.recSize += (one + 3) &^ 3
		}
		f.vars = append(f.vars, v)
	}
	if recVars == 1 { // a single record variable is not padded
		f.recSize = lastRec
	}
	return f, h.err
}

// length of a dimension in samples.
func (f *netCDF) length(dim int) int64 {
	if f.dims[dim].length == 0 {
		return f.records
	}
	return f.dims[dim].length
}

// read fills dst with consecutive numbers from a byte offset.
func (f *netCDF) read(dst []float64, at int64, kind int, buf []byte) error {
	buf = buf[:int64(len(dst))*ncSizes[kind]]
	if at < 0 || at > f.size-int64(len(buf)) {
		return fmt.Errorf("%d bytes at byte %d are wanted, but the file ends at %d: is it cut short?", len(buf), at, f.size)
	}
	if _, err := f.r.ReadAt(buf, at); err != nil && err != io.EOF {
		return err
	}
	ncNumbers(dst, buf, kind)
	return nil
}

// ncNumbers decodes big-endian numbers.
func ncNumbers(dst []float64, buf []byte, kind int) {
	be := binary.BigEndian
	for i := range dst {
		switch kind {
		case ncByte:
			dst[i] = float64(int8(buf[i]))
		case ncShort:
			dst[i] = float64(int16(be.Uint16(buf[2*i:])))
		case ncInt:
			dst[i] = float64(int32(be.Uint32(buf[4*i:])))
		case ncFloat:
			dst[i] = float64(math.Float32frombits(be.Uint32(buf[4*i:])))
		case ncDouble:
			dst[i] = math.Float64frombits(be.Uint64(buf[8*i:]))
		}
	}
}

func attText(atts []ncAtt, name string) string {
	for _, a := range atts {
		if strings.EqualFold(a.name, name) {
			return strings.TrimSpace(a.text)
		}
	}
	return ""
}

func attNums(atts []ncAtt, name string) []float64 {
	for _, a := range atts {
		if a.name == name {
			return a.nums
		}
	}
	return nil
}
