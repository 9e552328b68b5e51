package traffic

import "math"

// How fine a grid is: its spacings against the widths of its density. Below
// finest a sum over the grid has long converged (its error falls as
// exp(-2π²σ²/h²), 1e-34 at σ = 2 h); above coarsest a normal density begins to
// ring when it is moved by a part of a cell.
const (
	coarsest = 0.45
	finest   = 0.2
	// The limits of spacings: finer than these no bearing makes a density.
	leastStepM, leastStepMPS = 0.05, 0.02
	mostStepM, mostStepMPS   = 20, 4
)

// adapt halves or doubles spacings until they fit the density, which an update
// is about to narrow by the given factors (1 if none), within a number of cells.
func (g *grid) adapt(w *work, narrowM, narrowMPS float64, most int) (clipped float64) {
	for range 12 {
		sM, sMPS := g.widths()
		sM, sMPS = sM*narrowM, sMPS*narrowMPS
		room := g.count() <= most/2
		switch {
		case g.count() > most && g.stepM < mostStepM && g.stepM*sMPS <= g.stepMPS*sM:
			g.coarsen()
		case g.count() > most && g.stepMPS < mostStepMPS:
			clipped += g.coarsenSpeed(w)
		case room && g.stepM > coarsest*sM && g.stepM > 2*leastStepM:
			g.refine()
		case room && g.stepMPS > coarsest*sMPS && g.stepMPS > 2*leastStepMPS:
			clipped += g.refineSpeed(w)
		case g.stepM < finest*sM && g.stepM < mostStepM/2:
			g.coarsen()
		case g.stepMPS < finest*sMPS && g.stepMPS < mostStepMPS/2:
			clipped += g.coarsenSpeed(w)
		default:
			return clipped
		}
		g.trim()
	}
	return clipped
}

// The weights of the points half way and one and a half cells away: Lagrange's,
// exact for cubics.
const (
	nearHalf = 9.0 / 16
	farHalf  = -1.0 / 16
)

// refine halves the spacing along the road.
func (g *grid) refine() {
	cells := make([]float64, 0, 2*g.count()+8*len(g.slices))
	for k := range g.slices {
		s := &g.slices[k]
		if len(s.mass) == 0 {
			continue
		}
		n := 2*len(s.mass) + 5
		at := len(cells)
		cells = append(cells, make([]float64, n)...)
		d := cells[at : at+n : at+n]
		for i, m := range s.mass {
			d[2*i] += float64(0.5 * farHalf * m)
			d[2*i+2] += float64(0.5 * nearHalf * m)
			d[2*i+3] += float64(0.5 * m)
			d[2*i+4] += float64(0.5 * nearHalf * m)
			d[2*i+6] += float64(0.5 * farHalf * m)
		}
		s.fromM -= float64(1.5 * g.stepM)
		s.mass = noNegative(d)
	}
	g.stepM /= 2
	g.cells = cells
}

// coarsen doubles it: the transpose of refine, and so exact for moments up to
// the third.
func (g *grid) coarsen() {
	cells := make([]float64, 0, g.count()/2+8*len(g.slices))
	for k := range g.slices {
		s := &g.slices[k]
		if len(s.mass) == 0 {
			continue
		}
		n := len(s.mass)/2 + 4
		at := len(cells)
		cells = append(cells, make([]float64, n)...)
		d := cells[at : at+n : at+n]
		for i, m := range s.mass {
			j := i / 2
			if i%2 == 0 {
				d[j+1] += m
				continue
			}
			d[j] += float64(farHalf * m)
			d[j+1] += float64(nearHalf * m)
			d[j+2] += float64(nearHalf * m)
			d[j+3] += float64(farHalf * m)
		}
		s.fromM -= float64(2 * g.stepM)
		s.mass = noNegative(d)
	}
	g.stepM *= 2
	g.cells = cells
}

func noNegative(masses []float64) []float64 {
	for i, m := range masses {
		masses[i] = max(m, 0)
	}
	return masses
}

// leans says how the mean position changes from slice to slice: what lies
// between two slices lies between their ridges and not straight below.
func (g *grid) leans() []float64 {
	n := len(g.slices)
	means, leans := make([]float64, n), make([]float64, n)
	for k, s := range g.slices {
		var m0, m1 float64
		for i, m := range s.mass {
			m0, m1 = m0+m, m1+float64(float64(i)*m)
		}
		means[k] = math.NaN()
		if m0 > 0 {
			means[k] = s.fromM + float64(g.stepM*m1/m0)
		}
	}
	for k := range leans {
		lo, hi := max(k-1, 0), min(k+1, n-1)
		if math.IsNaN(means[lo]) {
			lo = k
		}
		if math.IsNaN(means[hi]) {
			hi = k
		}
		if d := (means[hi] - means[lo]) / float64(max(hi-lo, 1)); !math.IsNaN(d) {
			leans[k] = d
		}
	}
	return leans
}

// refineSpeed halves the spacing of speeds.
func (g *grid) refineSpeed(w *work) (clipped float64) {
	leans, old := g.leans(), g.slices
	clipped = g.rebuild(w, 2*len(old)+5, 0, func(j int) float64 {
		return old[min(max((j-3)/2, 0), len(old)-1)].fromM
	}, func(k int) []transfer {
		l := 0.5 * leans[k]
		return append(
			w.transfers[:0],
			transfer{2 * k, -3 * l, 0.5 * farHalf}, transfer{2*k + 2, -l, 0.5 * nearHalf}, transfer{2*k + 3, 0, 0.5},
			transfer{2*k + 4, l, 0.5 * nearHalf}, transfer{2*k + 6, 3 * l, 0.5 * farHalf},
		)
	})
	g.firstMPS -= float64(1.5 * g.stepMPS)
	g.stepMPS /= 2
	return clipped
}

// coarsenSpeed doubles it.
func (g *grid) coarsenSpeed(w *work) (clipped float64) {
	leans, old := g.leans(), g.slices
	clipped = g.rebuild(w, len(old)/2+4, 0, func(j int) float64 {
		return old[min(max(2*(j-1), 0), len(old)-1)].fromM
	}, func(k int) []transfer {
		j, l := k/2, leans[k]
		if k%2 == 0 {
			return append(w.transfers[:0], transfer{j + 1, 0, 1})
		}
		return append(
			w.transfers[:0],
			transfer{j, -3 * l, farHalf}, transfer{j + 1, -l, nearHalf}, transfer{j + 2, l, nearHalf}, transfer{j + 3, 3 * l, farHalf},
		)
	})
	g.firstMPS -= float64(2 * g.stepMPS)
	g.stepMPS *= 2
	return clipped
}
