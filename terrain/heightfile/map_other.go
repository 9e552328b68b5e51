//go:build !unix

package heightfile

import (
	"io"
	"os"
)

// mapFile reads a file where it cannot be mapped.
func mapFile(f *os.File, size int) ([]byte, io.Closer, error) {
	data := make([]byte, size)
	if _, err := io.ReadFull(f, data); err != nil {
		return nil, nil, err
	}
	return data, &once{}, nil
}
