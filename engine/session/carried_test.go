package session

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// folds are ground of our own, 12 km wide: waves of some hundred metres that do not
// come again within it, with no error.
type folds struct{ frame geo.Frame }

func (f folds) Frame() geo.Frame { return f.frame }

func (f folds) Bounds() geo.Box {
	return geo.Box{Min: geo.Point{E: -6e3, N: -6e3}, Max: geo.Point{E: 6e3, N: 6e3}}
}

func (f folds) height(p geo.Point) (z, gE, gN float64) {
	for i, w := range [][3]float64{{40, 131, 217}, {30, -89, 173}, {25, 311, -79}, {35, 467, 523}, {20, -241, -67}, {60, 1913, -1471}} {
		s, c := math.Sincos(p.E/w[1] + p.N/w[2] + float64(i))
		z, gE, gN = z+w[0]*s, gE+w[0]/w[1]*c, gN+w[0]/w[2]*c
	}
	return z, gE, gN
}

func (f folds) Sample(dst geo.Heights, eastM, northM []float64) {
	sampled(dst, eastM, northM, f.height)
}

// carried is a flight over folds: a minute and a half on its way, then, if it stands, four
// minutes on the spot, at the end of which it is 3 km away without a word; and on. It
// returns where it was at each second, too.
func carried(seed uint64, f folds, stands bool, offsetM float64) (events []sensor.Event, truth []geo.Point) {
	const wayS, standS, onS = 90, 240, 240
	rng := rand.New(rand.NewPCG(seed, 1))
	p := geo.Point{E: 30 * rng.NormFloat64(), N: 30 * rng.NormFloat64()}
	truth = append(truth, p)
	for i := 1; i <= wayS+standS+onS; i++ {
		sin, cos := math.Sincos(float64(i) / 40)
		v := geo.Point{E: 25 * sin, N: 25 * cos}
		sigma := 1.0
		if i > wayS && i <= wayS+standS {
			v, sigma = geo.Point{}, 0.01
		}
		if i == wayS+standS {
			p = p.Add(geo.Point{E: -2200, N: 2000})
		}
		if !stands && sigma != 1 {
			truth = append(truth, p)
			continue
		}
		p = p.Add(v).Add(geo.Point{E: sigma * rng.NormFloat64(), N: sigma * rng.NormFloat64()})
		truth = append(truth, p)
		s := float64(i)
		if !stands && i > wayS {
			s -= standS
		}
		g, k := f.frame.Convergence(p)
		sg, cg := math.Sincos(g)
		z, _, _ := f.height(p)
		if sigma == 1 || i%10 == 0 {
			events = append(events, sensor.Event{Time: at(s), Sensor: "altimeter", Measurement: sensor.Clearance{
				ClearanceM: 900 + offsetM - z + 3*rng.NormFloat64(), AltitudeM: 900, SigmaM: 3,
			}})
		}
		events = append(events, sensor.Event{Time: at(s), Sensor: "log", Measurement: sensor.Displacement{
			Since: at(s - 1), EastM: (v.E*cg + v.N*sg) / k, NorthM: (v.N*cg - v.E*sg) / k, CovM2: [3]float64{sigma * sigma, 0, sigma * sigma},
		}})
	}
	return events, truth
}

