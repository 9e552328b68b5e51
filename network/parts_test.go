package network_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"leadline/engine/geo"
	"leadline/network"
	"leadline/network/roadfile"
)

// TestNear compares the nearest positions with those found by sampling every
// chart each decimetre.
func TestNear(t *testing.T) {
	m, _ := town(t, roadfile.Options{})
	const seed = 8
	rng := rand.New(rand.NewPCG(seed, 0))
	for range 20 {
		p := at(-300+1100*rng.Float64(), -300+900*rng.Float64())
		p = m.Frame().Forward(geo.FromDegrees(-30+p.E/78846, 45+p.N/111131)) // the town is around 30° W, 45° N
		const radius = 60
		near := m.Near(p, radius)
		found := map[int32]bool{}
		for i, x := range near {
			found[x.Chart] = true
			q := probe(m, x.Chart, []float64{x.AlongM}, 1)
			if d := (geo.Point{E: q.East[0] - p.E, N: q.North[0] - p.N}).Norm(); math.Abs(d-x.DistM) > 1e-6*radius+1e-9 {
				t.Fatalf("seed %d: chart %d at %v m is %v m away, not %v", seed, x.Chart, x.AlongM, d, x.DistM)
			}
			if i > 0 && x.DistM < near[i-1].DistM {
				t.Fatalf("seed %d: places are not in order", seed)
			}
		}
		for c := range int32(m.Charts()) {
			var along []float64
			for s := 0.0; s <= m.LengthM(c); s += 0.1 {
				along = append(along, s)
			}
			along = append(along, m.LengthM(c))
			q := probe(m, c, along, 1)
			best := math.Inf(1)
			for i := range along {
				best = math.Min(best, (geo.Point{E: q.East[i] - p.E, N: q.North[i] - p.N}).Norm())
			}
			// Sampling misses the nearest position by 5 cm along the line.
			k := slices.IndexFunc(near, func(x network.Place) bool { return x.Chart == c })
			switch {
			case k >= 0 && (near[k].DistM > best+1e-4 || near[k].DistM < best-0.06):
				t.Fatalf("seed %d: chart %d is %v m away, sampled %v", seed, c, near[k].DistM, best)
			case k < 0 && best < radius-0.1:
				t.Fatalf("seed %d: chart %d at %v m was not found", seed, c, best)
			}
		}
	}
	if m.Near(geo.Point{}, math.NaN()) != nil || m.Near(geo.Point{E: math.Inf(1)}, 5) != nil || m.Near(geo.Point{}, -1) != nil {
		t.Error("a place was found near nowhere")
	}
}

// TestWithin compares the stretches inside a polygon with a hole with a test
// of single positions.
func TestWithin(t *testing.T) {
	m, _ := town(t, roadfile.Options{})
	p, _ := m.Ends(m.Named("Market Street")[0])
	ring := func(r float64, corners int) []geo.Point {
		var out []geo.Point
		for i := range corners {
			d := geo.Direction(0.3 + 2*math.Pi*float64(i)/float64(corners))
			out = append(out, geo.Point{E: p.E + r*d.E, N: p.N + r*d.N})
		}
		return out
	}
	outer, hole := ring(230, 5), ring(60, 4)
	inside := func(q geo.Point, poly []geo.Point) bool { // convex, clockwise
		for i := range poly {
			a, b := poly[i], poly[(i+1)%len(poly)]
			if (b.E-a.E)*(q.N-a.N)-(b.N-a.N)*(q.E-a.E) > 0 {
				return false
			}
		}
		return true
	}
	stretches := m.Within(outer, hole)
	if len(stretches) == 0 {
		t.Fatal("nothing is inside")
	}
	for c := range int32(m.Charts()) {
		for s := 0.05; s < m.LengthM(c); s += 0.5 {
			q := probe(m, c, []float64{s}, 1)
			at := geo.Point{E: q.East[0], N: q.North[0]}
			want := inside(at, outer) && !inside(at, hole)
			got, edge := false, false
			for _, x := range stretches {
				if x.Chart == c {
					got = got || s >= x.FromM && s <= x.UpToM
					edge = edge || math.Abs(s-x.FromM) < 1e-6 || math.Abs(s-x.UpToM) < 1e-6
				}
			}
			if got != want && !edge {
				t.Fatalf("chart %d at %v m: inside %t, want %t", c, s, got, want)
			}
		}
	}
	if m.Within() != nil || m.Within(outer[:2]) != nil {
		t.Error("something is inside nothing")
	}
}

// TestNames proves that the town's names and tags arrive.
func TestNames(t *testing.T) {
	m, _ := town(t, roadfile.Options{})
	tunnel := m.Named("Barrow Tunnel")
	if len(tunnel) != 2 || m.Twin(tunnel[0]) != tunnel[1] || !m.Tunnel(tunnel[0]) || m.Layer(tunnel[0]) != -1 ||
		m.Ref(tunnel[0]) != "Q3" || m.Class(tunnel[0]) != "secondary" || m.Feature(tunnel[0]) != "tunnel" {
		t.Errorf("the tunnel is charts %v", tunnel)
	}
	// 50 km/h, kept as float32.
	if v := m.SpeedLimit(tunnel[0]); math.Abs(v-50/3.6) > 1e-6 {
		t.Errorf("its speed limit is %v m/s", v)
	}
	if v := m.SpeedLimit(m.Named("Chapel Street")[0]); math.Abs(v-20*0.44704) > 1e-6 {
		t.Errorf("20 mph are %v m/s", v)
	}
	if len(m.Named("Nowhere")) != 0 {
		t.Error("a road called Nowhere")
	}
	circle := m.Named("Millstone Circle")
	for _, c := range circle {
		if !m.Roundabout(c) || m.Twin(c) >= 0 {
			t.Errorf("chart %d of the roundabout is open both ways", c)
		}
	}
	if len(circle) != 4 {
		t.Errorf("the roundabout has %d charts, want 4", len(circle))
	}
}
