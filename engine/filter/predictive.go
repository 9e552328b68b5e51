package filter

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// Predictive says where a measurement fell in the distribution that the belief
// had for it before it was weighed: the probability integral transform (Dawid,
// "Present position and potential developments", J. R. Stat. Soc. A 147, 1984).
// If belief and likelihood are right, each probability is uniform, and those of
// one measurement after the other are independent.
//
// With the residual r_i of Gaussian (or cell) i, of mass m_i, and the variance
// S_i of its prediction, noise included,
//
//	Below = Σ m_i (Σ_c w_c Φ(r_i/√S_ic) + w_flat U(r_i)),
//
// over the parts c of the noise; U is the distribution of outliers,
// Noise.FlatRank or, where that is 0, FlatRank about the prediction. Of two components the second is taken given
// the first (Rosenblatt, Ann. Math. Stat. 23, 1952). On a circle the
// distributions begin opposite to the prediction of the heaviest Gaussian.
type Predictive struct {
	// Rows is how many components there are: 0 where nothing can be said, of a
	// likelihood that is not linear, or where more than a tenth of the mass lies
	// where the measurement has a density of its own (Terms.Flat). The others are
	// taken as if they were all.
	Rows int
	// Below and Above are the probabilities of less and of more, both kept for
	// the digits of their tails.
	Below, Above [2]float64
	// Weighed says that Wider was computed: for noise with a flat part, and not on a
	// circle. Wider is ln of how much denser a component would be if all that is not
	// flat were spread twice as wide, of the second given the first. A score hides
	// it: with 2 % of outliers an error of three sigmas has one of 2.2.
	Weighed bool
	Wider   [2]float64
}

// Score is the normal score Φ⁻¹(Below) of a component: standard normal if the
// prediction is right. It is within ±38.
func (p *Predictive) Score(row int) float64 {
	below, above := max(p.Below[row], 1e-300), max(p.Above[row], 1e-300)
	if above < below {
		return kernel.NormalQuantile(above)
	}
	return -kernel.NormalQuantile(below)
}

// Foretell makes the next update with this workspace write where its measurement
// fell into p, before it changes the belief; the update is the same with it. A
// measurement that is tempered (Noise.Power) is taken as it would be alone: who
// asks sees to it that those asked for do not share their errors.
func (w *Workspace) Foretell(p *Predictive) {
	*p = Predictive{}
	w.foretell = p
}

// asked returns what Foretell asked for, once.
func (w *Workspace) asked() *Predictive {
	p := w.foretell
	w.foretell = nil
	return p
}

// foretell is what a belief of Gaussians predicts, by the terms in w.
func (b *Belief) foretell(p *Predictive, l LinearLikelihood, noise *Noise, w *Workspace) {
	k, m := len(b.Quantities), l.Rows()
	turned, _ := l.(Turned)
	_, circular := l.(Circular)
	q := &w.predictions
	q.reset()
	var g gaussian
	var gain [2][MaxK]float64
	for i, mass := range b.Mass {
		b.load(&g, i, k)
		q.add(mass, &w.terms, i, m, g.ofRows(&gain, k, m, w.terms.Row[i*m*k:(i+1)*m*k]), &w.at, turned)
	}
	q.into(p, noise, m, circular)
}

// Circular is a linear likelihood whose residual is an angle, within ±π.
type Circular interface{ Circular() }

// Turned is a linear likelihood with two rows along axes that differ from place
// to place. Axes returns the first and the second one's unit vectors at position
// i, in axes that all have in common.
type Turned interface {
	Axes(at *Columns, i int) (first, second geo.Point)
}

// fullEnough is the mass that must be predicted by Gaussians.
const fullEnough = 0.9

// predictions are what each Gaussian or cell predicts, collected before an
// update: mass, residual, variance of g(x), and what the map adds to the noise.
type predictions struct {
	mass        []float64
	residual    [][2]float64
	variance    []sym2
	extra, wide []float64
	axes        [][2]geo.Point // empty unless Turned
	total       float64        // mass, with that which is not predicted
	// least says that variance is not added to the noise but the least it has.
	least bool
}

func (q *predictions) reset() {
	q.mass, q.residual, q.variance = q.mass[:0], q.residual[:0], q.variance[:0]
	q.extra, q.wide, q.axes, q.total, q.least = q.extra[:0], q.wide[:0], q.axes[:0], 0, false
}

// add keeps what position i of the terms predicts; p is the variance of g(x), or
// the least that the noise has.
func (q *predictions) add(mass float64, t *Terms, i, m int, p sym2, at *Columns, turned Turned) {
	q.total += mass
	if flat := t.Flat[i]; flat == flat || mass == 0 {
		return
	}
	var r [2]float64
	copy(r[:], t.Residual[i*m:(i+1)*m])
	q.mass = append(q.mass, mass)
	q.residual = append(q.residual, r)
	q.variance = append(q.variance, p)
	q.extra = append(q.extra, t.Extra[i])
	q.wide = append(q.wide, t.ExtraOf(i, 1))
	if turned != nil {
		a, b := turned.Axes(at, i)
		q.axes = append(q.axes, [2]geo.Point{a, b})
	}
}

