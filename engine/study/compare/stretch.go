package compare

import (
	"errors"
	"fmt"
	"io/fs"
	"iter"
	"math"
	"os"
	"path/filepath"
	"slices"
	"time"

	"leadline/engine/study/results"
	"leadline/engine/study/track"
)

// Stretch is a part of a drive where B errs otherwise than A.
type Stretch struct {
	From  string  `json:"from"` // RFC 3339
	ForS  float64 `json:"for_s"`
	AM    float64 `json:"a_mean_m"`
	BM    float64 `json:"b_mean_m"`
	Worse bool    `json:"worse"`
}

// A stretch is where the errors differ by more than leastM, and more than the
// truth's own 95 %, one way, for leastS or more, with no more than gapS of less
// within it. Practice.
const (
	leastM        = 1.0
	leastS        = 5.0
	gapS          = 2.0
	mostStretches = 10
)

// stretches reads both tracks beside each other.
func stretches(a, b *results.Result) ([]Stretch, error) {
	fa, err := open(a)
	if err != nil {
		return nil, err
	}
	defer fa.Close()
	fb, err := open(b)
	if err != nil {
		return nil, err
	}
	defer fb.Close()
	least := leastM
	for _, r := range []*results.Result{a, b} {
		if t := r.Score.TruthNote; t != nil {
			least = math.Max(least, t.P95M)
		}
	}
	return differing(track.Rows(fa, fa.Name()), track.Rows(fb, fb.Name()), least)
}

func open(r *results.Result) (*os.File, error) {
	f, err := os.Open(filepath.Join(r.Dir, results.TableFile))
	if errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("%s holds no %s: make it again with `leadline replay --out`", r.Dir, results.TableFile)
	}
	return f, err
}

// differing finds the stretches, those that weigh most first: by the difference
// summed over time.
func differing(a, b iter.Seq2[track.Row, error], leastM float64) ([]Stretch, error) {
	next, stop := iter.Pull2(b)
	defer stop()
	other, err, more := next()
	type open struct {
		Stretch
		fromNS, toNS int64
		n            float64
	}
	var now [2]open // better, worse
	var out []open
	end := func(i int) {
		s := now[i]
		now[i] = open{}
		if s.n > 0 && float64(s.toNS-s.fromNS) >= leastS*1e9 {
			s.ForS, s.AM, s.BM = float64(s.toNS-s.fromNS)/1e9, s.AM/s.n, s.BM/s.n
			s.From, s.Worse = time.Unix(0, s.fromNS).UTC().Format(time.RFC3339Nano), i == 1
			out = append(out, s)
		}
	}
	for row, bad := range a {
		if bad != nil {
			return nil, bad
		}
		for more && err == nil && other.TimeNS < row.TimeNS {
			other, err, more = next()
		}
		if err != nil {
			return nil, err
		}
		if !more {
			break
		}
		if other.TimeNS != row.TimeNS {
			continue
		}
		d := other.ErrorM - row.ErrorM
		for i, is := range [2]bool{d < -leastM, d > leastM} {
			s := &now[i]
			switch {
			case is && s.n == 0:
				*s = open{Stretch: Stretch{AM: row.ErrorM, BM: other.ErrorM}, fromNS: row.TimeNS, toNS: row.TimeNS, n: 1}
			case is:
				s.toNS, s.n, s.AM, s.BM = row.TimeNS, s.n+1, s.AM+row.ErrorM, s.BM+other.ErrorM
			case s.n > 0 && float64(row.TimeNS-s.toNS) > gapS*1e9:
				end(i)
			}
		}
	}
	end(0)
	end(1)
	slices.SortStableFunc(out, func(x, y open) int {
		wx, wy := math.Abs(x.BM-x.AM)*x.ForS, math.Abs(y.BM-y.AM)*y.ForS
		switch {
		case wx > wy:
			return -1
		case wx < wy:
			return 1
		}
		return 0
	})
	list := []Stretch{}
	for _, s := range out[:min(len(out), mostStretches)] {
		list = append(list, s.Stretch)
	}
	return list, nil
}
