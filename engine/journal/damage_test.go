package journal

import (
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// written fills a journal in a folder and closes it; it returns what was
// acknowledged, by line, in the order of the numbers.
func written(t *testing.T, o Options, perLine int) map[Place][]string {
	t.Helper()
	acked := map[Place][]string{}
	j, _, err := tryOpen(o)
	if err != nil {
		t.Fatal(err)
	}
	var lines []*Line
	for i := range 6 {
		lines = append(lines, j.Begin(fmt.Sprint("vehicle ", i)))
	}
	for n := range perLine {
		for i, l := range lines {
			text := fmt.Sprintf("%d of line %d %s", n, i, strings.Repeat("x", 40))
			mustPut(t, l, text)
			acked[l.Place()] = append(acked[l.Place()], text)
		}
	}
	j.Close()
	return acked
}

// blocks are the files that hold the messages, by falling size.
func blocks(t *testing.T, dir string) (paths []string) {
	t.Helper()
	err := filepath.WalkDir(dir, func(path string, _ os.DirEntry, err error) error {
		if err == nil && filepath.Ext(path) == ".blk" {
			paths = append(paths, path)
		}
		return err
	})
	if err != nil || len(paths) == 0 {
		t.Fatalf("no blocks in %s: %v", dir, err)
	}
	return paths
}

// TestDamage proves that of what was acknowledged nothing is missing or changed
// in silence: bits are flipped in the broker's files, and their ends cut off, and
// each record is there as it was, or is in a range that the journal names. And
// that it does name what is whole: a journal that nobody touched has no damage.
func TestDamage(t *testing.T) {
	o := within(t)
	o.Partitions = 2
	o.Log = nil // the broker has a lot to say about this
	acked := written(t, o, 40)
	var named, missed int
	seeds := uint64(8)
	if testing.Short() {
		seeds = 3
	}
	for seed := range seeds {
		rng := rand.New(rand.NewPCG(seed, 3))
		dir := filepath.Join(t.TempDir(), "copy")
		if err := os.CopyFS(dir, os.DirFS(o.Dir)); err != nil {
			t.Fatal(err)
		}
		// The indexes go: a broker that has them does not read the messages.
		_ = filepath.WalkDir(dir, func(path string, e os.DirEntry, _ error) error {
			if !e.IsDir() && (strings.HasSuffix(path, ".db") || filepath.Ext(path) == ".idx") {
				_ = os.Remove(path)
			}
			return nil
		})
		path := blocks(t, dir)[0]
		b, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		what := "nothing"
		switch {
		case seed == 0:
		case seed%2 == 1:
			at := rng.IntN(len(b))
			b[at] ^= 1 << rng.IntN(8)
			what = fmt.Sprintf("bit of byte %d of %d flipped", at, len(b))
		default:
			n := 1 + rng.IntN(len(b)/4)
			b = b[:len(b)-n]
			what = fmt.Sprintf("%d bytes cut off the end", n)
		}
		if err := os.WriteFile(path, b, 0o600); err != nil {
			t.Fatal(err)
		}
		damaged := o
		damaged.Dir = dir
		j, k, err := tryOpen(damaged)
		if err != nil {
			if seed == 0 {
				t.Fatal(err)
			}
			named++ // it does not open, and says why
			t.Logf("seed %d: %s: %v", seed, what, err)
			continue
		}
		j.Close()
		lost := 0
		for place, texts := range acked {
			there := map[uint64]string{}
			for _, r := range k.lines[place] {
				there[r.Number] = string(r.Data)
			}
			for i, text := range texts {
				n := uint64(i + 1)
				got, ok := there[n]
				switch {
				case ok && got != text:
					t.Errorf("seed %d: %s: record %d of %v is %q", seed, what, n, place, got)
				case !ok && !slices.ContainsFunc(k.found.Damage, func(d Damage) bool {
					return d.Place == place && d.From <= n && n <= d.To || d.Place == Place{Partition: place.Partition}
				}):
					t.Errorf("seed %d: %s: record %d of %v is missing, and of the damage (%v) none names it", seed, what, n, place, k.found.Damage)
				case !ok:
					lost++
				}
			}
		}
		t.Logf("seed %d: %s: %d of 240 missing, damage %v", seed, what, lost, k.found.Damage)
		if len(k.found.Damage) > 0 {
			named++
		}
		if lost > 0 {
			missed++
		}
		if seed == 0 && (lost > 0 || len(k.found.Damage) > 0) {
			t.Errorf("a journal that nobody touched: %d missing, damage %v", lost, k.found.Damage)
		}
	}
	if named == 0 || missed == 0 {
		t.Errorf("of the damage %d were named and %d had records missing: they hit nothing", named, missed)
	}
}

// FuzzPack gives a pack's reader any bytes: it must return an error or a pack
// that is written as the same bytes.
func FuzzPack(f *testing.F) {
	for _, p := range []pack{
		{epoch: 1, number: 1, first: 1},
		{epoch: 3, number: 17, first: 4, lines: 9, records: []part{{kind: 2, parts: 3, line: 9, number: 5, data: []byte("a record")}, {kind: 5, parts: 1, line: 2, number: 1}}},
	} {
		f.Add(p.appendTo(nil))
	}
	f.Fuzz(func(t *testing.T, b []byte) {
		var p pack
		if err := p.read(b); err != nil {
			return
		}
		if got := p.appendTo(nil); string(got) != string(b) {
			t.Errorf("%x is read as %+v and written as %x", b, p, got)
		}
	})
}
