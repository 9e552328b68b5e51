package filter_test

import (
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
)

// TestNothingLeft moves a belief over the end of its only line: it stays, counted
// as gone, or at the end, with all of it followed.
func TestNothingLeft(t *testing.T) {
	road := filtertest.NewRoad(1, []filtertest.Course{{Arcs: []filtertest.Arc{{LengthM: 100}}}}, [][]filtertest.Link{nil})
	qs := []filter.Quantity{{Name: filter.Along}, {Name: filter.Heading, Angular: true, PriorVar: 0.01}}
	for _, follow := range []bool{false, true} {
		b, err := filter.Seed(road, filter.AtPoint{Point: geo.Point{N: 50}, SigmaM: 2}, qs, 1000)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		w.Depart(follow)
		step := filter.NewStep(2)
		step.Add[0] = 200
		filter.Predict(b, road, step, &w)
		loose, ok := filter.NewLoose(qs)
		if !ok {
			t.Fatal("no room for what is loose")
		}
		share := b.Departed(&loose, road, 4, 8, &w)
		sum := 0.0
		for _, m := range b.Mass {
			sum += m
		}
		if sum < 1-1e-9 || sum > 1+1e-9 {
			t.Errorf("follow %v: a mass of %v", follow, sum)
		}
		switch at, _, _ := b.Moments(road, &w); {
		case !follow && (b.LeftMap < 1-1e-9 || share != 0 || loose.Len() != 0):
			t.Errorf("left %v, followed %v, mass %v", b.LeftMap, share, at)
		case follow && (b.LeftMap != 0 || share < 1-1e-9 || loose.Len() == 0):
			t.Errorf("left %v, followed %v", b.LeftMap, share)
		}
		if follow {
			if at, _, _ := loose.Heaviest(); at.Sub(geo.Point{N: 250}).Norm() > 5 {
				t.Errorf("it is followed at %v", at)
			}
		}
	}
}
