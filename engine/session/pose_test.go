package session

import (
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// TestPoseWhenAsked: a pose that is taken only when something is turned by it is the one
// that would have been taken at each step, to the bit, also where late events take the
// session back.
func TestPoseWhenAsked(t *testing.T) {
	const seed = 31
	rng := rand.New(rand.NewPCG(seed, 1))
	town := crossing()
	events := roadEvents(3)
	for i := range 12 {
		events = append(events, sensor.Event{
			Time: at(1.13 + 1.9*float64(i)), Sensor: "compass", Number: uint64(i), Measurement: sensor.HeadingFix{HeadingRad: math.Pi/2 + 0.1*rng.NormFloat64(), SigmaRad: 0.1},
		})
	}
	slices.SortStableFunc(events, sensor.Event.Compare)
	for i := 5; i+5 < len(events); i += 7 { // some come late
		events[i], events[i+4] = events[i+4], events[i]
	}
	run := func(atOnce bool) (*Session, int) {
		s := open(t, Config{Space: town, Names: town, Start: pointStart(town, geo.Point{E: 10, N: 30}, 30), PosteriorS: 1})
		due := 0
		for _, ev := range events {
			if _, err := s.Add(ev); err != nil {
				t.Fatalf("seed %d: %v", seed, err)
			}
			if s.state.poseDue {
				if due++; atOnce {
					s.takePose()
				}
			}
		}
		s.Flush()
		return s, due
	}
	asked, due := run(false)
	atOnce, _ := run(true)
	if due < len(events)/10 {
		t.Fatalf("seed %d: a pose was due %d times", seed, due)
	}
	if asked.Hash() != atOnce.Hash() || asked.state.pose != atOnce.state.pose || !reflect.DeepEqual(asked.state.belief, atOnce.state.belief) {
		t.Errorf("seed %d: posteriors, pose or belief differ", seed)
	}
}
