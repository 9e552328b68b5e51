package session

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// TestSpeedDoesNotDependOnRate drives one acceleration and braking, told at 1, 10
// and 100 Hz: at each second the speed is the mean over the last second, the same
// whatever the rate, with the same sigma; and the true speed of then is within
// two sigma.
func TestSpeedDoesNotDependOnRate(t *testing.T) {
	const seed, seconds, finest = 3, 30, 100
	// Speeds up by 1.5 m/s² for 8 s, keeps on, brakes by 2 m/s² to rest.
	speed := func(s float64) float64 {
		return 1.5*math.Min(s, 8) - 2*math.Min(math.Max(s-18, 0), 6)
	}
	road := straight(600)
	rng := rand.New(rand.NewPCG(seed, 0))
	measured := make([]float64, seconds*finest+1)
	for i := 1; i < len(measured); i++ {
		d := speed((float64(i)-0.5)/finest) / finest
		measured[i] = measured[i-1] + 1.02*d + odoSigma*math.Sqrt(d)*rng.NormFloat64() // 2 % too long
	}
	run := func(hz int) outcome {
		s := open(t, Config{Space: road, Names: road, Suite: onRoads(), Start: pointStart(road, geo.Point{N: 20}, 1)})
		var events []sensor.Event
		for i := finest / hz; i < len(measured); i += finest / hz {
			from := i - finest/hz
			true0, d := 0.0, measured[i]-measured[from]
			for j := from; j < i; j++ {
				true0 += speed((float64(j)+0.5)/finest) / finest
			}
			events = append(events, sensor.Event{
				Time: at(float64(i) / finest), Sensor: "odo", Number: uint64(i),
				Measurement: sensor.Travel{Since: at(float64(from) / finest), DistanceM: d, SigmaM: odoSigma*math.Sqrt(true0) + 1e-6},
			})
		}
		return feed(t, s, events)
	}
	bySecond := func(o outcome) (list []int) {
		for i, p := range o.posteriors {
			if (p.TimeNS-int64(at(0)))%1e9 == 0 && p.TimeNS > int64(at(0)) {
				list = append(list, i)
			}
		}
		return list
	}
	want := run(1)
	for _, hz := range []int{1, 10, 100} {
		got := run(hz)
		for n, i := range bySecond(got) {
			sec := float64(n + 1)
			p, q := want.posteriors[bySecond(want)[n]].Speed, got.posteriors[i].Speed
			if !q.Known || math.Abs(q.MPS-p.MPS) > 1e-3 || math.Abs(q.SigmaMPS/p.SigmaMPS-1) > 0.01 {
				t.Errorf("seed %d, %d Hz at %g s: %+v, at 1 Hz %+v", seed, hz, sec, q, p)
			}
			if off := math.Abs(q.MPS - speed(sec)); off > 2*q.SigmaMPS || q.SigmaMPS > 1.2 {
				t.Errorf("seed %d, %d Hz at %g s: %+v, the true speed is %g", seed, hz, sec, q, speed(sec))
			}
		}
		if n := len(bySecond(got)); n != seconds {
			t.Fatalf("%d Hz: %d posteriors at whole seconds", hz, n)
		}
	}
}

// TestPace takes stretches of many lengths: the mean is over the last second, of
// which the oldest counts in part; over one increment that is longer; and over
// what there is after a change of what measures it.
func TestPace(t *testing.T) {
	type s = sensor.Pace
	for _, c := range []struct {
		name            string
		in              []s
		mps, sigma, sec float64
	}{
		{"one", []s{{Seconds: 0.1, ForwardM: 1, VarM2: 0.04}}, 10, math.Sqrt(4 + 0.15*0.15/3), 0.1},
		{"long", []s{{Seconds: 1, ForwardM: 1, VarM2: 1}, {Seconds: 4, ForwardM: 8, VarM2: 1.6}}, 2, math.Sqrt(0.1 + 36/3), 4},
		{"in part", []s{{Seconds: 9, ForwardM: 9, VarM2: 1}, {Seconds: 0.6, ForwardM: 6, VarM2: 0.3}, {Seconds: 0.2, ForwardM: 4, VarM2: 0.1}, {Seconds: 0.2, ForwardM: 0, VarM2: 0}}, 10, math.Sqrt(0.4 + 1.5*1.5/3), 1},
		{"oldest cut", []s{{Seconds: 0.8, ForwardM: 8, VarM2: 0.8}, {Seconds: 0.6, ForwardM: 0, VarM2: 0.1}}, 4, math.Sqrt(0.5 + 1.5*1.5/3), 1},
		{"reverse", []s{{Seconds: 0.5, ForwardM: -2, VarM2: 0.02}, {Seconds: 0.5, ForwardM: -1, VarM2: 0.02}}, -3, math.Sqrt(0.04 + 1.5*1.5/3), 1},
		{"over ground", []s{{Seconds: 0.5, ForwardM: 9, VarM2: 1}, {Seconds: 0.5, Over: true, EastM: 3, VarM2: 0.02}, {Seconds: 0.5, Over: true, NorthM: -4, VarM2: 0.02}}, 5, math.Sqrt(0.04 + 1.5*1.5/3), 1},
	} {
		var p pace
		for _, x := range c.in {
			p.add(x)
		}
		b := open(t, harbourConfig()).state.belief
		got := p.speed(b, 3)
		if !got.Known || math.Abs(got.MPS-c.mps) > 1e-12 || math.Abs(got.SigmaMPS-c.sigma) > 1e-12 || math.Abs(p.seconds()-c.sec) > 1e-12 {
			t.Errorf("%s: %+v over %g s; want %g, %g over %g s", c.name, got, p.seconds(), c.mps, c.sigma, c.sec)
		}
	}
}
