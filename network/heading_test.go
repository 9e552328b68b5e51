package network_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/geo"
	"leadline/network"
)

const base = network.BaseHeadingSigmaRad * network.BaseHeadingSigmaRad

// TestHeadingVariance checks the variance at a four-way junction, where it can
// be worked out by hand, and its bounds.
func TestHeadingVariance(t *testing.T) {
	m := build(t, cross(), network.Options{})
	quarter := math.Pi * math.Pi / 4 // the square of a quarter turn
	for _, c := range []struct {
		name           string
		chart          int32
		along, width   float64
		want, tolerate float64
	}{
		// Rounding to VarStep is 5e-5/2.
		{"in the middle of a straight road", 1, 50, 1, base, 3e-5},
		// Half the window lies beyond; of the three ways on, two turn by 90°.
		{"at the junction", 1, 100, 1, base + quarter*2/3/2, 3e-5},
		// 2 of 12 metres beyond. Stations lie 2 m apart and 96 m is one.
		{"4 m before it", 1, 96, 1, base + quarter*2/3*2/12, 3e-5},
		{"7 m before it", 1, 92, 1, base, 3e-5},
		// Top level: 16 m each way, of which 12 m beyond at 96 m.
		{"4 m before it, seen at 32 m", 1, 96, 32, base + quarter*2/3*12/32, 3e-5},
		// Between: r = 11 m, half way from 6 to 16.
		{"4 m before it, seen at 22 m", 1, 96, 22, base + quarter*2/3*(2./12+12./32)/2, 3e-5},
		// A vehicle turns round: π² over half the window is above the cap.
		{"at a dead end", 0, 100, 1, math.Pi * math.Pi / 3, 3e-5},
		{"leaving a dead end", 1, 0, 1, math.Pi * math.Pi / 3, 3e-5},
	} {
		at := probe(m, c.chart, []float64{c.along}, c.width)
		if math.Abs(at.HeadingVar[0]-c.want) > c.tolerate {
			t.Errorf("%s: %v rad², want %v", c.name, at.HeadingVar[0], c.want)
		}
	}
}

// TestHeadingCorner checks the smoothing at one right-angled bend: half the
// turn at the vertex, all of it 3 m beyond, at a constant rate.
func TestHeadingCorner(t *testing.T) {
	m := build(t, network.Graph{Roads: []network.Road{road(0, 1, at(0, 0), at(0, 50), at(50, 50))}}, network.Options{})
	x := probe(m, 0, []float64{40, 47.1, 48.5, 50, 51.5, 52.9, 60}, 1)
	rate := math.Pi / 2 / 6
	for i, want := range []struct{ turned, rate float64 }{{0, 0}, {0.1 * rate, rate}, {1.5 * rate, rate}, {3 * rate, rate}, {4.5 * rate, rate}, {5.9 * rate, rate}, {6 * rate, 0}} {
		// Knots are float32: 4e-6 m at 50 m, times the rate; scale 1e-7.
		if math.Abs(x.Heading[i]-want.turned) > 2e-6 || math.Abs(x.Curvature[i]-want.rate) > 1e-6 {
			t.Errorf("position %d: heading %v, curvature %v, want %v, %v", i, x.Heading[i], x.Curvature[i], want.turned, want.rate)
		}
	}
	back := probe(m, 1, []float64{50}, 1)
	if off := geo.WrapPi(back.Heading[0] - (math.Pi/4 + math.Pi)); math.Abs(off) > 2e-6 {
		t.Errorf("the way back has heading %v at the bend", back.Heading[0])
	}
}

