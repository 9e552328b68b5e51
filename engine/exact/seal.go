package exact

import (
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
	"slices"
)

// ErrLayout is the error of bytes of another layout: of a version of this program
// in which what they hold is made differently.
var ErrLayout = errors.New("the checkpoint is of another version of this program")

var castagnoli = crc32.MakeTable(crc32.Castagnoli)

const magicBytes, sumBytes = 4, 4

// Seal puts an envelope around a value that a Coder wrote. Little endian,
//
//	4  magic: what it is of
//	8  the layout: another one where anything in the value is made differently
//	   the value
//	4  CRC-32C of all before
func Seal(magic string, layout uint64, value []byte) []byte {
	if len(magic) != magicBytes {
		panic("exact: a magic has four bytes")
	}
	b := make([]byte, 0, magicBytes+8+len(value)+sumBytes)
	b = binary.LittleEndian.AppendUint64(append(b, magic...), layout)
	b = append(b, value...)
	return binary.LittleEndian.AppendUint32(b, crc32.Checksum(b, castagnoli))
}

// Open returns the value in an envelope, which it shares with sealed. ErrLayout is
// the error of another layout and of a magic in before, those of earlier versions;
// any other says what is wrong.
func Open(magic string, layout uint64, sealed []byte, before ...string) ([]byte, error) {
	const head = magicBytes + 8
	n := len(sealed) - sumBytes
	if n < head {
		return nil, errors.New("this is no checkpoint")
	}
	is := string(sealed[:magicBytes])
	earlier := slices.Contains(before, is)
	if is != magic && !earlier {
		return nil, errors.New("this is no checkpoint")
	}
	if sum, want := crc32.Checksum(sealed[:n], castagnoli), binary.LittleEndian.Uint32(sealed[n:]); sum != want {
		return nil, fmt.Errorf("the checkpoint is damaged: its checksum is %08x and should be %08x", sum, want)
	}
	if earlier || binary.LittleEndian.Uint64(sealed[magicBytes:]) != layout {
		return nil, ErrLayout
	}
	return sealed[head:n], nil
}
