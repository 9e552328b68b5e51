//go:build unix

package replay

import (
	"errors"
	"fmt"
	"unsafe"

	"golang.org/x/sys/unix"

	"leadline/engine/study/score"
)

// spill is a file of truths as they lie in memory.
type spill struct {
	f      *Scratch
	n      int
	mapped []byte
}

const truthBytes = int(unsafe.Sizeof(score.Truth{}))

func newSpill() (*spill, error) {
	f, err := NewScratch("truths")
	if err != nil {
		return nil, err
	}
	return &spill{f: f}, nil
}

func (s *spill) write(list []score.Truth) error {
	if len(list) == 0 {
		return nil
	}
	// Truth holds numbers alone.
	b := unsafe.Slice((*byte)(unsafe.Pointer(&list[0])), len(list)*truthBytes)
	if _, err := s.f.Write(b); err != nil {
		return s.f.Trouble(err)
	}
	s.n += len(list)
	return nil
}

// open maps what was written. The system takes its pages back where it needs them.
func (s *spill) open() ([]score.Truth, error) {
	b, err := unix.Mmap(int(s.f.Fd()), 0, s.n*truthBytes, unix.PROT_READ|unix.PROT_WRITE, unix.MAP_SHARED)
	if err != nil {
		return nil, fmt.Errorf("truths of a long drive: mapping their file: %w", err)
	}
	s.mapped = b
	return unsafe.Slice((*score.Truth)(unsafe.Pointer(&b[0])), s.n), nil
}

func (s *spill) Close() error {
	var err error
	if s.mapped != nil {
		err = unix.Munmap(s.mapped)
	}
	return errors.Join(err, s.f.Close())
}
