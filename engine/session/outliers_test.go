package session

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
)

// TestOutliersRaiseNoAlarms: over hills near the lower end of the plausible heights,
// with as many outliers as the suite says, a sensor alarms no oftener than was asked
// for: where outliers are anywhere among the plausible heights, nearly all of them
// above the ground, and where they reach as far again beyond either end.
func TestOutliersRaiseNoAlarms(t *testing.T) {
	const firstSeed, runs, seconds, everyH, part = 400, 8, 400, 0.02, 0.05
	const lowest, highest = -200.0, 5000.0
	suite, err := sensor.ParseSuite("test", fmt.Appendf(nil, "vehicle: {false_alarm_h: %g, late_window_s: 1, hold_s: 0.5, lowest_m: %g, highest_m: %g}\nsensors:\n"+
		"  - {name: altimeter, kind: clearance, outlier_probability: %g}\n  - {name: log, kind: displacement}\n", everyH, lowest, highest, part))
	if err != nil {
		t.Fatal(err)
	}
	ground := newWorlds().ground
	for name, beyond := range map[string]float64{"among plausible heights": 0, "beyond them, too": highest - lowest} {
		raised, together := map[string]bool{}, 0
		for seed := uint64(firstSeed); seed < firstSeed+runs; seed++ {
			w := watch(open(t, Config{Space: plane.Over(ground, "hills", 20), Suite: suite, Start: pointStart(ground, geo.Point{}, 30), MaxCells: 1500}))
			rng := rand.New(rand.NewPCG(seed, 3))
			p := geo.Point{E: 30 * rng.NormFloat64(), N: 30 * rng.NormFloat64()}
			for i := 1; i <= seconds; i++ {
				sin, cos := math.Sincos(float64(i) / 60)
				v := geo.Point{E: 50 * sin, N: 50 * cos}
				p = p.Add(v).Add(geo.Point{E: 3 * rng.NormFloat64(), N: 3 * rng.NormFloat64()})
				g, k := ground.frame.Convergence(p)
				s, c := math.Sincos(g)
				z, _, _ := ground.height(p)
				z += 3 * rng.NormFloat64()
				if rng.Float64() < part {
					z = lowest - beyond + rng.Float64()*(highest-lowest+2*beyond)
				}
				w.take(t, float64(i),
					sensor.Event{Time: at(float64(i)), Sensor: "altimeter", Measurement: sensor.Clearance{ClearanceM: 500 - z, AltitudeM: 500, SigmaM: 3}},
					sensor.Event{Time: at(float64(i)), Sensor: "log", Measurement: sensor.Displacement{
						Since: at(float64(i - 1)), EastM: (v.E*c + v.N*s) / k, NorthM: (v.N*c - v.E*s) / k, CovM2: [3]float64{9, 0, 9},
					}})
				if w.last == nil { // the first is held for late ones
					continue
				}
				for _, a := range w.last.Alarms {
					if a.Key.Sensor == "altimeter" {
						raised[fmt.Sprint(seed, a.Kind, a.RaisedNS)] = true
					}
				}
			}
			together += w.contra
		}
		want := runs * seconds / (everyH * 3600)
		t.Logf("outliers %s, seeds %d to %d: the sensor alarmed %d times, all together %d, %.1f asked for", name, firstSeed, firstSeed+runs-1, len(raised), together, want)
		if most := want + 3.5*math.Sqrt(want); float64(len(raised)) > most || float64(together) > most {
			t.Errorf("outliers %s: the sensor alarmed %d times, all together %d, %.1f asked for", name, len(raised), together, want)
		}
	}
}