// TestHeadingThrough proves that heading is continuous where one road goes on
// as another, and only there.
func TestHeadingThrough(t *testing.T) {
	g := network.Graph{Roads: []network.Road{
		road(0, 1, at(0, 0), at(0, 50)), road(1, 2, at(0, 50), at(1, 52)), road(2, 3, at(1, 52), at(40, 60)),
	}}
	m := build(t, g, network.Options{})
	for _, pair := range [][2]int32{{0, 2}, {2, 4}, {5, 3}, {3, 1}} {
		a := probe(m, pair[0], []float64{m.LengthM(pair[0])}, 1)
		b := probe(m, pair[1], []float64{0}, 1)
		if off := geo.WrapPi(a.Heading[0] - b.Heading[0]); math.Abs(off) > 1e-6 {
			t.Errorf("from chart %d to %d heading jumps by %v", pair[0], pair[1], off)
		}
	}
	g.Roads = append(g.Roads, road(1, 4, at(0, 50), at(-50, 50)))
	m = build(t, g, network.Options{})
	a, b := probe(m, 0, []float64{50}, 1), probe(m, 2, []float64{0}, 1)
	if a.Heading[0] != 0 || math.Abs(b.Heading[0]-math.Atan2(1, 2)) > 0.5 || a.Heading[0] == b.Heading[0] {
		t.Errorf("at a junction heading goes from %v to %v", a.Heading[0], b.Heading[0])
	}
}

// slowVariance is the definition of the heading variance, by summing over
// positions in the window and walking the links for each.
func slowVariance(m *network.Map, chart int32, s, r float64) float64 {
	heading := probe(m, chart, []float64{s}, 1).Heading[0]
	raw := func(c int32, s float64) float64 {
		x := probe(m, c, []float64{s}, 1)
		return geo.Heading(geo.Point{E: x.TangentE[0], N: x.TangentN[0]})
	}
	var walk func(c int32, s, w float64) float64
	walk = func(c int32, s, w float64) float64 {
		length := m.LengthM(c)
		links, next := &m.Lines(0).Forward, func(to int32) float64 { return s - length }
		if s < 0 {
			links, next = &m.Lines(0).Backward, func(to int32) float64 { return m.LengthM(to) + s }
		} else if s <= length {
			d := geo.WrapPi(raw(c, s) - heading)
			return w * d * d
		}
		to, share := links.Of(c)
		if len(to) == 0 {
			d := geo.WrapPi(raw(c, math.Min(math.Max(s, 0), length)) - heading)
			return w * d * d
		}
		sum := 0.0
		for i := range to {
			sum += walk(to[i], next(to[i]), w*share[i])
		}
		return sum
	}
	const n = 600
	sum := 0.0
	for i := range n {
		sum += walk(chart, s+r*(2*(float64(i)+0.5)/n-1), 1.0/n)
	}
	return math.Min(sum+base, math.Pi*math.Pi/3)
}

// TestHeadingVarianceSlow compares the stored variances with their definition
// at stations all over the town. Where paths turn by more than 180° in all,
// unwrapping along the path and wrapping at its end are different things, so
// such places, at dead ends, are left out.
func TestHeadingVarianceSlow(t *testing.T) {
	g := cross()
	g.Roads = append(g.Roads, road(1, 5, at(100, 0), at(103, 4), at(108, 4), at(108, 30)), road(5, 6, at(108, 30), at(109, 31)),
		road(6, 7, at(109, 31), at(140, 31)), oneWay(road(6, 8, at(109, 31), at(109, 60))))
	m := build(t, g, network.Options{})
	const seed = 3
	rng := rand.New(rand.NewPCG(seed, 0))
	checked := 0
	for range 150 {
		c := rng.Int32N(int32(m.Charts()))
		d := m.Data()
		n := int(d.StationStart[c+1] - d.StationStart[c])
		s := m.LengthM(c) * float64(rng.IntN(n)) / float64(n-1)
		for _, w := range []struct{ r, width float64 }{{6, 1}, {16, 32}} {
			want := slowVariance(m, c, s, w.r)
			if want > 2 {
				continue
			}
			checked++
			got := probe(m, c, []float64{s}, w.width).HeadingVar[0]
			// The sum takes each of up to 6 vertices or junctions in the
			// window to the nearest of 600 positions: 6/600·(π/2)²/2.
			if math.Abs(got-want) > 0.0125 {
				t.Fatalf("seed %d: chart %d at %v m, ±%v m: %v, want %v", seed, c, s, w.r, got, want)
			}
		}
	}
	if checked < 150 {
		t.Fatalf("only %d places were compared", checked)
	}
}