// into writes what was collected into p.
func (q *predictions) into(p *Predictive, noise *Noise, m int, circular bool) {
	*p = Predictive{}
	known, heaviest := 0.0, 0
	for i, mass := range q.mass {
		known += mass
		if mass > q.mass[heaviest] {
			heaviest = i
		}
	}
	if !(known >= fullEnough*q.total) || known == 0 {
		return
	}
	var sum [2]tails
	given := 0.0 // density of the first component, weighted
	var as, wide [2]float64
	p.Weighed = noise.FlatWeight > 0 && !circular
	for i, mass := range q.mass {
		mass /= known
		if circular {
			sum[0].add(mass, q.circle(i, noise, q.residual[heaviest][0]))
			continue
		}
		r, turn := q.residual[i], [2]geo.Point{{E: 1}, {N: 1}}
		if len(q.axes) > 0 {
			turn = q.axes[i]
			r = [2]float64{float64(turn[0].E*r[0]) + float64(turn[1].E*r[1]), float64(turn[0].N*r[0]) + float64(turn[1].N*r[1])}
		}
		for c := range noise.Parts {
			s, weight := q.spread(i, c, m, noise), mass*noise.Parts[c].Weight
			if m == 1 {
				sigma := math.Sqrt(s.a)
				z := (r[0] - noise.Parts[c].Mean) / sigma
				sum[0].add(weight, normalTails(z))
				if p.Weighed {
					as[0] += float64(weight*kernel.NormalDensity(z)) / sigma
					wide[0] += float64(0.5*weight*kernel.NormalDensity(0.5*z)) / sigma
				}
				continue
			}
			s = s.turned(turn)
			sigma := math.Sqrt(s.a)
			z := r[0] / sigma
			sum[0].add(weight, normalTails(z))
			slope := s.b / s.a
			density := float64(weight*kernel.NormalDensity(z)) / sigma
			rest := math.Sqrt(s.c - float64(slope*s.b))
			y := (r[1] - float64(slope*r[0])) / rest
			sum[1].add(density, normalTails(y))
			given += density
			if p.Weighed {
				as[1] += float64(density*kernel.NormalDensity(y)) / rest
				half := float64(0.5*weight*kernel.NormalDensity(0.5*z)) / sigma
				wide[0] += half
				wide[1] += float64(0.5*half*kernel.NormalDensity(0.5*y)) / rest
			}
		}
		if flat := mass * noise.FlatWeight; flat > 0 {
			// As dense wherever it falls, as in the update: beyond the span, too, an
			// outlier says nothing of the spread.
			as[m-1] += float64(flat * noise.FlatDensity)
			wide[m-1] += float64(flat * noise.FlatDensity)
			if m == 1 {
				rank := noise.FlatRank
				if rank == 0 {
					rank = FlatRank(r[0], -0.5/noise.FlatDensity, 0.5/noise.FlatDensity)
				}
				sum[0].add(flat, tails{rank, 1 - rank})
				continue
			}
			side := math.Sqrt(noise.FlatDensity)
			half := 0.5 / side
			first, second := FlatRank(r[0], -half, half), FlatRank(r[1], -half, half)
			sum[0].add(flat, tails{first, 1 - first})
			sum[1].add(flat*side, tails{second, 1 - second})
			given += flat * side
			wide[0] += flat * side
		}
	}
	p.Rows, p.Below[0], p.Above[0] = 1, sum[0].below, sum[0].above
	if m == 2 {
		as[0] = given
	}
	if p.Weighed = p.Weighed && as[0] > 0 && (m == 1 || as[1] > 0); p.Weighed {
		p.Wider[0] = kernel.Log(wide[0] / as[0])
		if m == 2 {
			p.Wider[1] = kernel.Log(wide[1]/as[1]) - p.Wider[0]
		}
	}
	if m == 2 && given > 0 {
		p.Rows, p.Below[1], p.Above[1] = 2, sum[1].below/given, sum[1].above/given
	}
}

// spread is the covariance of what entry i predicts by part c of the noise, of m
// components.
func (q *predictions) spread(i, c, m int, n *Noise) sym2 {
	p, cov, extra := q.variance[i], &n.Parts[c].Cov, q.extra[i]
	if c > 0 {
		extra = q.wide[i]
	}
	if q.least {
		p = sym2{cov[0] + extra, cov[1], cov[2] + extra}.short(m, p)
	}
	return sym2{p.a + cov[0] + extra, p.b + cov[1], p.c + cov[2] + extra}
}

// turned is the covariance in the axes that all have in common.
func (s sym2) turned(axes [2]geo.Point) sym2 {
	a, b := axes[0], axes[1]
	return sym2{
		float64(a.E*a.E*s.a) + float64(2*a.E*b.E*s.b) + float64(b.E*b.E*s.c),
		float64(a.E*a.N*s.a) + float64((a.E*b.N+a.N*b.E)*s.b) + float64(b.E*b.N*s.c),
		float64(a.N*a.N*s.a) + float64(2*a.N*b.N*s.b) + float64(b.N*b.N*s.c),
	}
}
