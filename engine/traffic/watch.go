package traffic

import (
	"cmp"
	"errors"
	"fmt"
	"math"
	"slices"

	"leadline/engine/sensor"
)

// Watch makes scans of bearings that come one by one, in any order within a
// time, and gives them to a filter in their order; and it knows from when a post
// would have spoken that it heard nothing. What comes out is a function of the
// set of bearings. One goroutine owns it.
type Watch struct {
	filter  *Filter
	suite   *sensor.Suite // of a watch that Open made
	hold    sensor.Time
	period  sensor.Time
	deaf    sensor.Time
	pending []Said // in order
	newest  sensor.Time
	done    sensor.Time // scans up to here are given to the filter
	began   bool
	posts   []hearing // by ear
	ahead   ahead
	// Of what was refused: bearings of posts that are unknown, and the last such
	// post; those that were held and dropped.
	unknown, dropped int
	unknownPost      string
}

// Said is what a post says: one bearing. What agrees in time, post, sensor and
// number is one and the same.
type Said struct {
	Time   sensor.Time
	Post   string
	Sensor string
	Number uint64
	Bearing
}

// hearing is when a post would speak next, and when it last did.
type hearing struct {
	next, heard sensor.Time
	deaf        bool
}

// ErrLate is a bearing of a time that is already done with, ErrOverfull one too
// many that waits.
var (
	ErrLate     = errors.New("too late")
	ErrOverfull = errors.New("too many")
)

const (
	// maxPending bearings wait to be put in order.
	maxPending = 1 << 16
	// A post from which nothing comes for so long is taken for out of order: its
	// false bearings alone would fall silent for 14/rate once in a million times,
	// and beyond deafMostS what it does not hear is left out all the same.
	deafLeastS, deafMostS, deafFalse = 10, 60, 14
)

// NewWatch orders what comes within holdS of the newest, at least the time
// between two scans of a post.
func NewWatch(f *Filter, holdS float64) *Watch {
	deafS := min(max(deafFalse/f.model.FalsePerS, deafLeastS), deafMostS)
	return &Watch{
		filter: f, hold: seconds(max(holdS, 1/f.model.ListenHz)), period: seconds(1 / f.model.ListenHz), deaf: seconds(deafS),
		posts: make([]hearing, len(f.ears)),
	}
}

func seconds(s float64) sensor.Time { return sensor.Time(math.Round(s * 1e9)) }

// Filter is what is known after the scans that are done.
func (w *Watch) Filter() *Filter { return w.filter }

// Add takes a bearing. One that is refused changes nothing.
func (w *Watch) Add(s Said) error {
	if w.filter.ear(s.Post) == nil {
		return fmt.Errorf("post %q is none of this road's: name one of its posts", s.Post)
	}
	if err := (Scan{Post: s.Post, Bearings: []Bearing{s.Bearing}}).check(); err != nil {
		return err
	}
	if w.began && s.Time <= w.done {
		return fmt.Errorf("post %q: a bearing that came %.3f s after its time's turn: send within %.3g s, or let the post's clock be set: %w",
			s.Post, float64(w.done-s.Time)*1e-9, float64(w.hold)*1e-9, ErrLate)
	}
	for _, s := range w.lead(s) {
		if err := w.enter(s); err != nil {
			return err
		}
	}
	return nil
}

// enter puts a bearing among those that wait for their turn.
func (w *Watch) enter(s Said) error {
	at, twice := slices.BinarySearchFunc(w.pending, s, w.compare)
	if twice {
		return nil
	}
	if len(w.pending) >= maxPending {
		return fmt.Errorf("%d bearings wait to be put in order, no more are taken: wait less than %.3g s for late ones: %w", maxPending, float64(w.hold)*1e-9, ErrOverfull)
	}
	w.pending = slices.Insert(w.pending, at, s)
	w.newest = max(w.newest, s.Time)
	return w.release(w.newest - w.hold)
}

// Flush waits for nothing more.
func (w *Watch) Flush() error {
	w.drop()
	return w.release(w.newest)
}

// Dropped is how many bearings that were taken at first were then refused: they
// came from a post whose clock was ahead.
func (w *Watch) Dropped() int { return w.dropped }

func (w *Watch) compare(a, b Said) int {
	return cmp.Or(cmp.Compare(a.Time, b.Time), cmp.Compare(a.Post, b.Post), cmp.Compare(a.Sensor, b.Sensor), cmp.Compare(a.Number, b.Number))
}

// release gives to the filter what is of a time or before.
func (w *Watch) release(to sensor.Time) error {
	for len(w.pending) > 0 && w.pending[0].Time <= to {
		first := w.pending[0]
		n := 1
		for n < len(w.pending) && w.pending[n].Time == first.Time && w.pending[n].Post == first.Post {
			n++
		}
		s := Scan{Time: first.Time, Post: first.Post}
		for _, said := range w.pending[:n] {
			s.Bearings = append(s.Bearings, said.Bearing)
		}
		w.pending = slices.Delete(w.pending, 0, n)
		if !w.began {
			w.began = true
			for i := range w.posts {
				w.posts[i] = hearing{next: s.Time, heard: s.Time}
			}
		}
		if err := w.silent(s.Time - w.period/2); err != nil {
			return err
		}
		if err := w.filter.Hear(s); err != nil {
			return err
		}
		w.done = s.Time
		for i, e := range w.filter.ears {
			if e.post.ID == s.Post {
				w.posts[i] = hearing{next: s.Time + w.period, heard: s.Time}
			}
		}
	}
	return nil
}

// silent gives to the filter the scans in which posts would have said something
// up to a time, and did not.
func (w *Watch) silent(to sensor.Time) error {
	for {
		at := -1
		for i, p := range w.posts {
			if !p.deaf && p.next <= to && (at < 0 || p.next < w.posts[at].next) {
				at = i
			}
		}
		if at < 0 {
			return nil
		}
		p := &w.posts[at]
		if p.next-p.heard > w.deaf {
			p.deaf = true
			continue
		}
		if err := w.filter.Hear(Scan{Time: max(p.next, w.filter.now), Post: w.filter.ears[at].post.ID}); err != nil {
			return err
		}
		p.next += w.period
	}
}
