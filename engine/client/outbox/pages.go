package outbox

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"hash/fnv"
	"io"
)

// bbolt believes the pages of a file, and its own check of them reads where they
// point in a goroutine of its own, where a page that points behind the file's end ends
// the program. So the pages are checked here first, from bytes read: which are
// reached, which are free, and that each is one of the two.
//
// The layout is bbolt's (its internal/common), in the machine's byte order:
//
//	page    id u64, flags u16, elements u16, pages that follow it u32
//	meta    magic, version, page size, flags u32; root, its sequence, page of the free
//	        list, pages in all, transaction u64; FNV-1a of these u64. On pages 0 and 1
//	branch  elements: key's place from here u32, its size u32, page u64
//	leaf    elements: 1 if a bucket u32, key's place from here, key's size, value's size u32
//	free    ids, u64; more than 65534 of them: 65535 elements, and the first says how many
//	bucket  a value: root u64, sequence u64; the page itself if the root is 0
type pages struct {
	r      io.ReaderAt
	size   uint64 // of a page, in bytes
	count  uint64 // of pages
	marked []bool // reached or free
}

const (
	pageHeader  = 16
	metaBytes   = 64 // its sum included
	branchFlag  = 0x01
	leafFlag    = 0x02
	freeFlag    = 0x10
	bucketFlag  = 0x01
	boltMagic   = 0xED0CDAED
	deepest     = 32 // levels: a page of the smallest size holds two keys
	manyFree    = 0xFFFF
	elementSize = 16
)

var order = binary.NativeEndian

// checkPages checks the pages of a file of a size in bytes, which no one writes to.
func checkPages(r io.ReaderAt, size int64, pageSize int) error {
	p := &pages{r: r, size: uint64(pageSize)}
	var meta []byte
	for i := range uint64(2) {
		m := make([]byte, metaBytes)
		if _, err := r.ReadAt(m, int64(i*p.size+pageHeader)); err != nil { //nolint:gosec // a few pages
			return fmt.Errorf("page %d: %w", i, cutOff(err))
		}
		sum := fnv.New64a()
		_, _ = sum.Write(m[:metaBytes-8])
		// One that is damaged would have the other one's state taken, which is one change
		// older. It fits into a sector, which is written whole, so it is no power failure's.
		if order.Uint32(m) != boltMagic || order.Uint64(m[metaBytes-8:]) != sum.Sum64() {
			return fmt.Errorf("page %d is damaged", i)
		}
		if meta == nil || order.Uint64(m[48:]) > order.Uint64(meta[48:]) {
			meta = m
		}
	}
	root, free := order.Uint64(meta[16:]), order.Uint64(meta[32:])
	p.count = order.Uint64(meta[40:])
	if p.count > uint64(size)/p.size { //nolint:gosec // a file's size is not negative
		return fmt.Errorf("it is cut off: it has %d bytes, and %d pages of %d were written", size, p.count, p.size)
	}
	p.marked = make([]bool, p.count)
	p.marked[0], p.marked[1] = true, true
	if err := p.free(free); err != nil {
		return err
	}
	if err := p.walk(root, nil, nil, 0); err != nil {
		return err
	}
	for id, marked := range p.marked {
		if !marked {
			return fmt.Errorf("page %d: nothing points to it, and it is not free", id)
		}
	}
	return nil
}

// page reads a page, with those that follow it, and marks them as reached.
func (p *pages) page(id uint64) (flags, count int, b []byte, err error) {
	if id < 2 || id >= p.count {
		return 0, 0, nil, fmt.Errorf("page %d is pointed to, of %d", id, p.count)
	}
	b = make([]byte, pageHeader)
	if _, err := p.r.ReadAt(b, int64(id*p.size)); err != nil { //nolint:gosec // below the file's size
		return 0, 0, nil, fmt.Errorf("page %d: %w", id, cutOff(err))
	}
	if own := order.Uint64(b); own != id {
		return 0, 0, nil, fmt.Errorf("page %d: it says that it is %d", id, own)
	}
	flags, count = int(order.Uint16(b[8:])), int(order.Uint16(b[10:]))
	more := uint64(order.Uint32(b[12:]))
	for n := id; n <= id+more; n++ {
		if err := p.mark(n); err != nil {
			return 0, 0, nil, err
		}
	}
	b = make([]byte, (1+more)*p.size)
	if _, err := p.r.ReadAt(b, int64(id*p.size)); err != nil { //nolint:gosec // below the file's size
		return 0, 0, nil, fmt.Errorf("page %d: %w", id, cutOff(err))
	}
	return flags, count, b, nil
}

