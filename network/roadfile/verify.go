package roadfile

import (
	"encoding/binary"
	"fmt"
)

// The container's library trusts the lengths in a file's FlatBuffers tables
// and reserves memory by them, so a single flipped bit could ask for terabytes.
// verify walks the tables first, with the slots of Arrow's File.fbs,
// Schema.fbs and Message.fbs, and makes sure that every vector fits into the
// table's own bytes, that only the types of our columns occur, and that no
// buffer is compressed. Like the library it panics on what does not fit; Decode
// turns that into an error.
func verify(file []byte) {
	const tail = 10 // length of the footer, and the magic
	if len(file) < 8+tail {
		panic("the file is too short")
	}
	end := len(file) - tail
	size := int(binary.LittleEndian.Uint32(file[end:]))
	if size > end-8 {
		panic("the footer is longer than the file")
	}
	footer := flatTable(file[end-size : end])
	schema, ok := footer.table(1)
	if !ok {
		panic("there is no schema")
	}
	fields := 0
	schema.verifyFields(1, 0, &fields)
	schema.verifyWords(2)
	schema.vector(3, 8)
	footer.verifyWords(4)
	for _, slot := range [2]int{2, 3} { // dictionaries, record batches
		at, n := footer.vector(slot, 24)
		for i := range n {
			b := footer.b[at+24*i:]
			offset := binary.LittleEndian.Uint64(b)
			length := binary.LittleEndian.Uint32(b[8:])
			if offset > uint64(len(file)) || uint64(length) > uint64(len(file))-offset || length < 8 {
				panic("a block lies outside the file")
			}
			verifyMessage(file[offset:offset+uint64(length)], slot == 2)
		}
	}
}

// verifyMessage checks the table before a block's buffers.
func verifyMessage(b []byte, dictionary bool) {
	if binary.LittleEndian.Uint32(b) != 0xffffffff {
		panic("a block does not begin with a message")
	}
	message := flatTable(b[8 : 8+binary.LittleEndian.Uint32(b[4:])])
	message.verifyWords(4)
	batch, ok := message.table(2)
	if ok && dictionary {
		batch, ok = batch.table(1)
	}
	if !ok {
		panic("a block holds no batch")
	}
	batch.vector(1, 16)
	batch.vector(2, 16)
	batch.vector(4, 8)
	if _, compressed := batch.table(3); compressed {
		panic("the buffers are compressed")
	}
}

// flat is a table of a FlatBuffers buffer b, at byte pos.
type flat struct {
	b   []byte
	pos int
}

func flatTable(b []byte) flat { return flat{b, int(binary.LittleEndian.Uint32(b))} }

// slot returns where the n-th field of a table is, 0 if it is absent.
func (f flat) slot(n int) int {
	vtable := f.pos - int(int32(binary.LittleEndian.Uint32(f.b[f.pos:])))
	if 4+2*n+2 > int(binary.LittleEndian.Uint16(f.b[vtable:])) {
		return 0
	}
	if o := int(binary.LittleEndian.Uint16(f.b[vtable+4+2*n:])); o != 0 {
		return f.pos + o
	}
	return 0
}

func (f flat) follow(at int) int { return at + int(binary.LittleEndian.Uint32(f.b[at:])) }

func (f flat) table(n int) (flat, bool) {
	at := f.slot(n)
	if at == 0 {
		return flat{}, false
	}
	return flat{f.b, f.follow(at)}, true
}

// vector returns where a vector begins and how many entries it has, which all
// lie within the buffer.
func (f flat) vector(n, entry int) (at, length int) {
	if at = f.slot(n); at == 0 {
		return 0, 0
	}
	at = f.follow(at)
	length = int(binary.LittleEndian.Uint32(f.b[at:]))
	if at += 4; length > (len(f.b)-at)/entry {
		panic(fmt.Sprintf("a list of %d entries does not fit into its table", length))
	}
	return at, length
}

// verifyWords checks a vector of pairs of strings.
func (f flat) verifyWords(n int) {
	at, length := f.vector(n, 4)
	for i := range length {
		pair := flat{f.b, f.follow(at + 4*i)}
		pair.vector(0, 1)
		pair.vector(1, 1)
	}
}

// Types of our columns, by their number in Schema.fbs.
const (
	fbInt    = 2
	fbFloat  = 3
	fbText   = 5
	fbList   = 12
	fbStruct = 13
)

// verifyFields checks a vector of fields and their children.
func (f flat) verifyFields(n, depth int, count *int) {
	at, length := f.vector(n, 4)
	// Our columns nest three deep and are a few dozen, children included.
	if *count += length; *count > 1000 || depth > 4 {
		panic("there are too many columns")
	}
	for i := range length {
		field := flat{f.b, f.follow(at + 4*i)}
		field.vector(0, 1)
		field.verifyWords(6)
		if t := field.slot(2); t != 0 {
			switch field.b[t] {
			case fbInt, fbFloat, fbText, fbList, fbStruct:
			default:
				panic(fmt.Sprintf("a column has type %d, which no road map has", field.b[t]))
			}
		}
		field.verifyFields(5, depth+1, count)
	}
}
