package network_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/graph/simple"
	"gonum.org/v1/gonum/graph/topo"

	"leadline/engine/geo"
	"leadline/network"
)

var here = geo.NewFrame(geo.FromDegrees(-30, 45)) // in the Atlantic

// road makes a road between two junctions through the given points.
func road(from, to int32, points ...geo.Point) network.Road {
	return network.Road{From: from, To: to, Points: points, Forward: true, Backward: true, Feature: fmt.Sprintf("%d-%d", from, to)}
}

func oneWay(r network.Road) network.Road { r.Backward = false; return r }

func at(e, n float64) geo.Point { return geo.Point{E: e, N: n} }

func build(tb testing.TB, g network.Graph, o network.Options) *network.Map {
	tb.Helper()
	g.Frame = here
	for _, r := range g.Roads {
		g.Junctions = max(g.Junctions, r.From+1, r.To+1)
	}
	m, err := network.New(g, o)
	if err != nil {
		tb.Fatal(err)
	}
	return m
}

// cross is four roads of 100 m that meet at junction 0: charts 0, 2, 4, 6 lead
// away to the east, north, west and south, charts 1, 3, 5, 7 back.
func cross() network.Graph {
	o := at(0, 0)
	return network.Graph{Roads: []network.Road{
		road(0, 1, o, at(100, 0)), road(0, 2, o, at(0, 100)), road(0, 3, o, at(-100, 0)), road(0, 4, o, at(0, -100)),
	}}
}

// TestTurnTable proves the rules of the turn table one by one.
func TestTurnTable(t *testing.T) {
	type links map[int32]float64
	ring := network.Graph{Roads: []network.Road{oneWay(road(0, 0, at(0, 0), at(50, 0), at(50, 50), at(0, 0)))}}
	trap := cross()
	trap.Roads[0] = oneWay(trap.Roads[0])
	loop := cross()
	loop.Roads = append(loop.Roads[:1], road(0, 0, at(0, 0), at(0, 40), at(-40, 40), at(0, 0)))
	ban := func(bans ...network.Ban) network.Graph { g := cross(); g.Bans = bans; return g }
	for _, c := range []struct {
		name  string
		graph network.Graph
		opt   network.Options
		chart int32
		want  links
	}{
		{"equal shares, no U-turn", cross(), network.Options{}, 1, links{2: 1. / 3, 4: 1. / 3, 6: 1. / 3}},
		{"a dead end turns back", cross(), network.Options{}, 0, links{1: 1}},
		{"U-turns where asked for", cross(), network.Options{UTurnWeight: 0.1}, 1, links{2: 0.3, 4: 0.3, 6: 0.3, 0: 0.1}},
		{"dead ends are not changed by that", cross(), network.Options{UTurnWeight: 0.1}, 0, links{1: 1}},
		{"a one-way dead end leaves the map", trap, network.Options{}, 0, links{}},
		{"a ring goes on into itself", ring, network.Options{}, 0, links{0: 1}},
		{"a loop at a road's end is taken both ways", loop, network.Options{}, 1, links{2: 0.5, 3: 0.5}},
		{"and left into the road, or driven again", loop, network.Options{}, 2, links{0: 0.5, 2: 0.5}},
		{"a ban", ban(network.Ban{From: 0, Via: 0, To: 1}), network.Options{}, 1, links{4: 0.5, 6: 0.5}},
		{"a ban elsewhere changes nothing", ban(network.Ban{From: 0, Via: 1, To: 1}), network.Options{}, 1, links{2: 1. / 3, 4: 1. / 3, 6: 1. / 3}},
		{
			"bans that leave nothing make a U-turn", ban(
				network.Ban{From: 0, Via: 0, To: 1}, network.Ban{From: 0, Via: 0, To: 2}, network.Ban{From: 0, Via: 0, To: 3}),
			network.Options{},
			1,
			links{0: 1},
		},
		{"a banned U-turn", ban(network.Ban{From: 0, Via: 0, To: 0}), network.Options{UTurnWeight: 0.1}, 1, links{2: 1. / 3, 4: 1. / 3, 6: 1. / 3}},
	} {
		t.Run(c.name, func(t *testing.T) {
			m := build(t, c.graph, c.opt)
			to, w := m.Lines(0).Forward.Of(c.chart)
			got := links{}
			for i := range to {
				got[to[i]] += w[i]
			}
			if len(got) != len(c.want) {
				t.Fatalf("leads to %v, want %v", got, c.want)
			}
			for k, x := range c.want {
				if math.Abs(got[k]-x) > 1e-15 {
					t.Fatalf("leads to %v, want %v", got, c.want)
				}
			}
		})
	}
	// Bans that leave a one-way road nothing do not count.
	g := cross()
	g.Roads[0] = oneWay(road(1, 0, at(100, 0), at(0, 0)))
	for k := int32(1); k < 4; k++ {
		g.Bans = append(g.Bans, network.Ban{From: 0, Via: 0, To: k})
	}
	if to, _ := build(t, g, network.Options{}).Lines(0).Forward.Of(0); len(to) != 3 {
		t.Errorf("a one-way road all of whose turns are forbidden leads to %v", to)
	}
}

