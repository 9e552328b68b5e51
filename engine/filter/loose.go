package filter

import (
	"math"

	"leadline/engine/geo"
)

// Loose is a small mixture of Gaussians on the plane that lie in no cells: what
// is known of a vehicle that a belief on lines does not cover. The first two
// quantities are the position in the frame, the others those of the belief
// beside which it is kept. The masses sum to 1 while there are any. One
// goroutine owns it.
type Loose struct {
	Quantities []Quantity
	Gaussians  // without keys
}

// NewLoose returns an empty mixture beside beliefs on lines over qs, of which
// the first is the position along a line. False if there is no heading among
// them, without which nobody knows where such a vehicle goes, or no room for
// the second position.
func NewLoose(qs []Quantity) (Loose, bool) {
	if Index(qs, Heading) < 1 || len(qs)+1 > MaxK {
		return Loose{}, false
	}
	return Loose{Quantities: append([]Quantity{{Name: East}, {Name: North}}, qs[1:]...)}, true
}

// Len is the number of Gaussians.
func (l *Loose) Len() int { return len(l.Mass) }

// Clone returns a copy that shares nothing that changes.
func (l *Loose) Clone() Loose {
	c := *l
	c.Key = append([]uint64(nil), l.Key...)
	c.Mass = append([]float64(nil), l.Mass...)
	c.Mean = append([]float64(nil), l.Mean...)
	c.Cov = append([]float64(nil), l.Cov...)
	return c
}

// Heaviest returns the place of the heaviest Gaussian, its heading in the frame
// and the heading's variance; the first of equals.
func (l *Loose) Heaviest() (at geo.Point, headingRad, headingVar float64) {
	best, k := 0, len(l.Quantities)
	for i, m := range l.Mass {
		if m > l.Mass[best] {
			best = i
		}
	}
	h := Index(l.Quantities, Heading)
	mean := l.Mean[best*k:]
	return geo.Point{E: mean[0], N: mean[1]}, mean[h], l.Cov[best*k*(k+1)/2+Packed(h, h)]
}

// Predict moves the mixture by a step: x' = F x + Add + w, exactly for each
// Gaussian, as Predict does; none is cut.
func (l *Loose) Predict(step Step, w *Workspace) {
	k, n := len(l.Quantities), len(l.Mass)
	mv := &w.mover // its memory
	add := step.Add
	if step.Local != nil {
		l.locate(0, w)
		w.add, w.f = resize(w.add, 2*n), resize(w.f, 2*n*k)
		step.Local.Local(w.add, w.f, &w.at, l.Mean, l.Cov)
		mv.stepAdd = append(mv.stepAdd[:0], step.Add...)
		mv.stepF = step.fullF(mv.stepF, k)
		add = mv.stepAdd
	} else {
		mv.f.set(k, step.F)
	}
	angular := angularMask(l.Quantities)
	g := &mv.g
	for i := range n {
		l.load(g, i, k)
		if step.Local != nil {
			copy(add, w.add[2*i:2*i+2])
			copy(mv.stepF, w.f[2*i*k:2*(i+1)*k])
			mv.f.set(k, mv.stepF)
		}
		g.advance(&mv.f, add, step.Q)
		for q := range k {
			if angular>>uint(q)&1 != 0 {
				g.mean[q] = geo.WrapPi(g.mean[q])
			}
		}
		l.store(g, i, k)
	}
}

// locate fills w.at with the Gaussians' places, and makes room for columns.
func (l *Loose) locate(wants Wants, w *Workspace) {
	k := len(l.Quantities)
	w.at.Resize(wants, 2, len(l.Mass))
	for i := range l.Mass {
		w.at.East[i], w.at.North[i] = l.Mean[i*k], l.Mean[i*k+1]
	}
}

