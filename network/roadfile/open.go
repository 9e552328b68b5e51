package roadfile

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"slices"
	"strconv"

	"github.com/apache/arrow-go/v18/arrow"
	"github.com/apache/arrow-go/v18/arrow/ipc"

	"leadline/network"
)

// Errors of Open, beside those of the file system.
var (
	// ErrNotMap says that a file is something else.
	ErrNotMap = errors.New("not a compiled road map; compile one with `leadline map roads`")
	// ErrCorrupt says that a file is damaged.
	ErrCorrupt = errors.New("the compiled road map is damaged: compile it again")
)

// Open opens a compiled map. Its columns stay in the file, which is mapped
// into memory: the map must not be used after Close, and the file must not be
// changed in place (Write replaces it, which is safe). Every column is checked
// against its checksum, and the map's structure against what filtering relies
// on. The error is ErrNotMap, ErrCorrupt, or the file system's.
func Open(path string) (*network.Map, io.Closer, error) {
	bytes, closer, err := mapFile(path)
	if err != nil {
		return nil, nil, err
	}
	m, err := Decode(bytes)
	if err != nil {
		closer.Close()
		return nil, nil, fmt.Errorf("%s: %w", path, err)
	}
	return m, closer, nil
}

// Decode is Open for the content of a file in memory, which the map keeps.
func Decode(file []byte) (m *network.Map, err error) {
	if err := checkEndian(); err != nil {
		return nil, err
	}
	if len(file) < len(ipc.Magic) || string(file[:len(ipc.Magic)]) != string(ipc.Magic) {
		return nil, ErrNotMap
	}
	defer func() {
		// The container's library panics on some damage.
		if p := recover(); p != nil {
			m, err = nil, fmt.Errorf("%w (%v)", ErrCorrupt, p)
		}
	}()
	verify(file)
	r, err := ipc.NewMappedFileReader(file, ipc.WithAllocator(&frugal{left: maxCopied}))
	if err != nil {
		return nil, fmt.Errorf("%w (%w)", ErrCorrupt, err)
	}
	defer r.Close()
	meta := r.Schema().Metadata()
	switch got, _ := meta.GetValue(keyFormat); got {
	case format:
	case "":
		return nil, ErrNotMap
	default:
		return nil, fmt.Errorf("its format is %q, this program reads %q: compile it again", got, format)
	}
	d, fingerprint, err := decode(r, meta)
	if err != nil {
		return nil, fmt.Errorf("%w (%w)", ErrCorrupt, err)
	}
	if m, err = network.FromData(d, fingerprint); err != nil {
		return nil, fmt.Errorf("%w (%w)", ErrCorrupt, err)
	}
	return m, nil
}

// decode takes the columns out of the file and compares checksums.
func decode(r *ipc.FileReader, meta arrow.Metadata) (*network.Data, string, error) {
	var d network.Data
	get := func(key string) string { s, _ := meta.GetValue(key); return s }
	for _, x := range []struct {
		key string
		dst *float64
	}{{keyOriginLon, &d.Origin.Lon}, {keyOriginLat, &d.Origin.Lat}, {keyCellM, &d.CellM}} {
		v, err := strconv.ParseFloat(get(x.key), 64)
		if err != nil {
			return nil, "", fmt.Errorf("metadata %s is %.40q, want a number", x.key, get(x.key))
		}
		*x.dst = v
	}
	d.Source, d.Licence, d.Note = get(keySource), get(keyLicence), get(keyNote)
	if n := r.NumRecords(); n != 1 {
		return nil, "", fmt.Errorf("it has %d record batches, want 1", n)
	}
	batch, err := r.RecordBatchAt(0)
	if err != nil {
		return nil, "", err
	}
	// The buffers belong to the mapped file, so nothing is released here that
	// the columns refer to.
	for _, c := range columns {
		at := r.Schema().FieldIndices(c.name)
		if len(at) == 0 && c.optional != nil {
			continue
		}
		if len(at) != 1 {
			return nil, "", fmt.Errorf("it has %d columns named %s, want 1", len(at), c.name)
		}
		if err := c.get(&d, batch.Column(at[0]).Data()); err != nil {
			return nil, "", fmt.Errorf("column %s: %w", c.name, err)
		}
	}
	var want map[string]string
	if err := json.Unmarshal([]byte(get(keyChecksums)), &want); err != nil {
		return nil, "", fmt.Errorf("its list of checksums: %w", err)
	}
	got := checksums(&d, get(keyFingerprint), get(keyCRS))
	var bad []string
	for name, sum := range got {
		if want[name] != sum {
			bad = append(bad, name)
		}
	}
	if len(bad) > 0 {
		slices.Sort(bad)
		return nil, "", fmt.Errorf("the checksum of %s is wrong", bad)
	}
	fingerprint := get(keyFingerprint)
	if len(fingerprint) != 64 {
		return nil, "", fmt.Errorf("its fingerprint is %.70q", fingerprint)
	}
	return &d, fingerprint, nil
}

// maxCopied bounds what the container's library may allocate. A map's columns
// are used where they lie, so it needs next to nothing; a hostile file could
// ask for much.
const maxCopied = 1 << 20

// frugal is an allocator with a bound.
type frugal struct{ left int }

func (f *frugal) Allocate(size int) []byte {
	if size < 0 || size > f.left {
		panic(fmt.Sprintf("it asks for %d bytes of memory", size))
	}
	f.left -= size
	return make([]byte, size)
}

func (f *frugal) Reallocate(size int, b []byte) []byte {
	if size <= cap(b) {
		return b[:size]
	}
	n := f.Allocate(size)
	copy(n, b)
	return n
}

func (f *frugal) Free([]byte) {}
