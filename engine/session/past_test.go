package session

import (
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"testing"

	"leadline/engine/sensor"
)

// TestPast: events come out of blocks as searches take them, bit for bit, whatever they are;
// those of a stretch of time alone; what is let go of is old and beyond those to keep;
// and a copy goes on by itself.
func TestPast(t *testing.T) {
	const seed = 21
	rng := rand.New(rand.NewPCG(seed, 1))
	number := func() float64 {
		switch rng.IntN(8) {
		case 0:
			return math.Copysign(0, -1)
		case 1:
			return 5e-324
		case 2:
			return -math.MaxFloat64
		}
		return rng.NormFloat64()
	}
	var p past
	var all []sensor.Event
	now := sensor.Time(1_700_000_000e9)
	for i := range 20_000 {
		now += [...]sensor.Time{0, 0, 1e8, 1e8, sensor.Time(rng.Int64N(1e10))}[rng.IntN(5)]
		ev := sensor.Event{Time: now, Sensor: fmt.Sprint("s", rng.IntN(3)), Number: uint64(i)}
		since := now - [...]sensor.Time{1e8, 1e8, 0, sensor.Time(rng.Int64N(1e9))}[rng.IntN(4)]
		sigma := [...]float64{0.02, 0.02, math.Abs(number())}[rng.IntN(3)]
		switch rng.IntN(5) {
		case 0, 1:
			ev.Measurement = sensor.Travel{Since: since, DistanceM: number(), SigmaM: sigma}
		case 2, 3:
			ev.Measurement = sensor.Turn{Since: since, AngleRad: number(), SigmaRad: sigma}
		default:
			ev.Measurement = sensor.HeadingFix{HeadingRad: number(), SigmaRad: sigma}
		}
		if rng.IntN(50) == 0 { // of too many sensors
			ev.Sensor, ev.Number = fmt.Sprint("t", rng.IntN(200)), rng.Uint64()
		}
		all = append(all, ev)
	}
	given := slices.Clone(all)
	rounded := 0
	for i, ev := range given {
		if all[i] = searched(ev); all[i] != ev {
			rounded++
		}
		if searched(all[i]) != all[i] {
			t.Fatalf("seed %d: %v is rounded twice", seed, ev)
		}
	}
	if rounded < len(all)/3 {
		t.Fatalf("seed %d: of %d events %d are rounded", seed, len(all), rounded)
	}
	for i := 0; i < len(all)/2; {
		n := min(1+rng.IntN(100), len(all)/2-i)
		p.add(given[i : i+n])
		i += n
	}
	q := p.clone()
	p.add(given[len(all)/2:])
	q.add(given[:7])
	if got := p.all(); !reflect.DeepEqual(got, all) || p.n != len(all) {
		t.Fatalf("seed %d: %d events came out otherwise", seed, len(all))
	}
	if got := q.all(); !reflect.DeepEqual(got, append(all[:len(all)/2:len(all)/2], all[:7]...)) {
		t.Fatalf("seed %d: a copy's came out otherwise", seed)
	}
	for range 200 {
		i, j := rng.IntN(len(all)), rng.IntN(len(all))
		from, until := all[min(i, j)].Time, all[max(i, j)].Time
		var want []sensor.Event
		for _, ev := range all {
			if ev.Time > from && ev.Time <= until {
				want = append(want, ev)
			}
		}
		if got := p.between(nil, from, until); !reflect.DeepEqual(got, want) {
			t.Fatalf("seed %d: %d events within %v to %v, want %d", seed, len(got), from, until, len(want))
		}
	}
	const most = 1000
	before := all[len(all)-300].Time
	p.forget(before, most)
	kept := p.all()
	if len(kept) < 300 || len(kept) > most+pastBlockEvents || !reflect.DeepEqual(kept, all[len(all)-len(kept):]) {
		t.Fatalf("seed %d: %d are kept", seed, len(kept))
	}
	p.forget(before, 100)
	if kept := p.all(); len(kept) < 100 || len(kept) > 100+2*pastBlockEvents || !reflect.DeepEqual(kept, all[len(all)-len(kept):]) {
		t.Fatalf("seed %d: of 100 %d are kept", seed, len(kept))
	}
}

// TestPastIsSmall: the increments of an odometer and a gyro at 5 Hz, for the 300 s of a
// search.
func TestPastIsSmall(t *testing.T) {
	var p past
	n, bytes := 0, 0
	for i := range 1500 {
		at := sensor.Time(1_700_000_000e9) + sensor.Time(i)*2e8
		p.add([]sensor.Event{
			{Time: at, Sensor: "gyro", Number: uint64(i), Measurement: sensor.Turn{Since: at - 2e8, AngleRad: math.Sqrt(float64(i)), SigmaRad: 1e-3}},
			{Time: at, Sensor: "odometer", Number: uint64(i), Measurement: sensor.Travel{Since: at - 2e8, DistanceM: math.Sqrt(float64(i)), SigmaM: 0.02}},
		})
		n += 2
	}
	for i := range p.blocks {
		bytes += cap(p.blocks[i].code)
	}
	if per := float64(bytes) / float64(n); per > 6 {
		t.Errorf("%.1f bytes an event, want 6 at most", per)
	} else {
		t.Logf("%.1f bytes an event", per)
	}
}
