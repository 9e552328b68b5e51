package filter_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
)

// fork is a street that leads into two, one of which ends in nothing. Lengths
// are whole cells of a metre.
func fork() *filtertest.Graph {
	return filtertest.NewGraph(1, []float64{12, 9, 15}, [][]filtertest.Link{
		{{To: 1, Weight: 0.3}, {To: 2, Weight: 0.7}}, nil, {{To: 0, Weight: 1}},
	})
}

// cellMasses sums the masses by cell.
func cellMasses(b *filter.Belief) map[uint64]float64 {
	m := map[uint64]float64{}
	for i, key := range b.Key {
		m[key] += b.Mass[i]
	}
	return m
}

// TestPredictAgainstAllPairs compares one step with the sum over all pairs of
// a Gaussian and a cell: the Gaussian moved, its share between the cell's
// edges, along every way through the junctions.
func TestPredictAgainstAllPairs(t *testing.T) {
	const seed = 41
	rng := rand.New(rand.NewPCG(seed, 0))
	g := fork()
	ln := g.Lines(0)
	for _, c := range []struct{ add, q float64 }{{2.3, 0.8}, {-1.7, 1.5}, {0, 4}, {5, 0.3}} {
		b := &filter.Belief{Map: g.Fingerprint(), Dim: 1, Quantities: along}
		want, left := map[uint64]float64{}, 0.0
		for chart := range int32(3) {
			for cell := range ln.Cells[chart] {
				mass, mean, v := rng.Float64()/36, rng.Float64()-0.5, 0.2*rng.Float64()
				b.Key = append(b.Key, filter.LineKey(chart, cell))
				b.Mass = append(b.Mass, mass)
				b.Mean = append(b.Mean, mean)
				b.Cov = append(b.Cov, v)
				pos, sigma := float64(cell)+0.5+mean+c.add, math.Sqrt(v+c.q)
				// Shares of all unit cells of this chart's axis, then each to
				// where it lies.
				for j := int(pos - 9*sigma - 1); float64(j) < pos+9*sigma+1; j++ {
					share := mass * (math.Erfc((float64(j)-pos)/sigma/math.Sqrt2) - math.Erfc((float64(j)+1-pos)/sigma/math.Sqrt2)) / 2
					allWays(g, chart, j, share, want, &left)
				}
			}
		}
		total := 0.0
		for _, m := range b.Mass {
			total += m
		}
		var w filter.Workspace
		step := filter.NewStep(1)
		step.Add[0], step.Q[0] = c.add, c.q
		filter.Predict(b, g, step, &w)
		got, mass := cellMasses(b), 0.0
		for _, m := range got {
			mass += m
		}
		if math.Abs(mass+b.Pruned+b.LeftMap-total) > 1e-15*36 {
			t.Errorf("seed %d, %+v: mass %v and pruned %v and left %v, before %v", seed, c, mass, b.Pruned, b.LeftMap, total)
		}
		// Tails beyond 3.5 sigma, 2·2.3e-4 of each Gaussian, are folded into
		// the outermost piece, which may be one cell from where they belong.
		tol := 4.7e-4 * total
		if math.Abs(b.LeftMap-left) > tol {
			t.Errorf("seed %d, %+v: %v left the map, all pairs %v", seed, c, b.LeftMap, left)
		}
		sum := 0.0
		for key, m := range want {
			sum += math.Abs(got[key] - m)
			delete(got, key)
		}
		for _, m := range got {
			sum += m
		}
		if sum > 2*tol {
			t.Errorf("seed %d, %+v: cells differ from all pairs by %v in all, allowed %v", seed, c, sum, 2*tol)
		}
	}
}

// allWays sends a share that lies in unit cell j of a chart's axis, perhaps
// beyond its ends, to the cells where it belongs.
func allWays(g *filtertest.Graph, chart int32, j int, share float64, into map[uint64]float64, left *float64) {
	ln := g.Lines(0)
	n := int(ln.Cells[chart])
	links, past := &ln.Forward, j-n
	switch {
	case j >= 0 && j < n:
		into[filter.LineKey(chart, int32(j))] += share
		return
	case j < 0:
		links = &ln.Backward
	}
	to, weight := links.Of(chart)
	if len(to) == 0 {
		*left += share
	}
	for i, x := range to {
		at := past
		if j < 0 {
			at = j + int(ln.Cells[x])
		}
		allWays(g, x, at, share*weight[i], into, left)
	}
}

// byChart is a likelihood that knows charts only.
type byChart []float64

func (byChart) Wants() filter.Wants { return filter.WantPosition }

