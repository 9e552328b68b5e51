package session

import (
	"cmp"
	"math"
	"slices"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// offRoads is the plane that roads lie on.
type offRoads struct{ filter.Space }

var _ filter.PlaneSpace = offRoads{}

func (offRoads) Bounds() geo.Box {
	inf := math.Inf(1)
	return geo.Box{Min: geo.Point{E: -inf, N: -inf}, Max: geo.Point{E: inf, N: inf}}
}
func (offRoads) DetailM() float64 { return 1 }

// Sample says that no height is known.
func (offRoads) Sample(dst *filter.Columns) {
	nan := math.NaN()
	for i := range dst.Height {
		dst.Height[i], dst.SlopeE[i], dst.SlopeN[i], dst.HeightVar[i] = nan, 0, 0, 0
	}
}

// leaveRoads turns a belief on roads into one over the plane that they lie on,
// each of whose places is wider by a variance, m² an axis, and as wide across
// the road as a vehicle's place is. Places much closer to each other than what
// is added become one, with their moments.
func (s *Session) leaveRoads(addM2 float64) {
	b := s.state.belief
	d := s.desk()
	b.Read(&d.cloud, s.space, &d.work)
	c := &d.cloud
	s.appendLoose(c)
	lateral := s.suite.Vehicle.LateralSigmaM * s.suite.Vehicle.LateralSigmaM
	h := math.Max(math.Sqrt(addM2)/4, 1)
	p := &filter.Belief{
		Map: b.Map, Dim: 2, Lattice: filter.Lattice{SpacingM: h},
		Quantities: []filter.Quantity{{Name: filter.East}, {Name: filter.North}},
		Pruned:     b.Pruned, LeftMap: b.LeftMap, Restarted: b.Restarted,
	}
	type entry struct {
		key uint64
		i   int
	}
	entries := make([]entry, len(c.Mass))
	for i := range entries {
		entries[i] = entry{filter.CellKey(int32(math.Floor(c.East[i]/h+0.5)), int32(math.Floor(c.North[i]/h+0.5))), i}
	}
	slices.SortFunc(entries, func(a, b entry) int { // sums run in this order
		return cmp.Or(cmp.Compare(a.key, b.key), cmp.Compare(a.i, b.i))
	})
	for from := 0; from < len(entries); {
		key, to := entries[from].key, from
		centre := p.Lattice.Centre(filter.Cell(key))
		var m, e, n, ee, en, nn float64
		for ; to < len(entries) && entries[to].key == key; to++ {
			i := entries[to].i
			w, x, y := c.Mass[i], c.East[i]-centre.E, c.North[i]-centre.N
			m += w
			e += float64(w * x)
			n += float64(w * y)
			ee += float64(w * (c.VarEE[i] + float64(x*x)))
			en += float64(w * (c.VarEN[i] + float64(x*y)))
			nn += float64(w * (c.VarNN[i] + float64(y*y)))
		}
		from = to
		if m == 0 {
			continue
		}
		e, n = e/m, n/m
		p.Key, p.Mass, p.Mean = append(p.Key, key), append(p.Mass, m), append(p.Mean, e, n)
		p.Cov = append(p.Cov, ee/m-float64(e*e)+addM2+lateral, en/m-float64(e*n), nn/m-float64(n*n)+addM2+lateral)
	}
	s.state.belief, s.space, s.lines, s.names = p, offRoads{s.space}, nil, nil
}

// appendLoose adds what is off the roads to a belief that leaves them.
func (s *Session) appendLoose(c *filter.Cloud) {
	a := &s.state.aside
	if a.off == 0 {
		return
	}
	share := a.off / (1 - a.lost)
	for i := range c.Mass {
		c.Mass[i] *= 1 - share
	}
	l := &a.loose
	k := len(l.Quantities)
	p := k * (k + 1) / 2
	for i, m := range l.Mass {
		c.Mass = append(c.Mass, m*share)
		c.East, c.North = append(c.East, l.Mean[i*k]), append(c.North, l.Mean[i*k+1])
		cov := l.Cov[i*p:]
		c.VarEE, c.VarEN, c.VarNN = append(c.VarEE, cov[0]), append(c.VarEN, cov[1]), append(c.VarNN, cov[2])
	}
	a.off = 0
}
