package replay

import (
	"cmp"
	"io"
	"slices"

	"leadline/engine/study/score"
)

// mostTruths is how many truths are held in memory, 32 bytes each; more are written
// to a file that goes when it is closed, and mapped.
const mostTruths = 1 << 20

// truths are a drive's as they are read.
type truths struct {
	list []score.Truth // not in the file yet
	file *spill        // nil: all are in list
	most int
}

func (t *truths) add(at score.Truth) (err error) {
	if len(t.list) == t.most {
		if t.file == nil {
			if t.file, err = newSpill(); err != nil {
				return err
			}
		}
		if err := t.file.write(t.list); err != nil {
			return err
		}
		t.list = t.list[:0]
	}
	t.list = append(t.list, at)
	return nil
}

// all are the truths by time; they are valid until they are closed.
func (t *truths) all() ([]score.Truth, io.Closer, error) {
	out, closer := t.list, io.Closer(nothing{})
	if t.file != nil {
		err := t.file.write(t.list)
		if err == nil {
			out, err = t.file.open()
		}
		if err != nil {
			return nil, nil, err
		}
		closer, t.file, t.list = t.file, nil, nil
	}
	byTime := func(a, b score.Truth) int { return cmp.Compare(a.TimeNS, b.TimeNS) }
	if !slices.IsSortedFunc(out, byTime) {
		slices.SortStableFunc(out, byTime) // in its place
	}
	return out, closer, nil
}

// drop gives the file back where all was not called.
func (t *truths) drop() {
	if t.file != nil {
		_ = t.file.Close()
	}
}

type nothing struct{}

func (nothing) Close() error { return nil }
