package roadfile

import (
	"bytes"
	"errors"
	"os"
	"path/filepath"
	"testing"

	"github.com/apache/arrow-go/v18/arrow/array"
	"github.com/apache/arrow-go/v18/arrow/ipc"

	"leadline/network"
)

const townPath = "../../fixtures/roads/quillmere.geojson"

func readTown(tb testing.TB, opt Options) (*network.Map, Notes) {
	tb.Helper()
	m, notes, err := Read(townPath, opt)
	if err != nil {
		tb.Fatal(err)
	}
	return m, notes
}

func compiled(tb testing.TB, m *network.Map) []byte {
	tb.Helper()
	var b bytes.Buffer
	if err := WriteTo(&b, m); err != nil {
		tb.Fatal(err)
	}
	return b.Bytes()
}

// sameColumns compares two maps bit for bit.
func sameColumns(tb testing.TB, got, want *network.Map) {
	tb.Helper()
	columns := map[string][]byte{}
	want.Data().EachColumn(func(name string, b []byte) { columns[name] = b })
	got.Data().EachColumn(func(name string, b []byte) {
		if !bytes.Equal(b, columns[name]) {
			tb.Errorf("column %s differs", name)
		}
	})
	if got.Fingerprint() != want.Fingerprint() || got.Data().Fingerprint() != want.Fingerprint() {
		tb.Errorf("fingerprint %s, computed %s, want %s", got.Fingerprint(), got.Data().Fingerprint(), want.Fingerprint())
	}
	g, w := got.Data(), want.Data()
	if g.Origin != w.Origin || g.CellM != w.CellM || g.Source != w.Source || g.Licence != w.Licence || g.Note != w.Note {
		tb.Error("metadata differs")
	}
}

// TestCompiledRoundTrip proves that a map comes back from its file bit for
// bit, with heights and without, and that the file appears whole.
func TestCompiledRoundTrip(t *testing.T) {
	for name, opt := range map[string]Options{
		"heights":    {},
		"no heights": {Classes: []string{"trunk"}, Map: network.Options{CellM: 0.7, Source: "ours", Licence: "free\nfor all"}},
	} {
		t.Run(name, func(t *testing.T) {
			m, _ := readTown(t, opt)
			path := filepath.Join(t.TempDir(), "town"+Suffix)
			for range 2 { // the second time over the first
				if err := Write(path, m); err != nil {
					t.Fatal(err)
				}
			}
			got, closer, err := Open(path)
			if err != nil {
				t.Fatal(err)
			}
			sameColumns(t, got, m)
			if err := closer.Close(); err != nil {
				t.Error(err)
			}
			entries, err := os.ReadDir(filepath.Dir(path))
			if err != nil || len(entries) != 1 {
				t.Errorf("%d files are left, %v", len(entries), err)
			}
		})
	}
}

// TestOtherReader proves that a reader which knows nothing of maps opens the
// file and finds the rows.
func TestOtherReader(t *testing.T) {
	m, _ := readTown(t, Options{})
	r, err := ipc.NewFileReader(bytes.NewReader(compiled(t, m)))
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	batch, err := r.RecordBatchAt(0)
	if err != nil {
		t.Fatal(err)
	}
	if int(batch.NumRows()) != m.Charts() {
		t.Fatalf("%d rows, want %d", batch.NumRows(), m.Charts())
	}
	column := func(name string) any { return batch.Column(r.Schema().FieldIndices(name)[0]) }
	names := column("name").(*array.Dictionary)
	lines := column("geometry").(*array.List)
	along := column("along_m").(*array.List)
	for c := range m.Charts() {
		if got := names.Dictionary().(*array.String).Value(names.GetValueIndex(c)); got != m.Name(int32(c)) {
			t.Fatalf("edge %d is called %q, want %q", c, got, m.Name(int32(c)))
		}
		from, to := lines.ValueOffsets(c)
		x := lines.ListValues().(*array.Struct).Field(0).(*array.Float64)
		east, _ := m.Polyline(int32(c))
		if int(to-from) != len(east) || x.Value(int(from)) != east[0] {
			t.Fatalf("edge %d has %d vertices from %v, want %d from %v", c, to-from, x.Value(int(from)), len(east), east[0])
		}
		_, end := along.ValueOffsets(c)
		if got := along.ListValues().(*array.Float64).Value(int(end) - 1); got != m.LengthM(int32(c)) {
			t.Fatalf("edge %d is %v m long, want %v", c, got, m.LengthM(int32(c)))
		}
	}
	meta := r.Schema().Metadata()
	for _, key := range []string{keyCRS, keySource, keyLicence, keyFingerprint, keyNote} {
		if v, _ := meta.GetValue(key); v == "" {
			t.Errorf("metadata %s is missing", key)
		}
	}
}

// TestEveryFlippedBit proves that damage does not go unnoticed: with any one
// bit of the file flipped, opening fails by name or gives the very same map
// (the bit was padding, or in the copy of the schema that is not used).
func TestEveryFlippedBit(t *testing.T) {
	m, _ := readTown(t, Options{Classes: []string{"trunk_link"}, Map: network.Options{Note: "-"}})
	file := compiled(t, m)
	unnoticed := 0
	for i := range file {
		bit := byte(1) << (i % 8)
		file[i] ^= bit
		got, err := Decode(bytes.Clone(file))
		file[i] ^= bit
		switch {
		case err == nil:
			sameColumns(t, got, m)
			unnoticed++
		case !errors.Is(err, ErrCorrupt) && !errors.Is(err, ErrNotMap) && !bytes.Contains([]byte(err.Error()), []byte("format")):
			t.Fatalf("byte %d: %v", i, err)
		}
		if t.Failed() {
			t.Fatalf("byte %d of %d went unnoticed", i, len(file))
		}
	}
	t.Logf("%d of %d flipped bits do not matter", unnoticed, len(file))
}

// TestTruncated proves that a file cut anywhere is refused.
func TestTruncated(t *testing.T) {
	m, _ := readTown(t, Options{Classes: []string{"trunk_link"}, Map: network.Options{Note: "-"}})
	file := compiled(t, m)
	for n := range file {
		if _, err := Decode(file[:n:n]); !errors.Is(err, ErrCorrupt) && !errors.Is(err, ErrNotMap) {
			t.Fatalf("%d of %d bytes: %v", n, len(file), err)
		}
	}
}

// TestOpenRefuses proves what is said of files that are no maps.
func TestOpenRefuses(t *testing.T) {
	dir := t.TempDir()
	empty, other := filepath.Join(dir, "empty"), filepath.Join(dir, "other")
	for path, content := range map[string]string{empty: "", other: "ARROWS"} {
		if err := os.WriteFile(path, []byte(content), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	for path, want := range map[string]error{
		empty: ErrNotMap, other: ErrNotMap, dir: ErrNotMap, townPath: ErrNotMap,
		filepath.Join(dir, "none"): os.ErrNotExist,
	} {
		if _, _, err := Open(path); !errors.Is(err, want) {
			t.Errorf("%s: %v, want %v", path, err, want)
		}
	}
}

// FuzzDecode looks for files that make opening panic, or that open to a map
// whose positions cannot be sampled.
func FuzzDecode(f *testing.F) {
	for _, opt := range []Options{{Classes: []string{"trunk"}}, {Classes: []string{"trunk_link"}}} {
		m, _ := readTown(f, opt)
		f.Add(compiled(f, m))
	}
	f.Add([]byte("ARROW1\x00\x00"))
	f.Fuzz(func(t *testing.T, file []byte) {
		m, err := Decode(file)
		if err != nil {
			return
		}
		walk(m)
	})
}
