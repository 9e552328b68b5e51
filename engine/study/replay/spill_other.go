//go:build !unix

package replay

import "leadline/engine/study/score"

// spill holds truths in memory where there are no mapped files.
type spill struct{ list []score.Truth }

func newSpill() (*spill, error) { return new(spill), nil }

func (s *spill) write(list []score.Truth) error {
	s.list = append(s.list, list...)
	return nil
}

func (s *spill) open() ([]score.Truth, error) { return s.list, nil }
func (s *spill) Close() error                 { return nil }