// Update weighs the mixture by a measurement and returns its log evidence, as
// Update does. plane fills the columns.
func (l *Loose) Update(plane PlaneSpace, likelihood any, w *Workspace) (logEvidence float64, err error) {
	k, n := len(l.Quantities), len(l.Mass)
	w.logs = resize(w.logs, n)
	clear(w.logs)
	switch m := likelihood.(type) {
	case LinearLikelihood:
		l.locate(m.Wants(), w)
		plane.Sample(&w.at)
		rows := m.Rows()
		w.terms.Reset(n, rows, k)
		m.Linearize(&w.terms, &w.at, l.Quantities, l.Mean)
		noise := m.Noise()
		nw := newNoiseWork(&noise, rows)
		angular := angularMask(l.Quantities)
		w.out.reset()
		var g gaussian
		for i := range n {
			l.load(&g, i, k)
			w.logs[i] = nw.condition(&g, k, angular, &w.terms, i)
			w.out.push(0, k, &g)
		}
		if logEvidence, err = weigh(l.Mass, w.logs); err != nil {
			return logEvidence, err
		}
		copy(l.Mean, w.out.Mean)
		copy(l.Cov, w.out.Cov)
		return logEvidence, nil
	case Likelihood:
		l.locate(m.Wants(), w)
		plane.Sample(&w.at)
		m.LogLikelihood(w.logs, &w.at)
		return weigh(l.Mass, w.logs)
	}
	panic("filter: not a likelihood")
}

// Mix adds another mixture over the same quantities, which is to be a share of
// the whole, and merges what is more than most Gaussians.
func (l *Loose) Mix(other *Loose, share float64, most int, w *Workspace) {
	for i := range l.Mass {
		l.Mass[i] *= 1 - share
	}
	if len(l.Mass) == 0 {
		share = 1
	}
	for _, m := range other.Mass {
		l.Key = append(l.Key, 0)
		l.Mass = append(l.Mass, m*share)
	}
	l.Mean = append(l.Mean, other.Mean...)
	l.Cov = append(l.Cov, other.Cov...)
	l.reduce(most, w)
}

// nearSquare is the squared distance, in their common spread, below which two
// Gaussians are one in any case: merging two of equal mass a sigma of each apart
// raises the variance by an eighth.
const nearSquare = 0.5

// reduce merges Gaussians by moments: those that are as good as one, and then
// the pair whose merging moves least until there are most at most. What moves is
//
//	m₁m₂/(m₁+m₂)·(Δᵀ(P₁+P₂)⁻¹Δ + Δψ²/(v₁+v₂+0.01)),
//
// Δ between the places, ψ the headings: Ward's criterion in units of their
// spread. Mass, mean and covariance of the whole are kept; what is lost is what
// the mixture is beyond them.
func (l *Loose) reduce(most int, w *Workspace) {
	k := len(l.Quantities)
	heading := Index(l.Quantities, Heading)
	angular := angularMask(l.Quantities)
	w.loose.gaussians = resize(w.loose.gaussians, len(l.Mass))
	gs := w.loose.gaussians
	for i := range gs {
		l.load(&gs[i], i, k)
	}
	for len(gs) > 1 {
		bestI, bestJ, least := -1, -1, math.Inf(1)
		for j := 1; j < len(gs); j++ {
			for i := range j {
				d := apartSquare(&gs[i], &gs[j], heading)
				cost := gs[i].mass * gs[j].mass / (gs[i].mass + gs[j].mass) * d
				switch {
				case d < nearSquare:
					cost = -1 / (1 + d) // before any other
				case len(gs) <= most:
					continue
				}
				if cost < least {
					bestI, bestJ, least = i, j, cost
				}
			}
		}
		if bestI < 0 {
			break
		}
		gs[bestI].absorb(k, &gs[bestJ], angular)
		gs[bestI].mean[heading] = geo.WrapPi(gs[bestI].mean[heading])
		gs = append(gs[:bestJ], gs[bestJ+1:]...)
	}
	l.reset()
	total := 0.0
	for i := range gs {
		total += gs[i].mass
	}
	for i := range gs {
		if gs[i].mass < Floor*total {
			gs[i].mass = 0
			continue
		}
		gs[i].mass /= total
		l.push(0, k, &gs[i])
	}
}

func apartSquare(a, b *gaussian, heading int) float64 {
	de, dn := a.mean[0]-b.mean[0], a.mean[1]-b.mean[1]
	s := sym2{a.cov[0] + b.cov[0], a.cov[1] + b.cov[1], a.cov[2] + b.cov[2]}
	inv := s.inverse(2)
	d := float64(float64(de*de)*inv.a) + float64(2*de*dn*inv.b) + float64(float64(dn*dn)*inv.c)
	v := Packed(heading, heading)
	dh := geo.WrapPi(a.mean[heading] - b.mean[heading])
	return d + float64(dh*dh)/(a.cov[v]+b.cov[v]+0.01)
}
