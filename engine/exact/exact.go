package exact

import (
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"reflect"
)

// Coder writes values or reads them. Use Writer or Reader.
type Coder struct {
	reading bool
	b       []byte // what is written, or is left to be read
	err     error
	words   map[string]string // strings that were read, one copy of each
	kinds   map[reflect.Type][]reflect.Type
	coded   map[reflect.Type]bool // whether a type describes itself
}

// Coded is a type that describes itself: Code goes through its fields with c.
type Coded interface{ Code(c *Coder) }

// Writer returns a coder that writes.
func Writer() *Coder { return &Coder{} }

// Reader returns a coder that reads b, and keeps it.
func Reader(b []byte) *Coder {
	return &Coder{reading: true, b: b, words: map[string]string{}}
}

// Reading reports whether the coder reads.
func (c *Coder) Reading() bool { return c.reading }

// Bytes returns what has been written.
func (c *Coder) Bytes() []byte { return c.b }

// Err returns the first error of a coder that reads; what it read is then not to
// be used.
func (c *Coder) Err() error { return c.err }

// Done is Err, and an error if something is left over.
func (c *Coder) Done() error {
	if c.err == nil && len(c.b) > 0 {
		c.Fail(fmt.Errorf("%d bytes are left over", len(c.b)))
	}
	return c.err
}

// Fail makes reading end with an error, unless it has one.
func (c *Coder) Fail(err error) {
	if c.err == nil {
		c.err = err
	}
}

// errShort is the error of bytes that end too early.
var errShort = errors.New("the bytes end too early")

// take takes n bytes; nil after an error.
func (c *Coder) take(n int) []byte {
	if c.err != nil {
		return nil
	}
	if n > len(c.b) {
		c.err = errShort
		return nil
	}
	b := c.b[:n]
	c.b = c.b[n:]
	return b
}

// Uint codes a whole number of at least 0.
func (c *Coder) Uint(v *uint64) {
	if !c.reading {
		c.b = binary.AppendUvarint(c.b, *v)
		return
	}
	if c.err != nil {
		return
	}
	x, n := binary.Uvarint(c.b)
	if n <= 0 {
		c.err = errShort
		return
	}
	*v, c.b = x, c.b[n:]
}

// Int codes a whole number.
func (c *Coder) Int(v *int64) {
	u := uint64(*v)<<1 ^ uint64(*v>>63)
	c.Uint(&u)
	*v = int64(u>>1) ^ -int64(u&1)
}

// Bool codes a truth value.
func (c *Coder) Bool(v *bool) {
	if !c.reading {
		b := byte(0)
		if *v {
			b = 1
		}
		c.b = append(c.b, b)
		return
	}
	if b := c.take(1); b != nil {
		if b[0] > 1 {
			c.Fail(fmt.Errorf("%d is no truth value", b[0]))
		}
		*v = b[0] == 1
	}
}

// Float codes a number.
func (c *Coder) Float(v *float64) {
	if !c.reading {
		c.b = binary.LittleEndian.AppendUint64(c.b, math.Float64bits(*v))
	} else if b := c.take(8); b != nil {
		*v = math.Float64frombits(binary.LittleEndian.Uint64(b))
	}
}

// Text codes a string.
func (c *Coder) Text(v *string) {
	n := c.Len(len(*v), 1)
	if !c.reading {
		c.b = append(c.b, *v...)
		return
	}
	b := c.take(n)
	s, ok := c.words[string(b)]
	if !ok {
		s = string(b)
		c.words[s] = s
	}
	*v = s
}

// Raw codes bytes.
func (c *Coder) Raw(v *[]byte) {
	n := c.Len(len(*v), 1)
	if !c.reading {
		c.b = append(c.b, *v...)
		return
	}
	*v = append([]byte(nil), c.take(n)...)
}

// Len codes a number of elements, each of which takes at least so many bytes.
func (c *Coder) Len(n, bytes int) int {
	u := uint64(n)
	c.Uint(&u)
	if c.reading && c.err == nil && u > uint64(len(c.b)/max(bytes, 1)) {
		c.err = errShort
	}
	if c.err != nil {
		return 0
	}
	return int(u)
}

// Slice codes a slice, each element, which takes at least so many bytes, by a
// function.
func Slice[T any](c *Coder, s *[]T, bytes int, each func(*T)) {
	some := *s != nil
	c.Bool(&some)
	if !some {
		if c.reading {
			*s = nil
		}
		return
	}
	n := c.Len(len(*s), bytes)
	if c.reading {
		*s = make([]T, n)
	}
	for i := range *s {
		if c.err != nil {
			return
		}
		each(&(*s)[i])
	}
}
