package roadfile

import (
	"bytes"
	"os"
	"path/filepath"
	"testing"
)

// TestCorpora proves that each fuzz target's corpus is there: an empty folder
// would pass in silence.
func TestCorpora(t *testing.T) {
	for _, target := range []string{"FuzzGeoJSON", "FuzzExtract", "FuzzDecode"} {
		files, err := filepath.Glob(filepath.Join("testdata", "fuzz", target, "*"))
		if err != nil || len(files) < 3 {
			t.Errorf("%s has %d files, %v", target, len(files), err)
		}
		for _, f := range files {
			if b, err := os.ReadFile(f); err != nil || !bytes.HasPrefix(b, []byte("go test fuzz v1\n")) {
				t.Errorf("%s is no corpus file: %v", f, err)
			}
		}
	}
}
