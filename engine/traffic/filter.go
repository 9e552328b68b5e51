package traffic

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"leadline/engine/kernel"
	"leadline/engine/sensor"
)

// Filter is what is known of the vehicles on a road. One goroutine owns it.
type Filter struct {
	road    *Road
	model   Model
	ears    []*ear
	unseen  *unseen
	tracks  []*track // by label
	lines   []line
	now     sensor.Time
	began   sensor.Time
	started bool
	work    work
	last    uint64 // label
	account Account
	doubts  []Doubt // of where posts stand
}

// Account is what was not kept, in expected vehicles, and what could not be used.
type Account struct {
	// Pruned lay in cells of a negligible mass; Clipped came in where a moved
	// density would have been below zero.
	Pruned, Clipped float64
	// Refused may be vehicles that are beyond the budget: they stay unseen.
	Refused int
	// Crowded bearings were too many to be weighed together, and taken for false.
	Crowded int
	// Left is how many vehicles left over the road's beginning and its end.
	Left [2]float64
	// LogEvidence is ln p of all scans under the model.
	LogEvidence float64
}

// track is what may be a vehicle.
type track struct {
	label     uint64
	existence float64
	grid      grid
	heard     heardAs
	sides     []int8 // by line: -1 before it, 1 beyond, 0 not known
	shown     bool   // existed once with probability ½ or more
}

// Thresholds. What exists with less than leastExistence goes back to the unseen,
// as expected vehicles, so that nothing is lost by it (recycling: Williams, 15th
// Int. Conf. on Information Fusion, 2012).
const (
	leastExistence = 0.02
	// A bearing is looked at as a new vehicle's where the unseen could at most
	// make it one with this probability.
	leastBirth = 1e-3
)

// New starts with nothing but the model's traffic on the road. Lines are
// positions along it past which vehicles are counted.
func New(road *Road, posts []Post, model Model, lines ...float64) (*Filter, error) {
	model = model.Filled()
	errs := []error{model.Check()}
	f := &Filter{road: road, model: model, unseen: newUnseen(road, &model)}
	if len(posts) == 0 {
		errs = append(errs, errors.New("there are no posts: give one or more"))
	}
	for _, p := range posts {
		if f.ear(p.ID) != nil {
			errs = append(errs, fmt.Errorf("post %q is there twice", p.ID))
			continue
		}
		e := newEar(road, p, model.soundMPS(), model.ReachM)
		f.ears = append(f.ears, e)
		f.doubts = append(f.doubts, e.doubts(&model)...)
	}
	for _, at := range lines {
		if !(at >= lineMarginM && at <= road.lengthM-lineMarginM) {
			errs = append(errs, fmt.Errorf("a line at %g m: give one that is %g m or more from either end of the road, which is %.1f m long", at, float64(lineMarginM), road.lengthM))
		}
		f.lines = append(f.lines, line{atM: at})
	}
	if err := errors.Join(errs...); err != nil {
		return nil, err
	}
	return f, nil
}

func (f *Filter) ear(id string) *ear {
	for _, e := range f.ears {
		if e.post.ID == id {
			return e
		}
	}
	return nil
}

// Hear takes a scan, no older than the last one. One that is refused changes
// nothing.
func (f *Filter) Hear(s Scan) error {
	e := f.ear(s.Post)
	if e == nil {
		return fmt.Errorf("post %q is none of this road's: name one of its posts", s.Post)
	}
	if f.started && s.Time < f.now {
		return fmt.Errorf("post %q: a scan of %d comes after one of %d: give them in order", s.Post, s.Time, f.now)
	}
	if err := s.check(); err != nil {
		return err
	}
	f.advance(s.Time)
	f.hear(e, s.Bearings)
	f.tidy()
	f.countPast()
	return nil
}

// forgetS without a scan, and what was known is no longer of use.
const forgetS = 600

// advance carries everything on to a time.
func (f *Filter) advance(to sensor.Time) {
	dtS := float64(to-f.now) * 1e-9
	f.now = to
	if !f.started {
		f.started, f.began = true, to
		return
	}
	if dtS <= 0 {
		return
	}
	if dtS > forgetS {
		f.tracks, f.unseen = nil, newUnseen(f.road, &f.model)
		return
	}
	f.unseen.move(dtS, f.model.VanishPerS)
	survive := kernel.Exp(-float64(f.model.VanishPerS * dtS))
	for _, t := range f.tracks {
		g := &t.grid
		clipped, pruned := g.move(&f.work, dtS, f.model.WalkMPS*f.model.WalkMPS)
		before, beyond := g.leave(f.road.lengthM)
		f.account.Pruned += float64(t.existence * pruned)
		f.account.Clipped += float64(t.existence * clipped)
		f.account.Left[0] += float64(t.existence * before)
		f.account.Left[1] += float64(t.existence * beyond)
		mass := g.total()
		t.existence *= math.Min(mass, 1) * survive
		if mass > 0 {
			g.scale(1 / mass)
		}
	}
}

// tidy gives back to the unseen what hardly exists.
func (f *Filter) tidy() {
	f.tracks = slices.DeleteFunc(f.tracks, func(t *track) bool {
		if t.existence >= leastExistence {
			t.shown = t.shown || t.existence >= 0.5
			return false
		}
		if t.existence > 0 {
			f.unseen.takeBack(&t.grid, t.existence)
		}
		return true
	})
}

// Now is the time of the last scan.
func (f *Filter) Now() sensor.Time { return f.now }

// Account is what was not kept so far.
func (f *Filter) Account() Account { return f.account }

// Road is the stretch that is listened to.
func (f *Filter) Road() *Road { return f.road }
