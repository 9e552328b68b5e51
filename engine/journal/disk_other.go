//go:build !unix

package journal

import (
	"math"
	"os"
	"path/filepath"
)

// freeBytes is not known here: a full disk is found by what fails.
func freeBytes(string) (int64, error) { return math.MaxInt64, nil }

// lockDir makes the file that takes a folder elsewhere; here nobody is kept out.
func lockDir(dir string) (*os.File, error) {
	return os.OpenFile(filepath.Join(dir, "lock"), os.O_RDWR|os.O_CREATE, 0o600)
}
