package heightfile

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"hash/crc32"
	"io"
	"math"
	"os"
	"strconv"
	"strings"
	"sync"
	"unsafe"

	"leadline/terrain"
)

// Open opens a compiled map where it lies: its heights are the file's own
// pages, mapped into memory and shared by all processes that open it. Where
// the system cannot map files they are read.
//
// Open checks everything before it returns, header and heights, against the
// file's checksums (CRC-32C, about 4 GB a second once the pages are in memory:
// 3 ms for 2401 × 1201 samples); damage is ErrDamaged and names the strip. The raster must not be
// used after Close. Replace a map by renaming a new file over it, as Write
// does, never by changing it in place.
func Open(path string) (*terrain.Raster, io.Closer, error) {
	fail := func(err error) (*terrain.Raster, io.Closer, error) {
		return nil, nil, fmt.Errorf("opening the height map %s: %w", path, err)
	}
	f, err := os.Open(path)
	if err != nil {
		return fail(err)
	}
	defer f.Close()
	st, err := f.Stat()
	if err != nil {
		return fail(err)
	}
	if !st.Mode().IsRegular() {
		return fail(fmt.Errorf("not a regular file"))
	}
	if st.Size() < 16 || st.Size() > math.MaxUint32 {
		return fail(fmt.Errorf("%d bytes are no compiled height map: make one with `leadline map heights`", st.Size()))
	}
	data, closer, err := mapFile(f, int(st.Size()))
	if err != nil {
		return fail(err)
	}
	r, err := attach(data)
	if err != nil {
		closer.Close()
		return fail(err)
	}
	return r, closer, nil
}

// attach makes a raster of the bytes of a compiled map, which stay in use.
func attach(data []byte) (*terrain.Raster, error) {
	if !bytes.HasPrefix(data, []byte("II*\x00")) {
		return nil, fmt.Errorf("it is no compiled height map: make one with `leadline map heights`")
	}
	t, err := openTIFF(bytes.NewReader(data), int64(len(data)))
	if err != nil {
		return nil, err
	}
	items, err := t.items()
	if err != nil {
		return nil, err
	}
	switch v := items.name(itemFormat); v {
	case formatName:
	case "":
		return nil, fmt.Errorf("it is a TIFF, but no compiled height map: make one with `leadline map heights`")
	default:
		return nil, fmt.Errorf("it is a compiled map of format %s, this program takes %s: compile it again", quote(v), quote(formatName))
	}
	l, err := t.layout(Options{})
	if err != nil {
		return nil, err
	}
	if l.bits != 32 || l.format != 3 || l.compression != 1 || l.predictor != 1 || l.tiled || l.offset[0]%4 != 0 {
		return nil, fmt.Errorf("its samples were stored anew by another program: compile it again")
	}
	if l.offset[0] > uint64(len(data)) || uint64(len(data))-l.offset[0] < 4*uint64(l.cols)*uint64(l.rows) {
		return nil, fmt.Errorf("%w: its strips reach beyond its end", ErrDamaged)
	}
	per := uint64(l.chunkH * l.cols * 4)
	for i, o := range l.offset {
		if o != l.offset[0]+uint64(i)*per {
			return nil, fmt.Errorf("its strips were moved by another program: compile it again")
		}
	}
	if err := checkSums(data, l, items); err != nil {
		return nil, err
	}
	return restore(t, l, items, data)
}

// checkSums verifies header and strips.
func checkSums(data []byte, l *layout, items metaItems) error {
	head := bytes.Clone(data[:l.offset[0]])
	at, err := headerCRCPlace(head)
	if err != nil {
		return err
	}
	copy(head[at:], zeroCRC)
	if got, want := fmt.Sprintf("%08x", crc32.Checksum(head, castagnoli)), items.name(itemHeaderCRC); got != want {
		return fmt.Errorf("%w or was changed after it was compiled: its header has checksum %s, not %s; compile it again", ErrDamaged, got, quote(want))
	}
	sums := strings.Fields(items.name(itemStripCRC))
	if len(sums) != len(l.offset) {
		return fmt.Errorf("%w: it has %d checksums for %d strips; compile it again", ErrDamaged, len(sums), len(l.offset))
	}
	at = int(l.offset[0])
	for i, want := range sums {
		row, n := i*l.chunkH, l.chunkRows(i)*l.cols*4
		if got := fmt.Sprintf("%08x", crc32.Checksum(data[at:at+n], castagnoli)); got != want {
			return fmt.Errorf("%w: strip %d at byte %d (rows %d to %d) has checksum %s, not %s; compile it again",
				ErrDamaged, i, at, row, row+l.chunkRows(i)-1, got, quote(want))
		}
		at += n
	}
	return nil
}

func restore(t *tiff, l *layout, items metaItems, data []byte) (*terrain.Raster, error) {
	f := &raw{}
	if flip, err := t.georeference(f, l); err != nil || flip {
		return nil, fmt.Errorf("%w: its place is not readable (%w)", ErrDamaged, err)
	}
	f.meta = terrain.Meta{VerticalDatum: items.name(itemDatum), Source: items.name(itemSource), Licence: items.name(itemLicence)}
	var scan terrain.Scan
	for _, p := range []struct {
		item string
		dst  []any
	}{
		{itemSigma, []any{&f.meta.SigmaM}},
		{itemRange, []any{&scan.MinM, &scan.MaxM}},
		{itemVoids, []any{&scan.Voids}},
		{itemKnown, []any{&scan.Col0, &scan.Col1, &scan.Row0, &scan.Row1}},
	} {
		words := strings.Fields(items.name(p.item))
		if len(words) != len(p.dst) {
			return nil, fmt.Errorf("%w: item %s has %d values, not %d", ErrDamaged, p.item, len(words), len(p.dst))
		}
		for i, w := range words {
			var err error
			switch d := p.dst[i].(type) {
			case *float64:
				*d, err = strconv.ParseFloat(w, 64)
			case *int:
				*d, err = strconv.Atoi(w)
			}
			if err != nil {
				return nil, fmt.Errorf("%w: item %s: %w", ErrDamaged, p.item, err)
			}
		}
	}
	heights := floats(data[l.offset[0]:], l.cols*l.rows)
	return terrain.Restore(f.grid, heights, f.meta, scan, items.name(itemFingerprint))
}

// floats views little-endian bytes as numbers, in place where the machine is
// little-endian too.
func floats(b []byte, n int) []float32 {
	if binary.NativeEndian.Uint16([]byte{1, 0}) == 1 && uintptr(unsafe.Pointer(&b[0]))%4 == 0 {
		return unsafe.Slice((*float32)(unsafe.Pointer(&b[0])), n)
	}
	out := make([]float32, n)
	for i := range out {
		out[i] = math.Float32frombits(binary.LittleEndian.Uint32(b[4*i:]))
	}
	return out
}

// once closes at most once.
type once struct {
	mu    sync.Mutex
	close func() error
}

func (o *once) Close() error {
	o.mu.Lock()
	defer o.mu.Unlock()
	f := o.close
	o.close = nil
	if f == nil {
		return nil
	}
	return f()
}
