package session

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter/filtertest"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// bends is a road of straights and bends of a radius.
func bends(cellM, radiusM float64) town {
	var arcs []filtertest.Arc
	for i := range 12 {
		arcs = append(arcs, filtertest.Arc{LengthM: 25}, filtertest.Arc{LengthM: 1.2 * radiusM, Curvature: []float64{1, -1}[i%2] / radiusM})
	}
	return town{filtertest.NewRoad(cellM, []filtertest.Course{{HeadingRad: 0.2, Arcs: arcs}}, [][]filtertest.Link{nil}), []string{"Winding Lane"}}
}

const ratedS = 40

// rated is a drive along a road at a steady speed for ratedS seconds, with the same motion
// told at another rate: an increment at 1 Hz is the sum of those at 100 Hz, and
// its variance the sum of theirs. A compass with a slow error speaks at the same
// times, and there is a fix every 5 s.
func rated(road town, hz int, mps float64, seed uint64) []sensor.Event {
	const finest, seconds = 100, ratedS
	c := newCar(road, seed, func(s float64) float64 { return 20 + mps*s })
	c.fixes("gps", 0, 5, seconds, 4)
	rng := rand.New(rand.NewPCG(seed, 9))
	share := finest / hz
	d, turn := 0.0, 0.0
	for i := 1; i <= finest*seconds; i++ {
		from, to := float64(i-1)/finest, float64(i)/finest
		d += 1.01*(c.along(to)-c.along(from)) + odoSigma*math.Sqrt(mps/finest)*rng.NormFloat64() // 1 % too long
		turn += c.heading(to) - c.heading(from) + gyroSigma*math.Sqrt(1./finest)*rng.NormFloat64()
		if i%share != 0 {
			continue
		}
		since, span := at(float64(i-share)/finest), float64(share)/finest
		c.put(to, "odo", sensor.Travel{Since: since, DistanceM: d, SigmaM: odoSigma * math.Sqrt(mps*span)})
		c.put(to, "gyro", sensor.Turn{Since: since, AngleRad: turn, SigmaRad: gyroSigma * math.Sqrt(span)})
		c.put(to, "compass", sensor.HeadingFix{HeadingRad: c.heading(to) + 0.05*math.Sin(to/8), SigmaRad: 0.1})
		d, turn = 0, 0
	}
	return inOrder(c.list)
}

// TestRatesAgree proves the design's invariant for sessions with the default
// suite: one drive told at 1, 10 and 100 Hz, compass included, with cells of half
// a metre and a metre and steps up to 2 m, has means within 0.1 sigma and
// variances within 5 % at every time. In bends of 20 m radius that holds for steps
// below a metre; with steps of 2 m, which take the heading of the road at their
// ends alone, variances were up to 6 % apart.
func TestRatesAgree(t *testing.T) {
	const seed = 1
	for _, c := range []struct {
		name string
		road func(cellM float64) town
		mps  float64
		hz   []int // the first with cells of half a metre is what the others are compared with
	}{
		{"gentle bends", winding, 2, []int{100, 10, 1}},
		{"bends of 30 m", func(cellM float64) town { return bends(cellM, 30) }, 2, []int{100, 1}},
		{"bends of 20 m", func(cellM float64) town { return bends(cellM, 20) }, 6, []int{100, 10}},
	} {
		var want map[int64]*summary.Posterior
		for _, cellM := range []float64{0.5, 1} {
			road := c.road(cellM)
			for _, hz := range c.hz {
				s := open(t, Config{Space: road, Names: road, Start: pointStart(road, road.charted(20), 5)})
				byTime := map[int64]*summary.Posterior{}
				for _, p := range feed(t, s, rated(road, hz, c.mps, seed)).posteriors {
					byTime[p.TimeNS] = p
				}
				if want == nil {
					want = byTime
					continue
				}
				t.Run(fmt.Sprintf("%s/mps=%v/cells=%v/hz=%d", c.name, c.mps, cellM, hz), func(t *testing.T) {
					var most, far float64
					for sec := 1; sec <= ratedS; sec++ {
						p, q := want[int64(at(float64(sec)))], byTime[int64(at(float64(sec)))]
						v0 := alongVar(road, p)
						m := q.MeanFrame.Sub(p.MeanFrame).Norm() / math.Sqrt(v0)
						v := math.Abs(alongVar(road, q)/v0 - 1)
						most, far = math.Max(most, v), math.Max(far, m)
						if m > 0.1 || v > 0.05 {
							t.Errorf("seed %d, at %d s: the mean is %.3f sigma and the variance %.1f %% away from that with half a metre at 100 Hz", seed, sec, m, 100*v)
						}
					}
					t.Logf("means within %.3f sigma, variances within %.1f %%", far, 100*most)
				})
			}
		}
	}
}
