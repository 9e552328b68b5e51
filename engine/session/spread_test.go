package session

import (
	"math"
	"testing"

	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// city is a square of n×n crossings, block metres apart, with two-way streets
// and no turning round but at its corners; chart 0 leads north from the middle.
func city(n int, block float64) town {
	type node struct{ x, y int }
	type edge struct{ from, to node }
	var edges []edge
	mid := node{n / 2, n / 2}
	add := func(a, b node) {
		if b.x >= 0 && b.y >= 0 && b.x < n && b.y < n {
			edges = append(edges, edge{a, b})
		}
	}
	add(mid, node{mid.x, mid.y + 1})
	for x := range n {
		for y := range n {
			for _, d := range [][2]int{{0, 1}, {1, 0}, {0, -1}, {-1, 0}} {
				if a := (node{x, y}); a != mid || d != [2]int{0, 1} {
					add(a, node{x + d[0], y + d[1]})
				}
			}
		}
	}
	out := map[node][]int32{}
	var courses []filtertest.Course
	var names []string
	for i, e := range edges {
		out[e.from] = append(out[e.from], int32(i))
		courses = append(courses, filtertest.Course{
			Start:      geo.Point{E: block * float64(e.from.x-mid.x), N: block * float64(e.from.y-mid.y)},
			HeadingRad: math.Atan2(float64(e.to.x-e.from.x), float64(e.to.y-e.from.y)),
			Arcs:       []filtertest.Arc{{LengthM: block}},
		})
		names = append(names, "Block Street")
	}
	next := make([][]filtertest.Link, len(edges))
	for i, e := range edges {
		var to []int32
		for _, j := range out[e.to] {
			if edges[j].to != e.from {
				to = append(to, j)
			}
		}
		if len(to) == 0 {
			to = out[e.to]
		}
		for _, j := range to {
			next[i] = append(next[i], filtertest.Link{To: j, Weight: 1 / float64(len(to))})
		}
	}
	return town{filtertest.NewRoad(1, courses, next), names}
}

// TestSilenceInACity: after a minute without any motion a vehicle may be
// anywhere within kilometres of streets. The work of one move is bounded; what was
// not followed is counted as restarted, and the protection radius says so; the
// belief is no narrower than following would leave it; and a fix finds it again.
func TestSilenceInACity(t *testing.T) {
	streets := city(31, 100)
	start := geo.Point{N: 20}
	run := func(seconds, limit float64) (*Session, *summary.Posterior) {
		s := open(t, Config{Space: streets, Names: streets, Start: pointStart(streets, start, 5)})
		s.followLimit = limit
		o := feed(t, s, []sensor.Event{everywhere(streets.Frame(), 0, 0), everywhere(streets.Frame(), seconds, 1)})
		return s, o.posteriors[1]
	}
	const limit = 1e5
	spread := func(p *summary.Posterior) float64 { return math.Sqrt(p.CovFrame.EE + p.CovFrame.NN) }

	s, p := run(1, limit)
	if p.Counts.Restart != 0 {
		t.Errorf("after 1 s: %+v, a spread of %.0f m, %g pieces", p.Counts, spread(p), s.followed)
	}
	_, followed := run(5, math.Inf(1))
	s, p = run(5, limit)
	if p.Counts.Restart != 1 || p.Protection.Bounded || p.Protection.Reason != summary.ReasonLostMass {
		t.Errorf("after 5 s: %+v, %+v", p.Counts, p.Protection)
	}
	if spread(p) < spread(followed) || spread(p) > 2.5*spread(followed) {
		t.Errorf("after 5 s a spread of %.0f m, followed over the streets %.0f m", spread(p), spread(followed))
	}
	if s.followed > limit {
		t.Errorf("%g pieces were made", s.followed)
	}
	s, p = run(60, limit)
	if s.followed > limit || s.Size() > 60_000 || spread(p) < 700 || p.Status == summary.Located {
		t.Errorf("after 60 s: %g pieces, %d Gaussians, a spread of %.0f m, %v", s.followed, s.Size(), spread(p), p.Status)
	}
	// A while of silence costs no more than each of its moves.
	for i := range 5 {
		feed(t, s, []sensor.Event{everywhere(streets.Frame(), 61+float64(i), 2+i)})
		if s.followed > limit || s.Size() > 60_000 {
			t.Fatalf("%g pieces, %d Gaussians", s.followed, s.Size())
		}
	}
	at1 := geo.Point{E: 500, N: -640}
	o := feed(t, s, []sensor.Event{{Time: at(66), Sensor: "gps", Measurement: sensor.Fix{Position: streets.Frame().Inverse(at1), SigmaM: 4}}})
	if back := o.posteriors[0]; back.MeanFrame.Sub(at1).Norm() > 10 || spread(back) > 40 {
		t.Errorf("a fix at %v: %v ± %.1f", at1, back.MeanFrame, spread(back))
	}
}

// TestSpreadBeyondTheMap: an increment whose length or spread no road can hold
// leaves the belief all over the map, restarted and not clamped.
func TestSpreadBeyondTheMap(t *testing.T) {
	streets := city(9, 100)
	for name, m := range map[string]sensor.Measurement{
		"travel":       sensor.Travel{Since: at(0), DistanceM: 3e5, SigmaM: 10},
		"spread":       sensor.Travel{Since: at(0), DistanceM: 10, SigmaM: 2e5},
		"displacement": sensor.Displacement{Since: at(0), NorthM: 3e5, CovM2: [3]float64{100, 0, 100}},
	} {
		t.Run(name, func(t *testing.T) {
			s := open(t, Config{Space: streets, Names: streets, Suite: onRoads(), Start: pointStart(streets, geo.Point{N: 20}, 5)})
			s.followLimit = 1e5
			o := feed(t, s, []sensor.Event{{Time: at(3600), Sensor: "odo", Measurement: m}})
			p := o.posteriors[0]
			// Uniform over nine streets each way, 800 m long: along a street a
			// variance of 800²/12, across 100²·(9²-1)/12, so 346 m in all.
			if got := math.Sqrt(p.CovFrame.EE + p.CovFrame.NN); p.Counts.Restart != 1 || math.Abs(got-346) > 4 || p.MeanFrame.Norm() > 4 {
				t.Errorf("%+v, mean %v, a spread of %.0f m", p.Counts, p.MeanFrame, got)
			}
		})
	}
}

// TestFarDisplacement: a displacement of 300 m over ground in one increment
// follows the streets as ten of 30 m do: along the street that goes on north,
// past the one that turns off.
func TestFarDisplacement(t *testing.T) {
	r := filtertest.NewRoad(1, []filtertest.Course{
		{Arcs: []filtertest.Arc{{LengthM: 120}}},
		{Start: geo.Point{N: 120}, Arcs: []filtertest.Arc{{LengthM: 400}}},
		{Start: geo.Point{N: 120}, HeadingRad: math.Pi / 2, Arcs: []filtertest.Arc{{LengthM: 400}}},
	}, [][]filtertest.Link{{{To: 1, Weight: 0.5}, {To: 2, Weight: 0.5}}, nil, nil})
	road := town{r, []string{"Long Street", "Long Street", "Side Street"}}
	run := func(n int) *summary.Posterior {
		s := open(t, Config{Space: road, Names: road, Start: pointStart(road, geo.Point{N: 50}, 3)})
		var events []sensor.Event
		for i := range n {
			v := 4.0 / float64(n)
			events = append(events, sensor.Event{
				Time: at(30 * float64(i+1) / float64(n)), Sensor: "ins", Number: uint64(i),
				Measurement: sensor.Displacement{Since: at(30 * float64(i) / float64(n)), NorthM: 300 / float64(n), CovM2: [3]float64{v, 0, v}},
			})
		}
		feed(t, s, events)
		return s.Latest()
	}
	one, ten := run(1), run(10)
	if one.Edges[0].Chart != 1 || math.Abs(one.MeanFrame.N-350) > 2 || math.Abs(one.MeanFrame.E) > 1 {
		t.Errorf("one increment ends at %v on chart %d", one.MeanFrame, one.Edges[0].Chart)
	}
	sigma := math.Sqrt(ten.CovFrame.NN)
	if d := one.MeanFrame.Sub(ten.MeanFrame).Norm(); d > 0.1*sigma || math.Abs(one.CovFrame.NN/ten.CovFrame.NN-1) > 0.05 {
		t.Errorf("one increment ends at %v, covariance %+v; ten at %v, %+v", one.MeanFrame, one.CovFrame, ten.MeanFrame, ten.CovFrame)
	}
}

// TestWideWithoutMotion: where a wide belief is spread at each of many short steps,
// it is taken to cells of a third of what each spreads by, and what it says of the
// place is what the finer cells say.
func TestWideWithoutMotion(t *testing.T) {
	streets := city(11, 100)
	run := func(manyPieces float64) (*Session, *summary.Posterior) {
		s := open(t, Config{Space: streets, Names: streets, Suite: onRoads(), Start: pointStart(streets, geo.Point{N: 20}, 25)})
		s.manyPieces = manyPieces
		var events []sensor.Event
		for i := range 6 {
			events = append(events, everywhere(streets.Frame(), 0.2*float64(i), i))
		}
		feed(t, s, events)
		return s, s.Latest()
	}
	fine, want := run(math.Inf(1))
	coarse, got := run(3e3)
	if 2*coarse.Size() > fine.Size() {
		t.Errorf("%d Gaussians, of %d at the finer cells", coarse.Size(), fine.Size())
	}
	spread := func(p *summary.Posterior) float64 { return math.Sqrt(p.CovFrame.EE + p.CovFrame.NN) }
	if d := got.MeanFrame.Sub(want.MeanFrame).Norm(); d > 0.01*spread(want) || math.Abs(spread(got)/spread(want)-1) > 0.01 {
		t.Errorf("at %v within %.1f m, with the finer cells at %v within %.1f m", got.MeanFrame, spread(got), want.MeanFrame, spread(want))
	}
	t.Logf("%d of %d Gaussians, cells of %.1f and %.1f m", coarse.Size(), fine.Size(), coarse.CellM(), fine.CellM())
}
