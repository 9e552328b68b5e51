package sensor

import (
	"slices"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// A step and a comparison with the road in memory that is kept are those in memory of
// their own, whatever was there before, and take none.
func TestKeptMemory(t *testing.T) {
	suite := &Suite{Sensors: []Sensor{
		{Name: "odo", Kind: KindTravel, Nuisances: []Nuisance{{Name: NuisanceOdometerScale, Sigma: 0.02}}},
		{Name: "gyro", Kind: KindTurn, Nuisances: []Nuisance{{Name: NuisanceGyroBias, Sigma: 0.05, DriftPerSqrtS: 1e-3}}},
	}}
	if err := suite.Validate(); err != nil {
		t.Fatal(err)
	}
	suite = suite.For(1)
	all := suite.Quantities(1)
	if len(all) != 4 {
		t.Fatalf("%d quantities, want 4", len(all))
	}
	var frame geo.Frame
	pose := Pose{HeadingVar: NoHeading}
	odo := Event{Time: second, Sensor: "odo", Measurement: Travel{DistanceM: 13, SigmaM: 0.1}}
	gyro := Event{Time: second, Sensor: "gyro", Measurement: Turn{AngleRad: 0.1, SigmaRad: 1e-3}}
	m := Motion{Suite: suite}
	var step filter.Step
	var memory Alignment
	for _, c := range []struct {
		events []Event
		qs     []filter.Quantity
	}{
		{[]Event{odo, gyro}, all},
		{[]Event{odo}, all[:1]}, // no F
		{nil, all},              // a gap
		{[]Event{gyro}, all[:2]},
		{[]Event{odo, gyro}, all},
	} {
		gather := func() {
			m.Reset(0, second)
			for _, ev := range c.events {
				m.Add(ev, 0)
			}
		}
		gather()
		want, err := m.Step(c.qs, 1, frame, pose)
		if err != nil {
			t.Fatal(err)
		}
		if err := m.StepInto(&step, c.qs, 1, frame, pose); err != nil {
			t.Fatal(err)
		}
		if !slices.Equal(step.F, want.F) || (step.F == nil) != (want.F == nil) || !slices.Equal(step.Add, want.Add) || !slices.Equal(step.Q, want.Q) || step.Local != nil {
			t.Errorf("%d events over %d quantities: %+v, want %+v", len(c.events), len(c.qs), step, want)
		}
		l, ok := memory.Road(c.qs, m.TravelledM())
		own, had := RoadAlignment(c.qs, m.TravelledM())
		if ok != had {
			t.Fatalf("a comparison with the road: %v, want %v", ok, had)
		}
		if ok {
			got, noise := l.Noise(), own.Noise()
			if !slices.Equal(got.Parts, noise.Parts) || got.Power != noise.Power || got.FlatWeight != noise.FlatWeight || got.FlatDensity != noise.FlatDensity {
				t.Errorf("a comparison with the road has the noise %+v, want %+v", got, noise)
			}
		}
		if n := testing.AllocsPerRun(20, func() {
			gather()
			_ = m.StepInto(&step, c.qs, 1, frame, pose)
			memory.Road(c.qs, m.TravelledM())
		}); n != 0 {
			t.Errorf("%d events over %d quantities: %v allocations", len(c.events), len(c.qs), n)
		}
	}
}
