//go:build unix

package roadfile

import (
	"fmt"
	"io"
	"os"

	"golang.org/x/sys/unix"
)

// mapFile maps a file into memory, for reading.
func mapFile(path string) ([]byte, io.Closer, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, nil, err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return nil, nil, err
	}
	if !info.Mode().IsRegular() {
		return nil, nil, fmt.Errorf("%s: %w", path, ErrNotMap)
	}
	if info.Size() == 0 {
		return nil, nil, fmt.Errorf("%s is empty: %w", path, ErrNotMap)
	}
	b, err := unix.Mmap(int(f.Fd()), 0, int(info.Size()), unix.PROT_READ, unix.MAP_SHARED)
	if err != nil {
		return nil, nil, fmt.Errorf("mapping %s into memory: %w", path, err)
	}
	return b, &mapping{b}, nil
}

type mapping struct{ b []byte }

// Close unmaps the file; more than once does nothing.
func (m *mapping) Close() error {
	if m.b == nil {
		return nil
	}
	b := m.b
	m.b = nil
	return unix.Munmap(b)
}
