package summary

import (
	"cmp"
	"math"
	"slices"

	"leadline/engine/geo"
)

// A mode is a peak of the belief's density at the scale of the alert limit:
// the density is summed on a grid with a side of a quarter of the alert limit
// (bilinearly, then smoothed by (1 2 1)/4 each way), and two peaks are two
// modes if the highest pass between them is lower than half of the lower peak.
// Every entry belongs to the peak uphill of it. Two equal peaks are told apart
// from about 0.7 alert limits on: those closer make no difference that
// anybody asked about.
//
// The cells' width does not enter, unless cells, or the typical Gaussian at
// sqrt(12) of its sigma, are wider than the side; the side is then that width. The directions of a road do not enter at all: they lie in
// one place and are one mode.
const (
	sidesPerLimit = 4
	prominence    = 0.5
)

// modeSum gathers one mode.
type modeSum struct {
	mass     float64
	e, n     float64
	cov      Cov
	chart    [ChartsPerMode]Edge
	charts   int
	position int // in the order found
}

// findModes fills the modes and returns the mass of the heaviest and how many
// hold at least ambiguousFrom.
func (s *Summarizer) findModes(dst *Posterior, in *Input) (best float64, heavy int) {
	side := max(s.opt.AlertLimitM/sidesPerLimit, s.typicalM)
	// The grid must number its columns in 30 bits; no map is so large.
	box := s.box()
	side = max(side, extent(box)/(1<<30))
	h := &s.hills
	h.reset(side, len(s.mass))
	h.lay(box, len(s.mass))
	h.pour(s.east, s.north, s.mass)
	h.smooth()
	h.divide(prominence)
	if len(s.mass) > wideEntries {
		h.order, h.spare, h.visit = nil, nil, nil
	}
	s.gather()

	dst.ModeCount, dst.ModeRest = len(s.modes), 0
	listed := min(len(s.modes), s.opt.MaxModes)
	dst.Modes = resize(dst.Modes, listed)
	for i := range s.modes {
		m := &s.modes[i]
		if m.mass >= ambiguousFrom {
			heavy++
		}
		if i >= listed {
			dst.ModeRest += m.mass
		}
	}
	s.spreadModes(listed)
	if s.dim == 1 {
		s.chartModes(listed, in)
	}
	s.modeSigmaM = math.Inf(1)
	for i := range listed {
		m := &s.modes[i]
		m.cov.EE -= s.square.EE
		m.cov.NN -= s.square.NN
		at := geo.Point{E: m.e, N: m.n}
		dst.Modes[i] = Mode{
			Mass: m.mass, MeanFrame: at, Mean: s.frame.Inverse(at), Cov: s.trueCov(at, m.cov),
			Charts: m.chart, ChartCount: m.charts,
		}
		if _, minor := m.cov.Axes(); minor > 0 && m.mass >= ambiguousFrom {
			s.modeSigmaM = min(s.modeSigmaM, minor)
		}
	}
	return s.modes[0].mass, heavy
}

// box is around all entries.
func (s *Summarizer) box() geo.Box {
	var b geo.Box
	b.Min.E, b.Max.E = ends(s.east)
	b.Min.N, b.Max.N = ends(s.north)
	return b
}

// extent is the largest coordinate.
func extent(b geo.Box) float64 { return max(-b.Min.E, -b.Min.N, b.Max.E, b.Max.N) }

// ends are the least and the greatest of numbers, without the care that slices.Min takes
// of those that are none, at a third of its cost.
func ends(x []float64) (least, most float64) {
	least, most = x[0], x[0]
	for _, v := range x {
		if v < least {
			least = v
		}
		if v > most {
			most = v
		}
	}
	return least, most
}

// gather gives every entry its mode and sums the modes, heaviest first (the
// first found of equals); s.modeOf then holds ranks.
func (s *Summarizer) gather() {
	h := &s.hills
	s.modes = s.modes[:0]
	s.modeOf = resize(s.modeOf, len(s.mass))
	rank := resize(s.rank, len(h.mass)) // by node; 0 is none
	clear(rank)
	for i, m := range s.mass {
		node := h.near[i]
		if h.peak[node] < 0 {
			// An entry without mass, or with so little that its share of
			// the node vanished in rounding.
			s.modeOf[i] = 0
			if m == 0 || len(s.modes) > 0 {
				continue
			}
		}
		root := node
		if h.peak[node] >= 0 {
			root = h.root(node)
		}
		if rank[root] == 0 {
			s.modes = append(s.modes, modeSum{position: len(s.modes)})
			rank[root] = int32(len(s.modes))
		}
		k := rank[root] - 1
		s.modeOf[i] = k
		s.modes[k].mass += m
	}
	s.rank = rank
	slices.SortFunc(s.modes, func(a, b modeSum) int {
		if a.mass != b.mass {
			return cmp.Compare(b.mass, a.mass)
		}
		return cmp.Compare(a.position, b.position)
	})
	if len(s.modes) > 1 {
		to := resize(rank, max(len(rank), len(s.modes)))
		for r := range s.modes {
			to[s.modes[r].position] = int32(r)
		}
		for i, k := range s.modeOf {
			s.modeOf[i] = to[k]
		}
	}
}

// spreadModes takes mean and covariance of the first listed modes.
func (s *Summarizer) spreadModes(listed int) {
	if listed == 0 {
		return
	}
	e0, n0 := s.east[0], s.north[0]
	for i, m := range s.mass {
		if k := int(s.modeOf[i]); k < listed {
			s.modes[k].e += float64(m * (s.east[i] - e0))
			s.modes[k].n += float64(m * (s.north[i] - n0))
		}
	}
	for k := range listed {
		m := &s.modes[k]
		if m.mass > 0 {
			m.e, m.n = e0+m.e/m.mass, n0+m.n/m.mass
		}
	}
	for i, m := range s.mass {
		k := int(s.modeOf[i])
		if k >= listed || s.modes[k].mass == 0 {
			continue
		}
		mode := &s.modes[k]
		m /= mode.mass
		v := s.covs[i]
		de, dn := s.east[i]-mode.e, s.north[i]-mode.n
		mode.cov.EE += float64(m * (v.EE + float64(de*de)))
		mode.cov.EN += float64(m * (v.EN + float64(de*dn)))
		mode.cov.NN += float64(m * (v.NN + float64(dn*dn)))
	}
}

// chartModes lists for each of the first listed modes the directed edges that
// hold most of it.
func (s *Summarizer) chartModes(listed int, in *Input) {
	chart := in.Cloud.Chart
	s.runMass = resize(s.runMass, listed)
	clear(s.runMass)
	for i := 0; i < len(chart); {
		low, high := listed, -1
		j := i
		for ; j < len(chart) && chart[j] == chart[i]; j++ {
			if k := int(s.modeOf[j]); k < listed {
				s.runMass[k] += s.mass[j]
				low, high = min(low, k), max(high, k)
			}
		}
		for k := low; k <= high; k++ {
			if s.runMass[k] > 0 {
				m := &s.modes[k]
				list, _ := insert(m.chart[:m.charts], Edge{Chart: chart[i], Probability: s.runMass[k]}, ChartsPerMode)
				m.charts = len(list)
				s.runMass[k] = 0
			}
		}
		i = j
	}
	for k := range listed {
		s.nameEdges(s.modes[k].chart[:s.modes[k].charts], in.Names)
	}
}