// TestCarriedAwayOverHeights: where the suite says how often, being lost is a hypothesis
// over heights, too: of a craft that was carried away in silence the alarm is raised, the
// map is searched, and it is located where it is, whatever the order in which
// events come and whoever searches; with an offset estimated beside the position, and
// without. While it is not lost, nothing is said. Without rates nothing is kept of it.
func TestCarriedAwayOverHeights(t *testing.T) {
	ground := folds{geo.NewFrame(seaOrigin)}
	for name, c := range map[string]struct {
		suite   string
		stands  bool
		offsetM float64
	}{
		"points, after a stop": {"", true, 0},
		"points, in motion":    {"", false, 0},
		"offset, in motion":    {", nuisances: [{name: altimeter_offset_m, sigma: 5, drift_per_sqrt_s: 0.01}]", false, 4},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			suite := func(rates string) *sensor.Suite {
				s, err := sensor.ParseSuite("test", []byte("vehicle: {late_window_s: 3, hold_s: 0.5, alert_limit_m: 60"+rates+"}\nsensors:\n"+
					"  - {name: altimeter, kind: clearance"+c.suite+"}\n  - {name: log, kind: displacement}\n"))
				if err != nil {
					t.Fatal(err)
				}
				return s
			}
			const seed = 5
			events, truth := carried(seed, ground, c.stands, c.offsetM)
			config := Config{Space: plane.Over(ground, "folds", 20), Suite: suite(", lost_per_s: 1.0e-9, moved_per_s: 1.0e-5"), Start: pointStart(ground, geo.Point{}, 30), MaxCells: 4_000}
			o := feed(t, open(t, config), events)
			carriedS := 90.0
			if c.stands {
				carriedS = 329
			}
			alarmS, locatedS := math.Inf(1), math.Inf(1)
			for _, p := range o.posteriors {
				s := float64(p.TimeNS-int64(at(0))) / 1e9
				was := truth[int(s)]
				if !c.stands && s > 90 {
					was = truth[int(s)+240]
				}
				off := ground.frame.Forward(p.Mean).Sub(was).Norm()
				switch {
				case s <= carriedS:
					if p.LostAlarm || p.Lost > 0.01 || s > 30 && p.Status != summary.Located {
						t.Errorf("seed %d: after %v s: %v, lost %v", seed, s, p.Status, p.Lost)
					}
				case p.LostAlarm:
					alarmS = math.Min(alarmS, s)
					if p.Protection.Bounded && p.Lost > 1e-5 {
						t.Errorf("seed %d: after %v s: protection %+v at a probability of %v of being lost", seed, s, p.Protection, p.Lost)
					}
				case !math.IsInf(alarmS, 1) && p.Status == summary.Located && off < 3*p.Radius99M:
					locatedS = math.Min(locatedS, s)
				}
				if s > locatedS && off > 3*p.Radius99M {
					t.Errorf("seed %d: after %v s %v m off, 99 %% radius %v m", seed, s, off, p.Radius99M)
				}
			}
			t.Logf("seed %d: carried away after %v s, alarm after %v s, located after %v s", seed, carriedS, alarmS, locatedS)
			if alarmS > carriedS+30 || locatedS > carriedS+150 || locatedS < alarmS {
				t.Errorf("seed %d: carried away after %v s, alarm after %v s, located after %v s", seed, carriedS, alarmS, locatedS)
			}
			if !c.stands {
				return
			}
			late := append([]sensor.Event(nil), events...)
			for i := 0; i+1 < len(late); i += 5 {
				late[i], late[i+1] = late[i+1], late[i]
			}
			if again := feed(t, open(t, config), late); again.hash != o.hash {
				t.Error("another order of arrival gives another hash")
			}
			elsewhere := config
			elsewhere.Begin = func(work func()) (wait func()) {
				done := make(chan struct{})
				go func() { work(); close(done) }()
				return func() { <-done }
			}
			if again := feed(t, open(t, elsewhere), events); again.hash != o.hash {
				t.Error("a search in another goroutine gives another hash")
			}
			without := config
			without.Suite = suite("")
			first := events[:80]
			a, b := feed(t, open(t, config), first).s, feed(t, open(t, without), first).s
			if b.state.aside.lost != 0 || b.nowhere != nil || a.state.aside.lost == 0 {
				t.Errorf("lost: %v without rates, %v with", b.state.aside.lost, a.state.aside.lost)
			}
			var p, q filter.Cloud
			a.ReadBelief(&p)
			b.ReadBelief(&q)
			for i := range q.Mass {
				if p.Mass[i] != q.Mass[i] || p.North[i] != q.North[i] {
					t.Fatalf("entry %d differs", i)
				}
			}
		})
	}
}
