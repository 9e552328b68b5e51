package session

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// biased is a suite whose gyro has a bias of 100 °/h (sigma) that walks.
func biased(t *testing.T) *sensor.Suite {
	t.Helper()
	s, err := sensor.ParseSuite("biased", []byte(`sensors:
  - name: gyro
    kind: turn
    nuisances:
      - name: gyro_bias_dps
        sigma: 0.0278
        drift_per_sqrt_s: 0.0002
`))
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// stopped is a drive of 10 s, a stop of 20 s and 5 s more, with a gyro that has a bias,
// and turns with what carries the vehicle while it stands. As seconds pass it gives
// what the gyro has said in each second of the stop.
func stopped(road town, hz float64, biasRadPerS, carriedRadPerS float64, seed uint64) (events []sensor.Event, said []float64) {
	const begin, end, last = 10, 30, 35
	c := newCar(road, seed, func(s float64) float64 { return 20 + 5*(math.Min(s, begin)+math.Max(s-end, 0)) })
	rng := rand.New(rand.NewPCG(seed, 3))
	c.odometer("odo", 0, 1/hz, last)
	said = make([]float64, end-begin)
	const noise = 0.3 * math.Pi / 180 / 60 // 0.3 °/√h, rad per √s
	times(0, 1/hz, last, func(from, to float64) {
		sigma := noise * math.Sqrt(to-from)
		turn := c.heading(to) - c.heading(from) + biasRadPerS*(to-from) + sigma*rng.NormFloat64()
		if middle := (from + to) / 2; middle > begin && middle < end {
			turn += carriedRadPerS * (to - from)
			said[int(middle)-begin] += turn
		}
		c.put(to, "gyro", sensor.Turn{Since: at(from), AngleRad: turn, SigmaRad: sigma})
	})
	for s := begin + 1; s <= end; s++ {
		c.put(float64(s), "handbrake", sensor.Standstill{})
	}
	return inOrder(c.list), said
}

func bias(t *testing.T, s *Session) (mean, sigma float64) {
	t.Helper()
	mean, variance, ok := s.state.belief.Moment(filter.GyroBias)
	if !ok {
		t.Fatal("no bias is estimated")
	}
	return mean, math.Sqrt(variance)
}

// TestGyroBiasWhileStanding proves that what a gyro says while the vehicle stands is
// taken for its bias as a Kalman filter of it alone takes it (written here), at 5 and
// 50 Hz and in any order of arrival, and that one who is carried meanwhile learns
// nothing wrong.
func TestGyroBiasWhileStanding(t *testing.T) {
	const true_, seeds = 0.045 * math.Pi / 180, 5
	road := winding(1)
	suite := biased(t)
	run := func(events []sensor.Event) *Session {
		s := open(t, Config{Space: road, Names: road, Suite: suite, Start: pointStart(road, road.charted(20), 5)})
		feed(t, s, events)
		return s
	}
	for seed := range uint64(seeds) {
		for _, hz := range []float64{5, 50} {
			t.Run(fmt.Sprintf("seed=%d/hz=%v", seed, hz), func(t *testing.T) {
				events, said := stopped(road, hz, true_, 0, seed)
				// Before the stop the bias is known by what the road has said.
				var before, after []sensor.Event
				for _, ev := range events {
					if ev.Time <= at(10) {
						before = append(before, ev)
					}
					if ev.Time <= at(30) {
						after = append(after, ev)
					}
				}
				mean, sigma := bias(t, run(before))
				v, drift := sigma*sigma, math.Pow(geo.Rad(0.0002), 2)
				for _, turn := range said {
					v += drift / 2 // mid-second: a random walk in it
					r := math.Pow(geo.Rad(0.3)/60, 2) + math.Pow(0.0002, 2)
					gain := v / (v + r)
					mean += gain * (turn - mean)
					v *= 1 - gain
					v += drift / 2
				}
				got, sd := bias(t, run(after))
				want := math.Sqrt(v)
				t.Logf("bias %.5f ± %.5f °/s, a Kalman filter of it %.5f ± %.5f", geo.Deg(got), geo.Deg(sd), geo.Deg(mean), geo.Deg(want))
				if math.Abs(got-mean) > 0.05*want || math.Abs(sd/want-1) > 0.03 {
					t.Errorf("bias %.5f ± %.5f °/s, a Kalman filter of it has %.5f ± %.5f", geo.Deg(got), geo.Deg(sd), geo.Deg(mean), geo.Deg(want))
				}
				if math.Abs(got-true_) > 4*sd {
					t.Errorf("bias %.5f ± %.5f °/s, true is %.5f", geo.Deg(got), geo.Deg(sd), geo.Deg(true_))
				}
			})
		}
	}
	events, _ := stopped(road, 10, true_, geo.Rad(1.5), 9)
	got, sd := bias(t, run(events))
	if math.Abs(got-true_) > 4*sd {
		t.Errorf("carried by a ferry that turns by 1.5 °/s: bias %.5f ± %.5f °/s, true is %.5f", geo.Deg(got), geo.Deg(sd), geo.Deg(true_))
	}
	// The handbrake is heard 0.7 s late.
	events, _ = stopped(road, 10, true_, 0, 9)
	late := make([]sensor.Event, 0, len(events))
	var held []sensor.Event
	for _, ev := range events {
		for len(held) > 0 && ev.Time > held[0].Time+sensor.Time(7e8) {
			late, held = append(late, held[0]), held[1:]
		}
		if ev.Sensor == "handbrake" {
			held = append(held, ev)
			continue
		}
		late = append(late, ev)
	}
	var last [2]*summary.Posterior
	for i, es := range [][]sensor.Event{events, append(late, held...)} {
		last[i] = run(es).Latest()
	}
	if last[0].TimeNS != last[1].TimeNS || last[0].MeanFrame != last[1].MeanFrame || last[0].LogEvidence != last[1].LogEvidence {
		t.Errorf("a handbrake that is heard late: %+v, in time %+v", last[1].MeanFrame, last[0].MeanFrame)
	}
}
