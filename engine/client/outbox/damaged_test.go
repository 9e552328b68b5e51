package outbox

import (
	"bytes"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// TestDamaged cuts the file off and flips bits in it: it opens with all that it held,
// or not at all with an error that names it; there is never a panic.
func TestDamaged(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "van.outbox")
	b := begin(t, path, options())
	add(t, b, 0, 3000)
	if err := b.Abort(); err != nil {
		t.Fatal(err)
	}
	good, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	refused, tried := 0, 0
	try := func(what string, content []byte) {
		t.Helper()
		tried++
		broken := filepath.Join(dir, fmt.Sprint("broken ", tried))
		if err := os.WriteFile(broken, content, 0o600); err != nil {
			t.Fatal(err)
		}
		b, err := Open(broken, options())
		if err != nil {
			refused++
			if !strings.Contains(err.Error(), broken) || strings.Contains(err.Error(), "\n") {
				t.Errorf("%s: %v", what, err)
			}
			return
		}
		after, last := b.file.Held()
		count := uint64(0)
		for n := after + 1; n <= last; n++ {
			list, err := b.file.Batch(n)
			if err != nil {
				t.Errorf("%s: batch %d: %v", what, n, err)
			}
			for _, m := range list {
				if m.GetNumber() != count {
					t.Fatalf("%s: measurement %d came as %d", what, count, m.GetNumber())
				}
				count++
			}
		}
		if count != 3000 {
			t.Errorf("%s: %d measurements of 3000, and no error", what, count)
		}
		if err := b.Abort(); err != nil && !strings.Contains(err.Error(), broken) {
			t.Errorf("%s: %v", what, err)
		}
	}
	const seed = 3
	rng := rand.New(rand.NewPCG(seed, 0))
	for n := 1; n < len(good); n += 1 + len(good)/40 {
		try(fmt.Sprintf("cut off after %d of %d bytes", n, len(good)), good[:n])
	}
	flip := func(i int) {
		flipped := append([]byte(nil), good...)
		flipped[i] ^= 1 << rng.IntN(8)
		try(fmt.Sprintf("seed %d: a bit of byte %d flipped", seed, i), flipped)
	}
	for range 150 {
		flip(rng.IntN(len(good)))
	}
	for i := range 5 {
		flip(bytes.LastIndex(good, []byte("about")) + i)
	}
	for range 300 { // where the pages say what they are and where their elements lie
		flip(rng.IntN(len(good)/os.Getpagesize())*os.Getpagesize() + rng.IntN(96))
	}
	if refused < 30 {
		t.Errorf("%d of %d damages were noticed", refused, tried)
	}
}
