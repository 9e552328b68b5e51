package report

import (
	"cmp"
	"math"
	"slices"
	"time"

	"leadline/engine/geo"
	"leadline/engine/study/track"
)

// Stretch is a part of a run whose posteriors are of one class, and not usable.
type Stretch struct {
	What   string  `json:"what"`
	From   string  `json:"from"`    // RFC 3339
	AfterS float64 `json:"after_s"` // the first posterior
	ForS   float64 `json:"for_s"`   // from its first to its last posterior
	// MaxErrorM is null without truth, MaxRadius95M the 95 % radius.
	MaxErrorM    *float64 `json:"max_error_m"`
	MaxRadius95M float64  `json:"max_radius95_m"`
	Lon          float64  `json:"lon"` // where it begins
	Lat          float64  `json:"lat"`

	class        Class
	fromNS, toNS int64
}

// mostStretches of a run are kept, mostGathered while it is read. What interrupts
// one for no longer than joinS does not end it.
const (
	mostStretches = 12
	mostGathered  = 400
	joinS         = 2
)

// stretches finds them. One of each class may be open.
type stretches struct {
	open  [classes]*Stretch
	list  []Stretch // that have ended
	found int
}

func (w *stretches) add(row track.Row, class Class, startNS int64) {
	for c, s := range w.open {
		if s != nil && Class(c) != class && row.TimeNS-s.toNS > joinS*1e9 {
			w.end(Class(c))
		}
	}
	if class == Usable {
		return
	}
	s := w.open[class]
	if s == nil {
		s = &Stretch{
			What: class.String(), From: time.Unix(0, row.TimeNS).UTC().Format(time.RFC3339Nano), AfterS: float64(row.TimeNS-startNS) / 1e9,
			Lon: geo.Deg(row.At.Lon), Lat: geo.Deg(row.At.Lat), class: class, fromNS: row.TimeNS,
		}
		w.open[class] = s
		w.found++
	}
	s.toNS = row.TimeNS
	s.ForS = float64(s.toNS-s.fromNS) / 1e9
	if !math.IsNaN(row.ErrorM) && (s.MaxErrorM == nil || row.ErrorM > *s.MaxErrorM) {
		m := row.ErrorM
		s.MaxErrorM = &m
	}
	s.MaxRadius95M = math.Max(s.MaxRadius95M, row.Radius95M)
}

func (w *stretches) end(c Class) {
	if w.open[c] == nil {
		return
	}
	w.list, w.open[c] = append(w.list, *w.open[c]), nil
	if len(w.list) == mostGathered {
		slices.SortStableFunc(w.list, worse)
		w.list = w.list[:mostStretches]
	}
}

// worst ends all; it returns at most mostStretches, and how many there were.
func (w *stretches) worst() ([]Stretch, int) {
	for c := range w.open {
		w.end(Class(c))
	}
	slices.SortStableFunc(w.list, worse)
	return append([]Stretch{}, w.list[:min(len(w.list), mostStretches)]...), w.found
}

func worse(a, b Stretch) int {
	return cmp.Or(cmp.Compare(b.class, a.class), cmp.Compare(b.ForS, a.ForS), cmp.Compare(a.fromNS, b.fromNS))
}
