package session

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// rated is a drive along the winding road at a steady speed for 60 s, with the
// same motion told at another rate: an increment at 1 Hz is the sum of those at
// 100 Hz, and its variance the sum of theirs. There is a fix every 5 s.
func rated(hz int, mps float64, seed uint64) []sensor.Event {
	const finest, seconds = 100, 60
	c := newCar(winding(1), seed, func(s float64) float64 { return 20 + mps*s })
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
		d, turn = 0, 0
	}
	return inOrder(c.list)
}

// TestRatesAgree proves the design's invariant for sessions: one drive told at
// 1, 10 and 100 Hz, steps up to 2 m, gives means within 0.1 sigma and variances
// within 5 %: at every time with cells of half a metre, and with cells of 1 m,
// where splitting wide Gaussians at their edges is coarser, in the mean over
// the drive (root mean square; single times were up to 5.8 % apart in 12
// drives).
func TestRatesAgree(t *testing.T) {
	// The variance of cut corners is left out: the part of a turn that counts
	// for it is what exceeds the gyro's noise in one step, and that depends on
	// the rate.
	suite := &sensor.Suite{Vehicle: sensor.Vehicle{CornerSigmaM: 1e-6}}
	for _, c := range []struct {
		cellM, mps float64
		hz         []int
		most       float64 // at single times, of the variance
	}{
		{0.5, 2, []int{100, 10, 1}, 0.05}, // 2 m a step at 1 Hz
		{1, 2, []int{100, 10, 1}, 1},
		{1, 6, []int{100, 10}, 1},
	} {
		road := winding(c.cellM)
		for seed := range uint64(2) {
			t.Run(fmt.Sprintf("cells=%v/mps=%v/seed=%d", c.cellM, c.mps, seed), func(t *testing.T) {
				var runs []map[int64]*summary.Posterior
				for _, hz := range c.hz {
					s := open(t, Config{Suite: suite, Space: road, Names: road, Start: pointStart(road, road.charted(20), 5)})
					byTime := map[int64]*summary.Posterior{}
					for _, p := range feed(t, s, rated(hz, c.mps, seed)).posteriors {
						byTime[p.TimeNS] = p
					}
					runs = append(runs, byTime)
				}
				for i, run := range runs[1:] {
					hz, sum := c.hz[i+1], 0.0
					for sec := 1; sec <= 60; sec++ {
						ns := int64(at(float64(sec)))
						p, q := runs[0][ns], run[ns]
						v0 := alongVar(road, p)
						m := q.MeanFrame.Sub(p.MeanFrame).Norm() / math.Sqrt(v0)
						v := alongVar(road, q)/v0 - 1
						sum += v * v
						if m > 0.1 || math.Abs(v) > c.most {
							t.Errorf("%d Hz at %d s: the mean is %.3f sigma and the variance %.1f %% away from that at 100 Hz", hz, sec, m, 100*v)
						}
					}
					if rms := math.Sqrt(sum / 60); rms > 0.05 {
						t.Errorf("%d Hz: the variances are %.1f %% away from those at 100 Hz", hz, 100*rms)
					}
				}
			})
		}
	}
}