// TestBackwardLinks proves that reversing undoes driving: the weights are those
// of the forward links, normalised.
func TestBackwardLinks(t *testing.T) {
	g := cross()
	g.Bans = []network.Ban{{From: 1, Via: 0, To: 0}} // from the north one may not go east
	m := build(t, g, network.Options{})
	// Into chart 0 (east) one comes from the west (5) with weight 1/3 and from
	// the south (7) with 1/3.
	to, w := m.Lines(0).Backward.Of(0)
	if len(to) != 2 || to[0] != 5 || to[1] != 7 || w[0] != 0.5 || w[1] != 0.5 {
		t.Errorf("chart 0 is entered from %v with %v", to, w)
	}
	// Into chart 2 (north): from the east 1/3, west 1/3, south 1/3. Into
	// chart 4 (west): east 1/3, south 1/3, north (no longer east) 1/2.
	to, w = m.Lines(0).Backward.Of(4)
	sum := 1./3 + 1./3 + 1./2
	for i, want := range []struct {
		chart int32
		w     float64
	}{{1, 1. / 3 / sum}, {3, 1. / 2 / sum}, {7, 1. / 3 / sum}} {
		if to[i] != want.chart || math.Abs(w[i]-want.w) > 1e-15 {
			t.Errorf("chart 4 is entered from %v with %v", to, w)
		}
	}
}

// TestComponents compares the components with gonum's on random graphs full of
// one-way roads, rings and islands.
func TestComponents(t *testing.T) {
	for seed := range uint64(30) {
		rng := rand.New(rand.NewPCG(seed, 5))
		var g network.Graph
		n := int32(3 + rng.IntN(40))
		place := make([]geo.Point, n)
		for i := range place {
			place[i] = at(1000*rng.Float64(), 1000*rng.Float64())
		}
		for range 1 + rng.IntN(60) {
			a, b := rng.Int32N(n), rng.Int32N(n)
			r := road(a, b, place[a], at(1000*rng.Float64(), 1000*rng.Float64()), place[b])
			if rng.IntN(3) > 0 {
				r = oneWay(r)
			}
			g.Roads = append(g.Roads, r)
		}
		m := build(t, g, network.Options{})
		directed, undirected := simple.NewDirectedGraph(), simple.NewUndirectedGraph()
		for c := range int64(m.Charts()) {
			directed.AddNode(simple.Node(c))
			undirected.AddNode(simple.Node(c))
		}
		for c := range int32(m.Charts()) {
			to, _ := m.Lines(0).Forward.Of(c)
			for _, x := range append([]int32{m.Twin(c)}, to...) {
				if x < 0 || x == c {
					continue
				}
				undirected.SetEdge(simple.Edge{F: simple.Node(c), T: simple.Node(x)})
			}
			for _, x := range to {
				if x != c {
					directed.SetEdge(simple.Edge{F: simple.Node(c), T: simple.Node(x)})
				}
			}
		}
		weak, strong, weakM, strongM := m.Components()
		compare := func(what string, of []int32, lengths []float64, n int, same func(a, b int64) bool) {
			if len(lengths) != n {
				t.Fatalf("seed %d: %d %s components, want %d", seed, len(lengths), what, n)
			}
			for a := range of {
				for b := range of {
					if (of[a] == of[b]) != same(int64(a), int64(b)) {
						t.Fatalf("seed %d: charts %d and %d: %s components %d and %d", seed, a, b, what, of[a], of[b])
					}
				}
			}
			for k := 1; k < n; k++ {
				if lengths[k] > lengths[k-1] {
					t.Fatalf("seed %d: %s components are not in order of length: %v", seed, what, lengths)
				}
			}
		}
		scc, wcc := topo.TarjanSCC(directed), topo.ConnectedComponents(undirected)
		number := map[int64]int{}
		for k, nodes := range scc {
			for _, x := range nodes {
				number[x.ID()] = k
			}
		}
		compare("strong", strong, strongM, len(scc), func(a, b int64) bool { return number[a] == number[b] })
		for k, nodes := range wcc {
			for _, x := range nodes {
				number[x.ID()] = k
			}
		}
		compare("weak", weak, weakM, len(wcc), func(a, b int64) bool { return number[a] == number[b] })
		core, length := m.Core()
		sum := 0.0
		for _, c := range core {
			sum += m.LengthM(c)
		}
		if math.Abs(sum-length) > 1e-9*length {
			t.Fatalf("seed %d: the core's %v m are %v", seed, length, sum)
		}
	}
}
