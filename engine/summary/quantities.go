package summary

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// noHeading is the standard deviation of a direction that is uniform on the
// circle, π/sqrt(3).
const noHeading = math.Pi / 1.7320508075688772

// quantities fills heading, nuisances and entropy.
//
// A quantity's mean is Σ m·mean and its variance Σ m·(var + (mean - Mean)²).
// For an angle the mean resultant is Σ m·e^(-var/2)·(sin, cos), the one of
// wrapped Gaussians; the mean is its direction and sigma sqrt(-2 ln R), which
// is the Gaussian's own where it is small (Mardia & Jupp, Directional
// Statistics, ch. 2 and 3).
func (s *Summarizer) quantities(dst *Posterior, in *Input) {
	b := in.Belief
	k := b.K()
	dst.Heading = Direction{}
	dst.Nuisances = dst.Nuisances[:0]
	for q := b.Dim; q < k; q++ {
		switch b.Quantities[q].Name {
		case filter.Heading:
			dst.Heading = s.heading(in, q)
			continue
		case filter.Speed, filter.VelocityEast, filter.VelocityNorth:
			continue // Posterior.Speed
		}
		mean, sigma := s.moments(in, q, k, b.Quantities[q].Angular)
		dst.Nuisances = append(dst.Nuisances, Nuisance{b.Quantities[q].Name, mean, sigma})
	}
	dst.EntropyNats = s.entropy(in)
}

// heading is the vehicle's, which is quantity q.
func (s *Summarizer) heading(in *Input, q int) Direction {
	mean, sigma := s.moments(in, q, in.Belief.K(), true)
	return Direction{true, geo.WrapCompass(mean + s.turned.g), sigma}
}

func (s *Summarizer) moments(in *Input, q, k int, angular bool) (mean, sigma float64) {
	means, covs := in.Cloud.Mean, in.Belief.Cov
	size, at := k*(k+1)/2, filter.Packed(q, q)
	if angular {
		sin, cos := 0.0, 0.0
		lastVar, shrink := 0.0, 1.0
		for i, m := range s.mass[:s.cells] {
			if v := covs[i*size+at]; v != lastVar {
				lastVar, shrink = v, kernel.Exp(-0.5*v)
			}
			m *= shrink
			sn, c := kernel.Sincos(means[i*k+q])
			sin += float64(m * sn)
			cos += float64(m * c)
		}
		s.offMoments(in, q, func(m, mean, v float64) {
			m *= kernel.Exp(-0.5 * v)
			sn, c := kernel.Sincos(mean)
			sin += float64(m * sn)
			cos += float64(m * c)
		})
		r := float64(sin*sin) + float64(cos*cos)
		sigma = noHeading
		if r > 0 {
			sigma = min(math.Sqrt(max(-kernel.Log(r), 0)), noHeading)
		}
		return kernel.Atan2(sin, cos), sigma
	}
	first := means[q]
	for i, m := range s.mass[:s.cells] {
		mean += float64(m * (means[i*k+q] - first))
	}
	s.offMoments(in, q, func(m, x, _ float64) { mean += float64(m * (x - first)) })
	mean += first
	variance := 0.0
	for i, m := range s.mass[:s.cells] {
		d := means[i*k+q] - mean
		variance += float64(m * (covs[i*size+at] + float64(d*d)))
	}
	s.offMoments(in, q, func(m, x, v float64) {
		d := x - mean
		variance += float64(m * (v + float64(d*d)))
	})
	return mean, math.Sqrt(max(variance, 0))
}

// offMoments calls use with the mass, mean and variance of the quantity q of each
// Gaussian that is off the map.
func (s *Summarizer) offMoments(in *Input, q int, use func(m, mean, variance float64)) {
	if in.Off == nil {
		return
	}
	l := in.Off.Loose
	k := len(l.Quantities)
	size, at := k*(k+1)/2, filter.Packed(q+1, q+1)
	for i, m := range s.mass[s.cells:] {
		use(m, l.Mean[i*k+q+1], l.Cov[i*size+at])
	}
}

