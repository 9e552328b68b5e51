package journal

import (
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
)

// Format is the version of what is on the disk: of packs and records.
const Format = 1

// A pack is one message: little endian,
//
//	4  "LLJ1"
//	8  epoch: counts the openings of the journal
//	8  number of the pack in its partition, from 1
//	8  number of the first pack that is kept
//	8  number of the last line that has begun
//	4  number of records
//	   records: 1 kind, 1 parts, 8 line, 8 number, 4 length, bytes
//	4  CRC-32C of all before
//
// A record that is longer than a part may be follows in several, one after the
// other; parts has bit 0 set in the first and bit 1 in the last.
type pack struct {
	epoch, number, first, lines uint64
	records                     []part
}

// part is a record, or a part of one.
type part struct {
	kind, parts  byte
	line, number uint64
	data         []byte
}

const (
	magic      = "LLJ1"
	headBytes  = 4 + 4*8 + 4
	partBytes  = 1 + 1 + 8 + 8 + 4
	tailBytes  = 4
	firstPart  = 1
	lastPart   = 2
	maxPart    = 128 << 10
	maxPack    = 512 << 10
	maxMessage = maxPack + maxPart + headBytes + tailBytes
)

var castagnoli = crc32.MakeTable(crc32.Castagnoli)

// appendTo writes a pack.
func (p *pack) appendTo(dst []byte) []byte {
	le := binary.LittleEndian
	from := len(dst)
	dst = append(dst, magic...)
	for _, v := range [...]uint64{p.epoch, p.number, p.first, p.lines} {
		dst = le.AppendUint64(dst, v)
	}
	dst = le.AppendUint32(dst, uint32(len(p.records)))
	for i := range p.records {
		r := &p.records[i]
		dst = append(dst, r.kind, r.parts)
		dst = le.AppendUint64(dst, r.line)
		dst = le.AppendUint64(dst, r.number)
		dst = le.AppendUint32(dst, uint32(len(r.data)))
		dst = append(dst, r.data...)
	}
	return le.AppendUint32(dst, crc32.Checksum(dst[from:], castagnoli))
}

// errOther is of a pack whose format is another version's.
var errOther = errors.New("it is of another version's format")

// read takes a pack apart; its records share the bytes.
func (p *pack) read(b []byte) error {
	le := binary.LittleEndian
	if len(b) < headBytes+tailBytes {
		return fmt.Errorf("it has %d bytes, and no pack has less than %d", len(b), headBytes+tailBytes)
	}
	body, sum := b[:len(b)-tailBytes], le.Uint32(b[len(b)-tailBytes:])
	if got := crc32.Checksum(body, castagnoli); got != sum {
		return fmt.Errorf("its checksum is %08x and should be %08x", got, sum)
	}
	if string(b[:4]) != magic {
		return fmt.Errorf("%w: %q in place of %q", errOther, b[:4], magic)
	}
	p.epoch, p.number, p.first, p.lines = le.Uint64(b[4:]), le.Uint64(b[12:]), le.Uint64(b[20:]), le.Uint64(b[28:])
	n := int(le.Uint32(b[36:]))
	rest := body[headBytes:]
	if n > len(rest)/partBytes {
		return fmt.Errorf("it says that it has %d records, and has no room for them", n)
	}
	p.records = make([]part, n)
	for i := range p.records {
		if len(rest) < partBytes {
			return fmt.Errorf("record %d of %d is cut off", i+1, n)
		}
		r := &p.records[i]
		r.kind, r.parts, r.line, r.number = rest[0], rest[1], le.Uint64(rest[2:]), le.Uint64(rest[10:])
		size := int(le.Uint32(rest[18:]))
		if rest = rest[partBytes:]; size > len(rest) {
			return fmt.Errorf("record %d of %d is cut off", i+1, n)
		}
		r.data, rest = rest[:size:size], rest[size:]
	}
	if len(rest) > 0 {
		return fmt.Errorf("%d bytes follow its last record", len(rest))
	}
	return nil
}
