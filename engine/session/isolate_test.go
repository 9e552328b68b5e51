package session

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/monitor"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// fault is what a sensor does from one second to another.
type fault struct {
	from, to float64
	bias     geo.Point
	stuck    bool
}

// threeSensors are the events of a craft on a plane, second by second: what it
// moves by, fixes of 10 m, ranges of 10 m to a beacon and another sensor's to a
// second one; the fixes have a fault.
func threeSensors(seed uint64, f geo.Frame, seconds int, of fault) (events []sensor.Event, track []geo.Point) {
	rng := rand.New(rand.NewPCG(seed, 3))
	beacons := []geo.Point{{E: 3000, N: 500}, {E: -400, N: 2500}}
	p := geo.Point{}
	var held geo.Point
	for i := 1; i <= seconds; i++ {
		s := float64(i)
		sin, cos := math.Sincos(s / 80)
		v := geo.Point{E: 5 * sin, N: 5 * cos}
		p = p.Add(v).Add(geo.Point{E: 0.5 * rng.NormFloat64(), N: 0.5 * rng.NormFloat64()})
		fix := p.Add(geo.Point{E: 10 * rng.NormFloat64(), N: 10 * rng.NormFloat64()})
		if s > of.from && s <= of.to {
			fix = fix.Add(of.bias)
			if of.stuck {
				fix = held
			}
		} else {
			held = fix
		}
		events = append(events, sensor.Event{Time: at(s), Sensor: "gps", Measurement: sensor.Fix{Position: f.Inverse(fix), SigmaM: 10}})
		for j, name := range []string{"east mast", "north mast"} {
			_, k := f.Convergence(p)
			events = append(events, sensor.Event{Time: at(s), Sensor: name, Measurement: sensor.Range{
				Beacon: sensor.Beacon{Position: f.Inverse(beacons[j])}, RangeM: beacons[j].Sub(p).Norm()/k + 10*rng.NormFloat64(), SigmaM: 10,
			}})
		}
		g, k := f.Convergence(p)
		sn, c := math.Sincos(g)
		events = append(events, sensor.Event{Time: at(s), Sensor: "log", Measurement: sensor.Displacement{
			Since: at(s - 1), EastM: (v.E*c + v.N*sn) / k, NorthM: (v.N*c - v.E*sn) / k, CovM2: [3]float64{0.25, 0, 0.25},
		}})
		track = append(track, p)
	}
	return events, track
}

// TestBiasedSensorIsIsolated: fixes that go wrong for 140 s, by a bias or by
// repeating themselves, are isolated within a minute, and no other sensor is; the
// posterior names them, lists what they say as withheld, is not contradicted any
// more and near the truth; and they are readmitted within two minutes after they
// are right again. Fixes without a fault are never isolated.
func TestBiasedSensorIsIsolated(t *testing.T) {
	const from, to, seconds = 60.0, 200.0, 320
	water := sea()
	for name, f := range map[string]fault{
		"a bias":  {from, to, geo.Point{E: 40, N: -30}, false},
		"stuck":   {from, to, geo.Point{}, true},
		"nothing": {},
	} {
		for seed := uint64(60); seed < 61; seed++ {
			events, track := threeSensors(seed, water.Frame(), seconds, f)
			w := watch(open(t, Config{Space: water, Start: pointStart(water, geo.Point{}, 20), MaxCells: 600}))
			for _, ev := range events {
				w.take(t, ev.Time.Seconds(at(0)), ev)
				p := w.last
				if s := ev.Time.Seconds(at(0)); f.to > 0 && s > from+80 && s <= to && ev.Sensor == "log" {
					if p.Status == summary.Contradicted || p.MeanFrame.Sub(track[int(s)-1]).Norm() > 25 {
						t.Errorf("%s, seed %d, %v s: %v, %.0f m off; %+v", name, seed, s, p.Status, p.MeanFrame.Sub(track[int(s)-1]).Norm(), p.Alarms)
						break
					}
					for _, e := range p.Evidence {
						if e.Withheld != (e.Sensor == "gps") {
							t.Errorf("%s, seed %d, %v s: %+v", name, seed, s, e)
						}
					}
				}
			}
			if f.to == 0 {
				if len(w.isolated) > 0 || w.contra > 0 {
					t.Errorf("%s, seed %d: isolated %v, contradicted %d times", name, seed, w.isolated, w.contra)
				}
				continue
			}
			span, found := w.isolated["gps"]
			t.Logf("%s, seed %d: isolated from %v to %v s", name, seed, span[0], span[1])
			if !found || len(w.isolated) != 1 || span[0] > from+60 || span[1] < to || span[1] > to+120 {
				t.Errorf("%s from %v to %v s, seed %d: isolated %v", name, from, to, seed, w.isolated)
			}
		}
	}
}

// TestAlarmsDoNotDependOnArrival: events that come late give the posteriors that
// they give in order, alarms and isolation included.
func TestAlarmsDoNotDependOnArrival(t *testing.T) {
	const seed = 71
	water := sea()
	events, _ := threeSensors(seed, water.Frame(), 260, fault{40, 130, geo.Point{E: 60}, false})
	config := Config{Space: water, Start: pointStart(water, geo.Point{}, 20), MaxCells: 600}
	want := feed(t, open(t, config), inOrder(events))
	got := feed(t, open(t, config), shuffled(events, 1.5, rand.New(rand.NewPCG(seed, 4))))
	samePosteriors(t, want.posteriors, got.posteriors)
	if want.hash != got.hash {
		t.Error("the hashes differ")
	}
	kinds := map[monitor.Kind]bool{}
	for _, p := range want.posteriors {
		for _, a := range p.Alarms {
			kinds[a.Kind] = true
		}
	}
	if !kinds[monitor.Isolated] || !kinds[monitor.Spread] {
		t.Errorf("alarms of the kinds %v alone", kinds)
	}
}
