//go:build !unix

package roadfile

import (
	"io"
	"os"
)

// mapFile reads a file where it cannot be mapped.
func mapFile(path string) ([]byte, io.Closer, error) {
	b, err := os.ReadFile(path)
	return b, io.NopCloser(nil), err
}
