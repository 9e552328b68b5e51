package filter_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
)

// TestAmongLines compares the mean of exp(-D²/2L - δ²/2H) over vehicles anywhere
// around a street, facing any way, with its closed form: by a million draws, four
// standard errors.
func TestAmongLines(t *testing.T) {
	const seed, n, lengthM, sideM = 5, 1_000_000, 2000.0, 400.0
	e := filter.Entry{LateralVar: 25, HeadingVar: 0.07}
	rng := rand.New(rand.NewPCG(seed, 0))
	var sum, squares float64
	for range n {
		d, delta := (rng.Float64()-0.5)*sideM, (rng.Float64()-0.5)*2*math.Pi
		v := math.Exp(-d*d/(2*e.LateralVar) - delta*delta/(2*e.HeadingVar))
		sum, squares = sum+v, squares+v*v
	}
	mean := sum / n
	sigma := math.Sqrt((squares/n - mean*mean) / n)
	if got := e.AmongLines(lengthM, lengthM*sideM); math.Abs(got-mean) > 4*sigma {
		t.Errorf("seed %d: %v, drawn %v ± %v", seed, got, mean, sigma)
	}
}

// TestEnterAstray: of what is off the lines and too wide to be followed onto them a
// part goes astray at the rate at which it comes onto some line, and what is narrow
// still enters where it is; the shares keep their sum.
func TestEnterAstray(t *testing.T) {
	street := filtertest.NewRoad(1, []filtertest.Course{{Arcs: []filtertest.Arc{{LengthM: 2000}}}}, [][]filtertest.Link{nil})
	qs := []filter.Quantity{{Name: filter.Along}, {Name: filter.Heading, Angular: true, PriorVar: 0.01}}
	for _, c := range []struct {
		sigmaM float64
		astray bool
	}{{30, false}, {300, true}} {
		b, err := filter.Seed(street, filter.Anywhere{}, qs, 1000)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		l, ok := filter.NewLoose(b.Quantities)
		if !ok {
			t.Fatal("no heading")
		}
		one := filter.Loose{Quantities: l.Quantities}
		one.Key, one.Mass = []uint64{0}, []float64{1}
		at := geo.Point{N: 1000}
		one.Mean = []float64{at.E, at.N, 0}
		v := c.sigmaM * c.sigmaM
		one.Cov = []float64{v, 0, v, 0, 0, 0.01}
		l.Mix(&one, 1, 1, &w)
		e := filter.Entry{Hazard: 0.25, LateralVar: 25, HeadingVar: 0.07, Among: 0.02}
		const on, off = 0.3, 0.6
		onAfter, offAfter, astray := l.Enter(b, street, e, on, off, &w)
		if math.Abs(onAfter+offAfter+astray-(on+off)) > 1e-12 {
			t.Errorf("sigma %v m: on %v, off %v, astray %v", c.sigmaM, onAfter, offAfter, astray)
		}
		want := 0.0
		if c.astray {
			want = off * (1 - math.Exp(-e.Hazard*e.Among))
		}
		if math.Abs(astray-want) > 1e-12 || c.astray == (onAfter > on) {
			t.Errorf("sigma %v m: astray %v, want %v; on the street %v", c.sigmaM, astray, want, onAfter)
		}
	}
}
