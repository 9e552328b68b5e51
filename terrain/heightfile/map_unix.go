//go:build unix

package heightfile

import (
	"fmt"
	"io"
	"os"

	"golang.org/x/sys/unix"
)

// mapFile maps a file into memory, read-only.
func mapFile(f *os.File, size int) ([]byte, io.Closer, error) {
	data, err := unix.Mmap(int(f.Fd()), 0, size, unix.PROT_READ, unix.MAP_SHARED)
	if err != nil {
		return nil, nil, fmt.Errorf("mapping %d bytes into memory: %w", size, err)
	}
	return data, &once{close: func() error { return unix.Munmap(data) }}, nil
}
