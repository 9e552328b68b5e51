package replay

import (
	"errors"
	"fmt"
	"os"
)

// Scratch is a file for what of a long drive would fill the memory. It has no name
// any more, so that it ends with the process, where the system allows that of an open
// file; elsewhere Close takes it away.
type Scratch struct {
	*os.File
	what  string
	named bool
}

// NewScratch makes one; what it is for is said in errors.
func NewScratch(what string) (*Scratch, error) {
	f, err := os.CreateTemp("", "leadline-scratch-")
	s := &Scratch{File: f, what: what}
	if err != nil {
		return nil, s.Trouble(err)
	}
	s.named = os.Remove(f.Name()) != nil
	return s, nil
}

// Trouble is the error of what failed with it: what is in it and what to do. nil is
// none.
func (s *Scratch) Trouble(err error) error {
	if err == nil {
		return nil
	}
	return fmt.Errorf("%s of a long drive go into a file: %w: free some room there, or set TMPDIR", s.what, err)
}

// Close gives the file back.
func (s *Scratch) Close() error {
	err := s.File.Close()
	if s.named {
		err = errors.Join(err, os.Remove(s.Name()))
	}
	return err
}
