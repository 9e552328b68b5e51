package traffic

import (
	"cmp"
	"math"
	"slices"

	"leadline/engine/kernel"
)

// hear updates everything by a scan of a post.
func (f *Filter) hear(e *ear, bearings []Bearing) {
	var near []*track
	for _, t := range f.tracks {
		if f.hears(e, t, bearings) {
			t.heard.listen(&t.grid, e, &f.model, bearings)
			near = append(near, t)
		}
	}
	births := f.births(e, bearings)
	f.account.LogEvidence -= float64(f.model.clutter() * 2 * math.Pi)
	for _, c := range f.clusters(near, births, len(bearings)) {
		f.settle(c, len(bearings))
	}
	for _, b := range births {
		f.begin(b)
	}
}

// hears reports whether a post may hear a vehicle, and if so makes its grid as
// fine as what is heard will need.
func (f *Filter) hears(e *ear, t *track, bearings []Bearing) bool {
	g := &t.grid
	if lo, hi := g.ends(); hi < e.from-e.lateM || lo > e.to+e.lateM {
		return false
	}
	// A bearing of sigma σ from a distance d tells the position to σ d²/a, a the
	// post's distance from the road's line: here, of the mean.
	m := g.moments()
	_, distance, piece := e.emission(m.positionM, m.speedMPS, e.road.piece(m.positionM))
	narrow := 1.0
	sM, _ := g.widths()
	for _, b := range bearings {
		tells := b.SigmaRad * distance * distance / math.Max(e.awayM[piece], 1)
		narrow = math.Min(narrow, 1/math.Sqrt(1+float64(sM*sM)/float64(tells*tells)))
	}
	f.account.Clipped += float64(t.existence * g.adapt(&f.work, narrow, 1, f.model.MaxCells))
	return true
}

// cluster are vehicles and bearings that may have to do with one another.
type cluster struct {
	bearings []int
	tracks   []*track
	births   []*birth
}

// clusters parts a scan: what is in different parts is independent.
func (f *Filter) clusters(near []*track, births []*birth, n int) []*cluster {
	group := make([]int, n) // of a bearing: the least one that it is joined with
	for j := range group {
		group[j] = j
	}
	find := func(j int) int {
		for group[j] != j {
			j = group[j]
		}
		return j
	}
	join := func(j, k int) {
		if j, k = find(j), find(k); j != k {
			group[max(j, k)] = min(j, k)
		}
	}
	first := func(t *track) int { // a bearing that may be of this vehicle
		at := -1
		for j := range n {
			may := t.heard.one[j] > 0
			for k := 0; k < n && !may && len(t.heard.two) > 0; k++ {
				may = k != j && t.heard.two[pair(min(j, k), max(j, k), n)] > 0
			}
			if may && at >= 0 {
				join(at, j)
			} else if may {
				at = j
			}
		}
		return at
	}
	at := make([]int, len(near))
	for i, t := range near {
		at[i] = first(t)
	}
	for _, b := range births {
		for _, j := range b.bearings[1:] {
			join(b.bearings[0], j)
		}
	}
	parts := make([]*cluster, n)
	var out []*cluster
	for j := range n {
		r := find(j)
		if parts[r] == nil {
			parts[r] = &cluster{}
			out = append(out, parts[r])
		}
		parts[r].bearings = append(parts[r].bearings, j)
	}
	for i, t := range near {
		if at[i] < 0 {
			out = append(out, &cluster{tracks: []*track{t}})
			continue
		}
		c := parts[find(at[i])]
		c.tracks = append(c.tracks, t)
	}
	for _, b := range births {
		c := parts[find(b.bearings[0])]
		c.births = append(c.births, b)
	}
	return out
}

// settle updates the vehicles of a cluster.
func (f *Filter) settle(c *cluster, n int) {
	if len(c.bearings) > mostBearings {
		f.crowded(c)
	}
	m := len(c.bearings)
	a := association{bearings: m, spurious: f.model.clutter(), new1: make([]float64, m)}
	pairs := 0
	if f.model.TwoBearings > 0 {
		pairs = m * (m - 1) / 2
		a.new2 = make([]float64, pairs)
	}
	for _, t := range c.tracks {
		w := make([]float64, 1+m+pairs)
		w[0] = 1 - t.existence + float64(t.existence*t.heard.nothing)
		for j, b := range c.bearings {
			w[1+j] = t.existence * t.heard.one[b]
			for k := j + 1; k < m && pairs > 0; k++ {
				w[1+m+pair(j, k, m)] = t.existence * t.heard.two[pair(b, c.bearings[k], n)]
			}
		}
		a.vehicles = append(a.vehicles, w)
	}
	place := func(b int) int { return slices.Index(c.bearings, b) }
	for _, b := range c.births {
		if len(b.bearings) == 1 {
			a.new1[place(b.bearings[0])] = b.expected
		} else {
			a.new2[pair(place(b.bearings[0]), place(b.bearings[1]), m)] = b.expected
		}
	}
	f.account.LogEvidence += kernel.Log(a.marginals())
	for i, t := range c.tracks {
		taken := a.taken[i]
		silent := taken[0] * t.existence * t.heard.nothing / a.vehicles[i][0]
		existence := silent
		one, two := make([]float64, n), make([]float64, len(t.heard.two))
		for j, b := range c.bearings {
			one[b] = taken[1+j]
			existence += taken[1+j]
			for k := j + 1; k < m && pairs > 0; k++ {
				p := taken[1+m+pair(j, k, m)]
				two[pair(b, c.bearings[k], n)] = p
				existence += p
			}
		}
		t.existence = math.Min(existence, 1)
		if !(existence > 0) {
			continue // tidy takes it away
		}
		t.heard.reweigh(&t.grid, silent/existence, one, two, 1/existence)
		f.account.Pruned += float64(t.existence * t.grid.trim())
	}
	for _, b := range c.births {
		if len(b.bearings) == 1 {
			b.prob = a.born1[place(b.bearings[0])]
		} else {
			b.prob = a.born2[pair(place(b.bearings[0]), place(b.bearings[1]), m)]
		}
	}
}

// crowded leaves in a cluster the bearings that the vehicles there take for
// theirs the most; the others are taken for false.
func (f *Filter) crowded(c *cluster) {
	weight := func(b int) (sum float64) {
		for _, t := range c.tracks {
			sum += float64(t.existence * t.heard.one[b])
		}
		return sum
	}
	slices.SortStableFunc(c.bearings, func(a, b int) int { return cmp.Compare(weight(b), weight(a)) })
	f.account.Crowded += len(c.bearings) - mostBearings
	f.account.LogEvidence += float64(float64(len(c.bearings)-mostBearings) * kernel.Log(f.model.clutter()))
	c.bearings = c.bearings[:mostBearings]
	slices.Sort(c.bearings)
	c.births = slices.DeleteFunc(c.births, func(b *birth) bool {
		for _, j := range b.bearings {
			if !slices.Contains(c.bearings, j) {
				return true
			}
		}
		return false
	})
}
