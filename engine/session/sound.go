package session

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"leadline/engine/filter"
)

// sound reports what in a session that was read could not have come about, as
// far as it would lead out of a slice or a map. beside are the quantities of what
// is off the map, searches is how many there are.
func (s *Session) sound(beside []filter.Quantity, searches int) error {
	states := []*state{&s.state}
	for i := range s.snaps {
		if !s.snaps[i].hollow {
			states = append(states, &s.snaps[i].state)
		} else if i == 0 {
			return errors.New("its first snapshot has no state")
		}
	}
	for _, st := range states {
		if err := s.soundBelief(st.belief); err != nil {
			return err
		}
		if st.monitor == nil {
			return errors.New("a state has no monitor")
		}
		if n := st.aside.named; n < 0 || n > searches {
			return fmt.Errorf("a state names search %d of %d", n, searches)
		}
		if err := st.aside.sound(beside); err != nil {
			return err
		}
	}
	l := &s.log
	if l.next < 0 || l.next > len(l.events) || s.final < 0 || s.final > len(s.recent) {
		return errors.New("it counts more events or posteriors than it has")
	}
	if s.begunOnce != (len(s.snaps) > 0) {
		return errors.New("it has begun without a snapshot, or not begun and has one")
	}
	for i := range l.sources {
		if len(l.sources[i].events) == 0 {
			return fmt.Errorf("a source of motion has no event")
		}
	}
	if slices.Contains(s.recent, nil) || slices.Contains(s.superseded, nil) {
		return errors.New("a posterior is missing")
	}
	return nil
}

func (s *Session) soundBelief(b *filter.Belief) error {
	if b == nil || b.Map != s.space.Fingerprint() || b.Dim != s.dim || !slices.Equal(b.Moved(), s.suite.Quantities(s.dim)) || len(b.Axes) > 0 != gridded(b.Moved()) {
		return errors.New("a belief is of another map or of other quantities")
	}
	k, n := len(b.Quantities), len(b.Key)
	if len(b.Mass) != n || len(b.Mean) != n*k || len(b.Cov) != n*k*(k+1)/2 {
		return errors.New("a belief's columns have different lengths")
	}
	if len(b.Tiles.Mass) != len(b.Tiles.At)*filter.TileSide*filter.TileSide {
		return errors.New("a belief's tiles are not whole")
	}
	if len(b.Axes) > 0 && !b.Slices.Whole() {
		return errors.New("a belief's slices are not whole")
	}
	if n == 0 && len(b.Tiles.At) == 0 && len(b.Slices.At) == 0 {
		return errors.New("a belief is empty")
	}
	if s.lines == nil {
		if h := b.Lattice.SpacingM; !(h > 0) || math.IsInf(h, 1) {
			return errors.New("a lattice has no spacing")
		}
		return nil
	}
	if b.Level < 0 || b.Level >= s.lines.Levels() {
		return fmt.Errorf("a belief has cells of size %d, and the map has %d sizes", b.Level, s.lines.Levels())
	}
	cells := s.lines.Lines(b.Level).Cells
	for _, key := range b.Key {
		if chart, cell := filter.LineCell(key); chart < 0 || int(chart) >= len(cells) || cell < 0 || int(cell) >= int(cells[chart]) {
			return errors.New("a belief has a cell that the map has not")
		}
	}
	return nil
}

func (a *aside) sound(quantities []filter.Quantity) error {
	l := &a.loose
	k, n := len(l.Quantities), l.Len()
	if !slices.Equal(l.Quantities, quantities) || len(l.Mean) != n*k || len(l.Cov) != n*k*(k+1)/2 || len(l.Key) != n {
		return errors.New("what is off the map has columns of different lengths")
	}
	return nil
}
