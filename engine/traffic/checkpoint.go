package traffic

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"math"
	"slices"

	"leadline/engine/exact"
	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// A checkpoint is a watch in bytes: who restores it goes on as if nothing had
// been, bit for bit. In the envelope of engine/exact lie the road, posts and figures
// as a hash, and the watch. "LLT1" had no layout.
const (
	checkpointMagic = "LLT2"
	withoutLayout   = "LLT1"
)

// madeAs is the layout of this program.
var madeAs = exact.Layout([]any{Watch{}}, work{}, heardAs{}, sensor.Suite{})

// Checkpoint returns the watch in bytes.
func (w *Watch) Checkpoint() []byte {
	c := exact.Writer()
	w.code(c)
	return exact.Seal(checkpointMagic, madeAs, c.Bytes())
}

// Restore makes the watch of a checkpoint, by the suite that it began with.
// exact.ErrLayout is the error of one of another version; any other says what is wrong.
func Restore(suite *sensor.Suite, checkpoint []byte) (*Watch, error) {
	w, err := Open(suite)
	if err != nil {
		return nil, err
	}
	value, err := exact.Open(checkpointMagic, madeAs, checkpoint, withoutLayout)
	if err != nil {
		return nil, fmt.Errorf("traffic: %w", err)
	}
	c := exact.Reader(value)
	w.code(c)
	if err := c.Done(); err != nil {
		return nil, fmt.Errorf("traffic: the checkpoint is damaged: %w", err)
	}
	return w, nil
}

// Hash is the SHA-256 of all that is known, in hexadecimal.
func (w *Watch) Hash() string {
	c := exact.Writer()
	w.code(c)
	sum := sha256.Sum256(c.Bytes())
	return hex.EncodeToString(sum[:])
}

// Size is how many cells there are in all.
func (w *Watch) Size() int {
	n := w.filter.unseen.count()
	for _, t := range w.filter.tracks {
		n += t.grid.count()
	}
	return n
}

// made hashes what a watch is made of.
func (w *Watch) made() string {
	c, f := exact.Writer(), w.filter
	for _, p := range f.road.corners {
		c.Value(&p)
	}
	for _, e := range f.ears {
		c.Value(&e.post)
	}
	for i := range f.lines {
		c.Float(&f.lines[i].atM)
	}
	figures := f.model
	figures.Road, figures.Lines = nil, nil
	c.Value(&figures)
	c.Value(&w.hold)
	sum := sha256.Sum256(c.Bytes())
	return hex.EncodeToString(sum[:])
}

// code goes through what changes in a watch.
func (w *Watch) code(c *exact.Coder) {
	made := w.made()
	was := made
	if c.Text(&was); c.Err() == nil && was != made {
		c.Fail(errors.New("it is of another road, or of other posts or figures"))
	}
	exact.Slice(c, &w.pending, 8, func(s *Said) { c.Value(s) })
	exact.Slice(c, &w.ahead.held, 8, func(s *Said) { c.Value(s) })
	for _, t := range []*sensor.Time{&w.newest, &w.done} {
		c.Value(t)
	}
	c.Bool(&w.began)
	for i := range w.posts {
		p := &w.posts[i]
		c.Value(&p.next)
		c.Value(&p.heard)
		c.Bool(&p.deaf)
	}
	c.Value(&w.unknown)
	c.Value(&w.dropped)
	c.Text(&w.unknownPost)
	w.filter.code(c)
}

func (f *Filter) code(c *exact.Coder) {
	c.Value(&f.now)
	c.Value(&f.began)
	c.Bool(&f.started)
	c.Uint(&f.last)
	c.Value(&f.account)
	rows := len(f.unseen.slices)
	f.unseen.code(c)
	if c.Err() == nil && len(f.unseen.slices) != rows {
		c.Fail(fmt.Errorf("it has %d speeds where there are %d", len(f.unseen.slices), rows))
	}
	for i := range f.lines {
		l := &f.lines[i]
		c.Value(&l.count)
		c.Value(&l.expected)
		exact.Slice(c, &l.recent, 4, func(x *Crossing) { c.Value(x) })
	}
	exact.Slice(c, &f.tracks, 40, func(t **track) {
		if c.Reading() {
			*t = &track{}
		}
		(*t).code(c, len(f.lines))
	})
}

func (t *track) code(c *exact.Coder, lines int) {
	c.Uint(&t.label)
	c.Float(&t.existence)
	c.Bool(&t.shown)
	exact.Slice(c, &t.sides, 1, func(s *int8) { c.Value(s) })
	if c.Err() == nil && t.sides != nil && len(t.sides) != lines {
		c.Fail(fmt.Errorf("vehicle %d has %d lines where there are %d", t.label, len(t.sides), lines))
	}
	if c.Err() == nil && !(t.existence >= 0 && t.existence <= 1) {
		c.Fail(fmt.Errorf("vehicle %d exists with %g", t.label, t.existence))
	}
	t.grid.code(c)
}

func (g *grid) code(c *exact.Coder) {
	c.Float(&g.stepM)
	c.Float(&g.stepMPS)
	c.Float(&g.firstMPS)
	exact.Slice(c, &g.slices, 9, func(s *slice) {
		c.Float(&s.fromM)
		exact.Slice(c, &s.mass, 8, func(m *float64) { c.Float(m) })
		if c.Reading() && (!geo.Finite(s.fromM) || slices.ContainsFunc(s.mass, func(m float64) bool { return !(m >= 0) || math.IsInf(m, 0) })) {
			c.Fail(errors.New("a density has masses that are none"))
		}
	})
	if c.Err() == nil && (!geo.Finite(g.firstMPS) || !(g.stepM > 0 && g.stepM <= 1e4 && g.stepMPS > 0 && g.stepMPS <= 1e3)) {
		c.Fail(errors.New("a density has spacings that are none"))
	}
}
