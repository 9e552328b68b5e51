package session

import (
	"bytes"
	"cmp"
	"slices"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/sensor"
)

// TestHugeStart: a session whose snapshot from before it began has no belief of its own
// gives what one does that holds it, bit for bit: where events from before the first come
// late, in its checkpoints, and where it is looked at after its desk was cleared.
func TestHugeStart(t *testing.T) {
	town := crossing()
	cfg := Config{Vehicle: "v", Space: town, Names: town, Start: Start{Kind: Anywhere}, MaxCells: 20000, Suite: &sensor.Suite{Vehicle: sensor.Vehicle{LateWindowS: 10}}}
	events := roadEvents(3)
	slices.SortStableFunc(events, func(a, b sensor.Event) int { return cmp.Compare(a.Time, b.Time) })
	events = events[:min(len(events), 300)]
	// The first twenty events come late.
	late := slices.Concat(events[20:40], events[:20], events[40:])
	seeded, again := 0, 0
	run := func(huge bool) (*Session, [][]byte) {
		s := open(t, cfg)
		s.hugeSize = 0 // as few as there are here
		if huge {
			s.seed = func() (*filter.Belief, error) {
				seeded++
				return filter.Seed(cfg.Space, cfg.Start.prior(cfg.Space.Frame()), s.suite.Quantities(s.dim), s.maxCells)
			}
		}
		var checkpoints [][]byte
		for i, ev := range late {
			before := seeded
			if _, err := s.Add(ev); err != nil {
				t.Fatal(err)
			}
			again += seeded - before
			if huge && len(s.snaps) > 0 && !s.snaps[0].begun && !s.snaps[0].seeded() {
				t.Fatal("the first snapshot has a belief of its own")
			}
			if i%40 == 10 {
				checkpoints = append(checkpoints, s.Checkpoint())
			}
		}
		s.Flush()
		return s, append(checkpoints, s.Checkpoint())
	}
	s, checkpoints := run(true)
	want, others := run(false)
	if again == 0 {
		t.Error("no event came so late that the session began again")
	}
	if s.Hash() != want.Hash() {
		t.Errorf("the hash is %s, want %s", s.Hash(), want.Hash())
	}
	for i := range others {
		if !bytes.Equal(checkpoints[i], others[i]) {
			t.Errorf("checkpoint %d differs", i)
		}
	}
	if s.fresh {
		t.Error("the desk was not cleared")
	}
	got, err := s.Region(0.95)
	if err != nil {
		t.Fatal(err)
	}
	region, err := want.Region(0.95)
	if err != nil || got.AreaM2 != region.AreaM2 {
		t.Errorf("a region of %v m², want %v (%v)", got.AreaM2, region.AreaM2, err)
	}
}
