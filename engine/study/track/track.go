// Package track writes where a drive went, as a table, as GeoJSON, and as a
// picture over the map, and reads the table.
package track

import (
	"strconv"
	"time"

	"github.com/paulmach/orb"

	"leadline/engine/geo"
	"leadline/engine/study/score"
	"leadline/engine/summary"
)

// Step is one posterior of a drive, with the truth and the error from it to the
// scored position where they are known.
type Step struct {
	*summary.Posterior
	Truth  score.Truth
	Known  bool
	ErrorM float64
}

// Writer takes a drive's steps, by time. Nothing is complete before Close, which
// does not close the writer below.
type Writer interface {
	Add(Step) error
	Close() error
}

// Track is what a picture shows of a drive: its posteriors, or some of them, by
// time, with the truth where it is known.
type Track struct {
	Drive      string
	Posteriors []*summary.Posterior
	Truth      []score.Truth
	All        int // posteriors that there are
	Located    int // of them
	every      int
}

// mostKept bounds the posteriors of a picture.
const mostKept = 20_000

// Add keeps a step for the picture: each at first, then each second, each fourth,
// so that a drive of any length has at most 20 000.
func (t *Track) Add(s Step) error {
	if t.every == 0 {
		t.every = 1
	}
	if t.All%t.every == 0 {
		t.Posteriors = append(t.Posteriors, s.Posterior)
	}
	t.All++
	if s.Status == summary.Located {
		t.Located++
	}
	if len(t.Posteriors) > mostKept {
		for i := range (len(t.Posteriors) + 1) / 2 {
			t.Posteriors[i] = t.Posteriors[2*i]
		}
		n := (len(t.Posteriors) + 1) / 2
		clear(t.Posteriors[n:])
		t.Posteriors = t.Posteriors[:n]
		t.every *= 2
	}
	return nil
}

// Scored is the scored position: the mean while located, otherwise the middle of
// the most probable cell.
func Scored(p *summary.Posterior) geo.LonLat {
	if p.Status == summary.Located {
		return p.Mean
	}
	return p.MostProbable.Position
}

func stamp(ns int64) string { return time.Unix(0, ns).UTC().Format(time.RFC3339Nano) }

func lonLat(p geo.LonLat) orb.Point {
	round := func(rad float64) float64 { // 8 decimals: about a millimetre
		x, err := strconv.ParseFloat(strconv.FormatFloat(geo.Deg(rad), 'f', 8, 64), 64)
		if err != nil {
			panic("track: " + err.Error()) // of what FormatFloat made
		}
		return x
	}
	return orb.Point{round(p.Lon), round(p.Lat)}
}
