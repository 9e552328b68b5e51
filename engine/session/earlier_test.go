package session

import (
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// TestEarlier: asked in the middle of a drive, what a session knows of some seconds
// ago is to the bit what looking back over all that it has computed says of that time
// (which is held against sums over all paths), however late its measurements came;
// so does a session that was made of its checkpoint; and the session that was asked ends as one
// that was not.
func TestEarlier(t *testing.T) {
	sail := sensor.Default(2)
	sail.Vehicle.LookBackS = 6
	drive := onRoads()
	drive.Vehicle.LookBackS = 6
	for _, c := range []struct {
		name   string
		config Config
		events []sensor.Event
	}{
		{"roads", Config{Space: crossing(), Names: crossing(), Suite: drive, Start: pointStart(crossing(), geo.Point{E: 10, N: 30}, 25)}, roadEvents(5)},
		{"plane", Config{Space: sea(), Suite: sail, Start: pointStart(sea(), geo.Point{}, 30), MaxCells: 100}, planeEvents(5)},
	} {
		t.Run(c.name, func(t *testing.T) {
			const seed = 11
			order := shuffled(c.events, 0.9, rand.New(rand.NewPCG(seed, 0)))
			plain, asked := open(t, c.config), open(t, c.config)
			compared, later, every := 0, 0, len(order)/6
			for i, ev := range order {
				if _, err := plain.Add(ev); err != nil {
					t.Fatalf("seed %d: %v", seed, err)
				}
				if _, err := asked.Add(ev); err != nil {
					t.Fatal(err)
				}
				if !asked.state.begun || i%every != every-1 {
					continue
				}
				var ago [2]*summary.Posterior
				for k, agoS := range []float64{2, 5.5} {
					e, err := asked.Earlier(agoS)
					if err != nil {
						if asked.state.time.Seconds(at(0)) > agoS+1 {
							t.Errorf("%v s before %v: %v", agoS, asked.state.time, err)
						}
						continue
					}
					if ago[k], err = e.Look(nil); err != nil {
						t.Fatal(err)
					}
					if g := e.Now().Seconds(sensor.Time(ago[k].TimeNS)); g < agoS {
						t.Errorf("asked for %v s ago, it tells of %v s ago", agoS, g)
					}
					again := again(t, c.config, asked, false)
					e, err = again.Earlier(agoS)
					if err != nil {
						t.Fatal(err)
					}
					if got, err := e.Look(nil); err != nil || !reflect.DeepEqual(got, ago[k]) {
						t.Errorf("after a checkpoint %+v, %v", got, err)
					}
				}
				for _, h := range until(t, c.config, order[:i+1], asked.state.time) {
					for _, got := range ago {
						if got == nil || got.TimeNS != h.Smoothed.TimeNS {
							continue
						}
						compared++
						if !reflect.DeepEqual(got, h.Smoothed) {
							t.Errorf("of %d at %d: mean %v, want %v", got.TimeNS, asked.state.time, got.MeanFrame, h.Smoothed.MeanFrame)
						}
						if got.MeanFrame != h.Filtered.MeanFrame {
							later++
						}
					}
				}
			}
			if compared < 5 || later < compared/2 {
				t.Errorf("%d compared, of which later measurements changed %d", compared, later)
			}
			if n := len(asked.snaps); n > 4+mostEarlier {
				t.Errorf("%d snapshots are held", n)
			}
			plain.Flush()
			asked.Flush()
			if plain.Hash() != asked.Hash() {
				t.Error("the session was changed by asking")
			}
		})
	}
}

// until looks back over the part of a drive that a session has computed: motion that was
// measured beyond it counts for the part before.
func until(t *testing.T, c Config, events []sensor.Event, now sensor.Time) (out []Hindsight) {
	t.Helper()
	l, err := newLooker(c, HindsightOptions{Give: func(h Hindsight) error {
		out = append(out, h)
		return nil
	}})
	if err != nil {
		t.Fatal(err)
	}
	for _, ev := range inOrder(events) {
		l.s.log.insert(len(l.s.log.events), ev, l.s.suite)
	}
	l.s.begin()
	l.s.until = now
	if _, err := l.stretch(l.first(), l.s.horizon(), nil, true); err != nil {
		t.Fatal(err)
	}
	return out
}

// TestEarlierRefuses: what cannot be told is said, and why.
func TestEarlierRefuses(t *testing.T) {
	c := Config{Space: sea(), Start: pointStart(sea(), geo.Point{}, 30), MaxCells: 100}
	fix := func(k int) sensor.Event {
		return sensor.Event{Time: at(float64(k)), Sensor: "fix", Number: uint64(k), Measurement: sensor.Fix{Position: sea().Frame().Inverse(geo.Point{}), SigmaM: 30}}
	}
	s := open(t, c)
	refused := func(agoS float64, why string) {
		t.Helper()
		if _, err := s.Earlier(agoS); err == nil || !strings.Contains(err.Error(), why) {
			t.Errorf("%v s ago: %v, want %q", agoS, err, why)
		}
	}
	refused(1, "no posterior yet")
	refused(0, "more than 0")
	refused(2.1, "look_back_s, 2 s")
	for k := range 3 {
		if _, err := s.Add(fix(k)); err != nil {
			t.Fatal(err)
		}
	}
	refused(1.5, "nothing that is held")
	s.Flush()
	refused(1, "the drive has ended")
	grid := &sensor.Suite{Vehicle: sensor.Vehicle{VelocityDriftMPSPerSqrtS: 1, VelocityGrid: true}}
	s = open(t, Config{Space: sea(), Suite: grid, Start: pointStart(sea(), geo.Point{}, 30), MaxCells: 100})
	refused(1, "velocity_grid")
}
