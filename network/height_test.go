package network_test

import (
	"math"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/network"
	"leadline/network/roadfile"
)

// valley is a field that slopes to the east, with a valley 100 m deep and 40 m
// wide around north = 0, and a void west of -150 m.
type valley struct{ frame geo.Frame }

func (v valley) Frame() geo.Frame { return v.frame }
func (valley) Bounds() geo.Box    { return geo.Box{Min: at(-1e5, -1e5), Max: at(1e5, 1e5)} }
func (valley) Sample(dst geo.Heights, east, north []float64) {
	for i := range east {
		dst.HeightM[i] = 500 + 0.05*east[i]
		if math.Abs(north[i]) < 20 {
			dst.HeightM[i] -= 100
		}
		if dst.VarianceM2 != nil {
			dst.VarianceM2[i] = 9
		}
		if east[i] < -150 {
			dst.HeightM[i] = math.NaN()
			if dst.VarianceM2 != nil {
				dst.VarianceM2[i] = 0
			}
		}
	}
}

// TestDrape proves that roads take the height of the ground, with its slope
// and variance, that a void stays a void, and that a bridge does not dive into
// the valley it spans but runs straight between its ends, less sure the
// farther from them.
func TestDrape(t *testing.T) {
	bridge := func(from, to int32, p ...geo.Point) network.Road {
		r := road(from, to, p...)
		r.Attr.Bridge = true
		return r
	}
	g := network.Graph{Roads: []network.Road{
		road(0, 1, at(0, -200), at(0, -40)),
		bridge(1, 2, at(0, -40), at(10, 0)), // two spans with a pier between
		bridge(2, 3, at(10, 0), at(40, 60)),
		road(3, 4, at(40, 60), at(140, 60)),
		road(4, 5, at(140, 60), at(-300, 60)),
	}}
	for name, frame := range map[string]geo.Frame{"same frame": here, "a frame nearby": geo.NewFrame(geo.FromDegrees(-30, 45))} {
		t.Run(name, func(t *testing.T) {
			m := build(t, g, network.Options{Heights: valley{frame}})
			// Eastwards the ground rises by 5 %.
			x := probe(m, 6, []float64{0, 33, 99}, 1)
			for i, e := range []float64{40, 73, 139} {
				// float32 heights near 500 m are good to 3e-5 m, grades over
				// 2 m to that; the frame's scale plays no role here.
				if math.Abs(x.Height[i]-(500+0.05*e)) > 1e-4 || math.Abs(x.SlopeE[i]-0.05) > 5e-5 || math.Abs(x.SlopeN[i]) > 1e-9 || x.HeightVar[i] != 9 {
					t.Errorf("at %v m east: height %v, slope %v %v, variance %v", e, x.Height[i], x.SlopeE[i], x.SlopeN[i], x.HeightVar[i])
				}
			}
			x = probe(m, 8, []float64{100, 439}, 1)
			if x.HeightVar[0] != 9 || !math.IsNaN(x.Height[1]) || x.SlopeE[1] != 0 || x.HeightVar[1] != 0 {
				t.Errorf("the void has height %v, slope %v, variance %v", x.Height[1], x.SlopeE[1], x.HeightVar[1])
			}
			// The ends of the bridge are 500 and 502 m high.
			l1, l2 := m.LengthM(2), m.LengthM(4)
			x = probe(m, 2, []float64{0, 20, l1}, 1)
			for i, s := range []float64{0, 20, l1} {
				want := 500 + 2*s/(l1+l2)
				// Sweeps end at a millimetre a sweep; the chain is one junction.
				if math.Abs(x.Height[i]-want) > 2e-3 {
					t.Errorf("%v m onto the bridge it is %v m high, want %v", s, x.Height[i], want)
				}
				open := math.Min(s, l1+l2-s)
				// Stations at most 2 m apart, of a variance that is a square.
				if v := 9 + math.Pow(0.03*open, 2); math.Abs(x.HeightVar[i]-v) > 0.03*0.03+1e-5 {
					t.Errorf("%v m onto the bridge the variance is %v, want %v", s, x.HeightVar[i], v)
				}
			}
			back := probe(m, 3, []float64{l1 - 20}, 1)
			if math.Abs(back.Height[0]-x.Height[1]) > 1e-4 || back.SlopeN[0] != 0 && math.Abs(back.SlopeN[0]-x.SlopeN[1]) > 1e-4 {
				t.Errorf("the other way the bridge is %v m high with slope %v, want %v and %v", back.Height[0], back.SlopeN[0], x.Height[1], x.SlopeN[1])
			}
		})
	}
}

// TestRingOfBridges proves that a structure without an open end stays finite.
func TestRingOfBridges(t *testing.T) {
	r := oneWay(road(0, 1, at(0, 0), at(50, 0), at(50, 50)))
	s := oneWay(road(1, 0, at(50, 50), at(0, 50), at(0, 0)))
	r.Attr.Bridge, s.Attr.Bridge = true, true
	m := build(t, network.Graph{Roads: []network.Road{r, s}}, network.Options{Heights: valley{here}})
	x := probe(m, 0, []float64{0, 50, 100}, 1)
	for i := range x.Height {
		if !geo.Finite(x.Height[i], x.HeightVar[i]) {
			t.Errorf("height %v with variance %v", x.Height[i], x.HeightVar[i])
		}
	}
}

// TestOwnHeights proves that the third coordinate arrives, and that a map
// without heights says so.
func TestOwnHeights(t *testing.T) {
	m, _ := town(t, roadfile.Options{Map: network.Options{HeightSigmaM: 3}})
	bridge := m.Named("Southern Bypass")
	for _, c := range bridge {
		if !m.Bridge(c) {
			continue
		}
		x := probe(m, c, []float64{0, m.LengthM(c) / 2}, 1)
		// The file lifts the bridge's middle by 6.2 m over the ground; its
		// vertex lies within a metre of the middle, the ramp is 10 %.
		if rise := x.Height[1] - x.Height[0]; math.Abs(rise-6.2) > 0.3 || x.HeightVar[0] != 9 {
			t.Errorf("the bridge rises by %v m, variance %v", rise, x.HeightVar[0])
		}
	}
	m = build(t, cross(), network.Options{})
	x := probe(m, 0, []float64{50}, 1)
	if m.HasHeights() || !math.IsNaN(x.Height[0]) || x.SlopeE[0] != 0 || x.HeightVar[0] != 0 {
		t.Errorf("without heights: %v, slope %v, variance %v", x.Height[0], x.SlopeE[0], x.HeightVar[0])
	}
	var only filter.Columns
	only.Resize(filter.WantPosition, 1, 1)
	m.Sample(&only, []int32{0}, []float64{5}, 1)
	if only.Heading != nil || only.Height != nil {
		t.Error("columns that were not wanted were filled")
	}
}