func (p *pages) mark(id uint64) error {
	switch {
	case id < 2 || id >= p.count:
		return fmt.Errorf("page %d is pointed to, of %d", id, p.count)
	case p.marked[id]:
		return fmt.Errorf("page %d is used twice, or is free and used", id)
	}
	p.marked[id] = true
	return nil
}

// free marks the pages of the list of free ones, and its own.
func (p *pages) free(id uint64) error {
	flags, n, b, err := p.page(id)
	if err != nil {
		return err
	}
	if flags != freeFlag {
		return fmt.Errorf("page %d: it should be the list of free pages", id)
	}
	b = b[pageHeader:]
	if n == manyFree {
		n, b = int(order.Uint64(b)), b[8:] //nolint:gosec // compared below
	}
	if n < 0 || n > len(b)/8 {
		return fmt.Errorf("page %d: %d free pages are more than it holds", id, n)
	}
	for i := range n {
		if err := p.mark(order.Uint64(b[8*i:])); err != nil {
			return err
		}
	}
	return nil
}

// walk goes through the pages below one, the keys of which are at least least and, if
// there is a most, less than that.
func (p *pages) walk(id uint64, least, most []byte, depth int) error {
	flags, n, b, err := p.page(id)
	if err != nil {
		return err
	}
	if depth > deepest {
		return fmt.Errorf("page %d: more than %d pages lie over it", id, deepest)
	}
	return p.elements(id, flags, n, b, least, most, depth)
}

func (p *pages) elements(id uint64, flags, n int, b, least, most []byte, depth int) error {
	if (flags != branchFlag && flags != leafFlag) || pageHeader+n*elementSize > len(b) || (flags == branchFlag && n == 0) {
		return fmt.Errorf("page %d: %d elements of kind %#x", id, n, flags)
	}
	keys := make([][]byte, n)
	for i := range n {
		at := pageHeader + i*elementSize
		e, place, size := b[at:], 0, 4
		if flags == leafFlag {
			place, size = 4, 8
		}
		key, ok := cut(e, order.Uint32(e[place:]), order.Uint32(e[size:]))
		if !ok {
			return fmt.Errorf("page %d: element %d lies outside it", id, i)
		}
		if (i > 0 && bytes.Compare(key, keys[i-1]) <= 0) || bytes.Compare(key, least) < 0 || (most != nil && bytes.Compare(key, most) >= 0) {
			return fmt.Errorf("page %d: the key of element %d is out of order", id, i)
		}
		keys[i] = key
		if flags == branchFlag {
			continue
		}
		value, ok := cut(e, order.Uint32(e[4:])+order.Uint32(e[8:]), order.Uint32(e[12:]))
		if !ok {
			return fmt.Errorf("page %d: element %d lies outside it", id, i)
		}
		if order.Uint32(e) == bucketFlag {
			if err := p.bucket(id, value, depth+1); err != nil {
				return err
			}
		}
	}
	if flags == leafFlag {
		return nil
	}
	for i := range n {
		end := most
		if i+1 < n {
			end = keys[i+1]
		}
		if err := p.walk(order.Uint64(b[pageHeader+i*elementSize+8:]), keys[i], end, depth+1); err != nil {
			return err
		}
	}
	return nil
}

// bucket goes through the bucket of a value on a page.
func (p *pages) bucket(id uint64, value []byte, depth int) error {
	if len(value) < 16 {
		return fmt.Errorf("page %d: a bucket of %d bytes", id, len(value))
	}
	if root := order.Uint64(value); root != 0 {
		return p.walk(root, nil, nil, depth)
	}
	b := value[16:]
	if len(b) < pageHeader || depth > deepest {
		return fmt.Errorf("page %d: a bucket of %d bytes", id, len(value))
	}
	return p.elements(id, int(order.Uint16(b[8:])), int(order.Uint16(b[10:])), b, nil, nil, depth)
}

// cut gives size bytes from a place on.
func cut(b []byte, place, size uint32) ([]byte, bool) {
	end := uint64(place) + uint64(size)
	if end > uint64(len(b)) {
		return nil, false
	}
	return b[place:end], true
}

func cutOff(err error) error {
	if errors.Is(err, io.EOF) {
		return errors.New("it is cut off")
	}
	return err
}
