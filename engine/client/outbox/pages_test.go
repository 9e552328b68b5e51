package outbox

import (
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	bolt "go.etcd.io/bbolt"
)

// TestPages has files of many shapes, of which bbolt's own check, the reference, finds
// nothing to say: neither does ours. Keys and values of many sizes, buckets that lie in
// a page or have their own, keys that go again, more free pages than a list's count holds.
func TestPages(t *testing.T) {
	for seed := range uint64(6) {
		rng := rand.New(rand.NewPCG(seed, 11))
		path := filepath.Join(t.TempDir(), "pages")
		db, err := bolt.Open(path, 0o600, &bolt.Options{NoSync: true, PageSize: 1024 << (2 * (seed % 2))})
		if err != nil {
			t.Fatal(err)
		}
		check := func() {
			t.Helper()
			f, err := os.Open(path)
			if err != nil {
				t.Fatal(err)
			}
			defer f.Close()
			info, err := f.Stat()
			if err != nil {
				t.Fatal(err)
			}
			err = db.View(func(tx *bolt.Tx) error {
				var first error
				for err := range tx.Check() { // to its end: its goroutine reads until then
					if first == nil {
						first = err
					}
				}
				return first
			})
			if err != nil {
				t.Fatalf("seed %d: bbolt: %v", seed, err)
			}
			if err := checkPages(f, info.Size(), db.Info().PageSize); err != nil {
				t.Errorf("seed %d: %v", seed, err)
			}
		}
		for round := range 12 {
			err := db.Update(func(tx *bolt.Tx) error {
				for _, name := range []string{"a", "b", "c"}[:1+rng.IntN(3)] {
					b, err := tx.CreateBucketIfNotExists([]byte(name))
					if err != nil {
						return err
					}
					inner, err := b.CreateBucketIfNotExists([]byte("within"))
					if err != nil {
						return err
					}
					if err := inner.Put(key(rng.Uint64N(40)), make([]byte, rng.IntN(60))); err != nil {
						return err
					}
					for range rng.IntN(400) {
						k := append(key(rng.Uint64N(2000)), make([]byte, rng.IntN(40))...)
						if rng.IntN(3) == 0 {
							err = b.Delete(k)
						} else {
							err = b.Put(k, make([]byte, rng.IntN(1+rng.IntN(12000))))
						}
						if err != nil {
							return err
						}
					}
				}
				return nil
			})
			if err != nil {
				t.Fatal(err)
			}
			if round%4 == 3 {
				check()
			}
		}
		if seed == 0 { // 70 000 pages free at once
			for _, change := range []func(tx *bolt.Tx) error{
				func(tx *bolt.Tx) error {
					b, err := tx.CreateBucket([]byte("big"))
					if err != nil {
						return err
					}
					return b.Put([]byte("it"), make([]byte, 70_000*1024))
				},
				func(tx *bolt.Tx) error { return tx.DeleteBucket([]byte("big")) },
				func(tx *bolt.Tx) error { return tx.Bucket([]byte("a")).Put([]byte("end"), nil) },
			} {
				if err := db.Update(change); err != nil {
					t.Fatal(err)
				}
				check()
			}
		}
		if err := db.Close(); err != nil {
			t.Fatal(err)
		}
	}
}
