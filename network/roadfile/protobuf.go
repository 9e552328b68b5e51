package roadfile

import (
	"errors"
	"math"

	"google.golang.org/protobuf/encoding/protowire"
)

// badProtobuf turns the library's negative length into an error. It is not
// wrapped: a message may end early in a file that does not.
func badProtobuf(n int) error {
	return errors.New("not valid protobuf: " + protowire.ParseError(n).Error())
}

// field is one field of a protobuf message: bytes or a number.
type field struct {
	number protowire.Number
	bytes  []byte
	value  uint64
}

// eachField calls f with each field of a message.
func eachField(b []byte, f func(field) error) error {
	for len(b) > 0 {
		number, kind, n := protowire.ConsumeTag(b)
		if n < 0 {
			return badProtobuf(n)
		}
		b = b[n:]
		x := field{number: number}
		switch kind {
		case protowire.VarintType:
			x.value, n = protowire.ConsumeVarint(b)
		case protowire.BytesType:
			x.bytes, n = protowire.ConsumeBytes(b)
			if x.bytes == nil {
				x.bytes = []byte{}
			}
		default:
			n = protowire.ConsumeFieldValue(number, kind, b)
		}
		if n < 0 {
			return badProtobuf(n)
		}
		b = b[n:]
		if err := f(x); err != nil {
			return err
		}
	}
	return nil
}

// numbersOf appends the numbers of a packed field, or the one of a field that
// is not packed.
func numbersOf(dst []int64, f field) ([]int64, error) {
	if f.bytes == nil {
		return append(dst, int64(f.value)), nil
	}
	for b := f.bytes; len(b) > 0; {
		v, n := protowire.ConsumeVarint(b)
		if n < 0 {
			return dst, badProtobuf(n)
		}
		if v > math.MaxInt64 {
			v = math.MaxInt64
		}
		dst, b = append(dst, int64(v)), b[n:]
	}
	return dst, nil
}

// deltas appends numbers of which each is kept as the difference from the one
// before.
func deltas(dst []int64, f field) ([]int64, error) {
	var x int64
	if len(dst) > 0 {
		x = dst[len(dst)-1]
	}
	if f.bytes == nil {
		return append(dst, x+protowire.DecodeZigZag(f.value)), nil
	}
	for b := f.bytes; len(b) > 0; {
		v, n := protowire.ConsumeVarint(b)
		if n < 0 {
			return dst, badProtobuf(n)
		}
		x += protowire.DecodeZigZag(v)
		dst, b = append(dst, x), b[n:]
	}
	return dst, nil
}
