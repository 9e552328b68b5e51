package session

import (
	"fmt"
	"math/rand/v2"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// randomDrive is a short drive of a few sensors, whose rates, phases and
// kinds the seed chooses. No increment is longer than a second.
func randomDrive(rng *rand.Rand) []sensor.Event {
	v := 2 + 10*rng.Float64()
	c := newCar(crossing(), rng.Uint64(), func(s float64) float64 { return 30 + v*s })
	step := func() float64 { return 0.1 + 0.9*rng.Float64() }
	end := 5 + 4*rng.Float64()
	c.odometer("odo", rng.Float64()/2, step(), end)
	if rng.IntN(2) == 0 {
		c.gyro("gyro", rng.Float64()/2, step(), end)
	}
	if rng.IntN(2) == 0 {
		c.speeds("log", rng.Float64()/2, step(), end)
	}
	for range 1 + rng.IntN(3) {
		c.fixes(fmt.Sprint("gps", rng.IntN(2)), end*rng.Float64(), step(), end, 2+20*rng.Float64())
	}
	for range rng.IntN(3) {
		c.put(end*rng.Float64(), "handbrake", sensor.Standstill{})
	}
	return c.list
}

// holds fails unless a follower has what the session has at the moment:
// every posterior that it keeps, and beside them only those that a late event
// took back and that are not computed again yet.
func (o *outcome) holds(t *testing.T) {
	t.Helper()
	back := map[int64]bool{}
	for _, p := range o.s.superseded {
		back[p.TimeNS] = true
	}
	n := len(o.posteriors)
	for i := len(o.s.recent) - 1; i >= 0; i-- {
		for n > 0 && back[o.posteriors[n-1].TimeNS] {
			n--
		}
		p := o.s.recent[i]
		if n == 0 || o.posteriors[n-1].TimeNS != p.TimeNS || !sameAnswer(o.posteriors[n-1], p) {
			t.Fatalf("the session has a posterior of %d that a follower has not", p.TimeNS)
		}
		n--
	}
}

// TestFollowers proves on random drives, in random orders of arrival within
// the window, that all orders end with the same posteriors, and that one who
// applies releases, revisions and withdrawals as they come has at every moment
// what the session has, and at the end what the hash is over.
func TestFollowers(t *testing.T) {
	revised, withdrawn := 0, 0
	for seed := range uint64(20) {
		rng := rand.New(rand.NewPCG(seed, 21))
		events := randomDrive(rng)
		road := crossing()
		config := Config{Space: road, Names: road, Start: pointStart(road, geo.Point{E: 10, N: 30}, 30), MaxCells: 5000}
		wide, huge := wideSize, hugeSize
		if seed%3 > 0 { // posteriors are passed over now and then
			config.Start = Start{} // 450 cells; located it has 10 to 35
			wide = 10 + rng.IntN(20)
			huge = wide + rng.IntN(100)
		}
		begin := func() *Session {
			s := open(t, config)
			s.wideSize, s.hugeSize = wide, huge
			return s
		}
		want := feed(t, begin(), inOrder(events))
		for order := range 2 {
			o := outcome{s: begin()}
			for _, ev := range shuffled(events, 0.4+0.6*rng.Float64(), rng) {
				ps, err := o.s.Add(ev)
				if err != nil {
					t.Fatalf("seed %d, order %d: %v", seed, order, err)
				}
				o.take(t, ps)
				o.holds(t)
			}
			o.take(t, o.s.Flush())
			o.holds(t)
			sameState(t, want.s, o.s)
			samePosteriors(t, want.posteriors, o.posteriors)
			if o.follow() != want.hash {
				t.Errorf("a follower comes to another hash")
			}
			if t.Failed() {
				t.Fatalf("seed %d, order %d, wide %d, huge %d", seed, order, wide, huge)
			}
			revised, withdrawn = revised+o.revised, withdrawn+o.withdrawn
		}
	}
	t.Logf("%d revised, %d withdrawn", revised, withdrawn)
	if revised < 100 || withdrawn < 5 {
		t.Errorf("%d revised, %d withdrawn: the test asks nothing", revised, withdrawn)
	}
}