func (l byChart) LogLikelihood(dst []float64, at *filter.Columns) {
	for i, e := range at.East {
		dst[i] += math.Log(l[int(e)])
	}
}

// TestSmoothAgainstAllPaths: masses smoothed backward over six steps equal the
// sums over all paths through a small graph, with links of any weight, and the
// most probable path is the likeliest of them.
func TestSmoothAgainstAllPaths(t *testing.T) {
	const seed, charts, steps = 42, 4, 6
	rng := rand.New(rand.NewPCG(seed, 0))
	var next [][]filtertest.Link
	var weight [charts][charts]float64
	for c := range charts {
		var links []filtertest.Link
		sum := 0.0
		for d := range charts {
			if d != c && (rng.Float64() < 0.75 || d == (c+1)%charts) { // a chart that leads to itself would not be seen in a way
				w := 0.1 + rng.Float64()
				links = append(links, filtertest.Link{To: int32(d), Weight: w})
				sum += w
			}
		}
		for i := range links {
			links[i].Weight /= sum
			weight[c][links[i].To] = links[i].Weight
		}
		next = append(next, links)
	}
	g := filtertest.NewGraph(1, []float64{1, 1, 1, 1}, next)
	b, err := filter.Seed(g, filter.Anywhere{}, along, 100)
	if err != nil {
		t.Fatal(err)
	}
	var evidence [steps]byChart
	for s := range evidence {
		evidence[s] = make(byChart, charts)
		for c := range charts {
			evidence[s][c] = 0.05 + rng.Float64()
		}
	}
	// All paths: charts^(steps+1) of them.
	var want [steps + 1][charts]float64
	total, bestP := 0.0, 0.0
	var path, best [steps + 1]int
	var walk func(at int, p float64)
	walk = func(at int, p float64) {
		if at == steps {
			total += p
			if p > bestP {
				bestP, best = p, path
			}
			for s, c := range path {
				want[s][c] += p
			}
			return
		}
		for d := range charts {
			if w := weight[path[at]][d]; w > 0 {
				path[at+1] = d
				walk(at+1, p*w*evidence[at][d])
			}
		}
	}
	for c := range charts {
		path[0] = c
		walk(0, 1.0/charts)
	}

	var w filter.Workspace
	var tape filter.Tape
	w.Record(&tape, b)
	first, start := b.BestOf(), b.Way()
	logE := 0.0
	for s := range steps {
		step := filter.NewStep(1)
		step.Add[0] = 1
		filter.Predict(b, g, step, &w)
		e, err := filter.Update(b, g, evidence[s], &w)
		if err != nil {
			t.Fatal(err)
		}
		logE += e
	}
	if math.Abs(logE-math.Log(total)) > 1e-12 {
		t.Errorf("seed %d: log evidence %v, over all paths %v", seed, logE, math.Log(total))
	}
	ways := tape.Ways(start)
	end := b.Clone()
	if got := math.Log(ways[steps].Restrict(end)); math.Abs(got+logE-math.Log(bestP)) > 1e-12 {
		t.Errorf("seed %d: the best way has %v, of all paths %v", seed, got+logE, math.Log(bestP))
	}
	tape.SmoothAlong(end, ways, &w, func(s int, h *filter.Belief) {
		for i, key := range h.Key {
			if c, _ := filter.LineCell(key); (c == int32(best[s])) != (h.Mass[i] > 0) {
				t.Errorf("seed %d: after %d steps chart %d of the best way has %v; of all paths it is on %d", seed, s, c, h.Mass[i], best[s])
			}
		}
	})
	var charts0 [steps + 1][]int32
	tape.Smooth(b.Clone(), &w, func(s int, h *filter.Belief) {
		for i, key := range h.Key {
			c, _ := filter.LineCell(key)
			charts0[s] = append(charts0[s], c)
			if math.Abs(h.Mass[i]-want[s][c]/total) > 1e-12 {
				t.Errorf("seed %d: chart %d after %d steps has %v, over all paths %v", seed, c, s, h.Mass[i], want[s][c]/total)
			}
		}
	})
	all := tape.Best(first, b)
	if got := all[steps][b.End(all[steps]).Entry]; math.Abs(got+logE-math.Log(bestP)) > 1e-12 {
		t.Errorf("seed %d: the best path has %v, of all paths %v", seed, got+logE, math.Log(bestP))
	}
	tape.Trace(all, b.End(all[steps]), b, func(s int, spot filter.Spot) {
		if c := charts0[s][spot.Entry]; c != int32(best[s]) {
			t.Errorf("seed %d: after %d steps the best path is on chart %d, of all paths on %d", seed, s, c, best[s])
		}
	})
}