// entropy returns the differential entropy of the place of a vehicle on the map, in nats, relative to
// 1 m or 1 m²: by the chain rule that of the cells and the mean one within a
// cell,
//
//	H = Σ m·(-ln m + h),  h = min(ln size, ½ ln((2πe)^d·det)),
//
// where det is the variance (or determinant) of what the cell holds; cells of a
// lattice without Gaussians are taken as filled. Both parts
// of h bound the entropy within the cell; the first is met by a cell that is
// filled evenly, the second by a Gaussian much narrower than it. So H does not
// depend on the width of the cells, except by some 0.15 nat where they are about
// as wide as the whole belief. A point has entropy ln(1e-12).
func (s *Summarizer) entropy(in *Input) float64 {
	c, b := in.Cloud, in.Belief
	if s.dim == 2 && b.K() == 0 {
		return s.latticeEntropy(b.Lattice.SpacingM)
	}
	h, last, lastLog := 0.0, 1.0, 0.0
	for i := 0; i < s.cells; {
		// One cell: entries i to j.
		j := i + 1
		if len(b.Key) > 0 {
			for j < s.cells && b.Key[j] == b.Key[i] {
				j++
			}
		}
		m := 0.0
		for _, v := range s.mass[i:j] {
			m += v
		}
		m /= s.onShare
		if m > leastEntropy {
			// The smaller of size² and (2πe)^d·det, with its logarithm only
			// where it is not that of the last cell.
			var size2, det float64
			if s.dim == 1 {
				size2 = in.Lines.WidthM[c.Chart[i]]
				size2 *= size2
				det = twoPiE * s.alongVariance(c, i, j, m*s.onShare)
			} else {
				size2 = b.Lattice.SpacingM * b.Lattice.SpacingM
				size2 *= size2
				v := s.cellCov(i, j, m)
				det = twoPiE * twoPiE * (float64(v.EE*v.NN) - float64(v.EN*v.EN))
			}
			if v := max(min(size2, det), 1e-24); v != last {
				last, lastLog = v, 0.5*kernel.Log(v)
			}
			h += float64(m * (lastLog - kernel.Log(m)))
		}
		i = j
	}
	return h
}

// latticeEntropy is entropy of a lattice, whose cells are filled.
func (s *Summarizer) latticeEntropy(spacingM float64) float64 {
	size2 := spacingM * spacingM
	h, size := 0.0, 0.5*kernel.Log(max(size2*size2, 1e-24))
	var share, logs [256]float64
	for left := s.mass[:s.cells]; len(left) > 0; {
		run := left[:min(len(share), len(left))]
		left = left[len(run):]
		for i, m := range run {
			share[i] = m / s.onShare
		}
		kernel.Logs(logs[:len(run)], share[:len(run)])
		for i, m := range share[:len(run)] {
			if m > leastEntropy {
				h += float64(m * (size - logs[i]))
			}
		}
	}
	return h
}

const (
	twoPiE = 2 * math.Pi * math.E
	// leastEntropy is the mass below which a cell is left out: even a million
	// of them change the entropy by less than 1e-6 nats.
	leastEntropy = 1e-14
)

// alongVariance is the variance along the line of entries i to j, whose mass is
// m.
func (s *Summarizer) alongVariance(c *filter.Cloud, i, j int, m float64) float64 {
	if j == i+1 {
		return c.VarM2[i]
	}
	mean, v := 0.0, 0.0
	for e := i; e < j; e++ {
		mean += float64(s.mass[e] * (c.AlongM[e] - c.AlongM[i]))
	}
	mean = c.AlongM[i] + mean/m
	for e := i; e < j; e++ {
		d := c.AlongM[e] - mean
		v += float64(s.mass[e] * (c.VarM2[e] + float64(d*d)))
	}
	return v / m
}

// cellCov is the covariance of entries i to j, whose mass is m.
func (s *Summarizer) cellCov(i, j int, m float64) Cov {
	if j == i+1 {
		return s.covs[i]
	}
	var mean geo.Point
	for e := i; e < j; e++ {
		mean.E += float64(s.mass[e] / m * (s.east[e] - s.east[i]))
		mean.N += float64(s.mass[e] / m * (s.north[e] - s.north[i]))
	}
	var c Cov
	for e := i; e < j; e++ {
		w, v := s.mass[e]/m, s.covs[e]
		de, dn := s.east[e]-s.east[i]-mean.E, s.north[e]-s.north[i]-mean.N
		c.EE += float64(w * (v.EE + float64(de*de)))
		c.EN += float64(w * (v.EN + float64(de*dn)))
		c.NN += float64(w * (v.NN + float64(dn*dn)))
	}
	return c
}
