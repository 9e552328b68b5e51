//go:build !unix

package journal

import (
	"os"
	"path/filepath"
)

// lockDir makes the file that takes a folder elsewhere; here nobody is kept out.
func lockDir(dir string) (*os.File, error) {
	return os.OpenFile(filepath.Join(dir, "lock"), os.O_RDWR|os.O_CREATE, 0o600)
}
