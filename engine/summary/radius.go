package summary

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

const (
	// radiusStep is how closely a radius is found: it is at most this part of
	// itself too large.
	radiusStep = 2e-3
	// fewPieces need no sorting out before the search.
	fewPieces = 512
	// tailExcess on the mass outside covers the rules of atoms.go at the
	// protection radius; in radius it is below 0.1 %.
	tailExcess = 1.03
)

// The pieces are sorted into rings whose radii grow by a sixteenth of an octave
// or so: the exponent and the first three bits of the squared distance.
const (
	ringShift = 52 - 3
	rings     = 1024
)

// ringOf returns the ring of a distance; ringFrom is the distance at which
// ring i begins. The least begins at 2^-40 m², the last at 2^87.
func ringOf(d float64) int {
	i := int(math.Float64bits(d*d)>>ringShift) - (1023-40)<<3
	return min(max(i, 0), rings-1)
}

func ringFrom(i int) float64 {
	if i <= 0 {
		return 0
	}
	return math.Sqrt(math.Float64frombits(uint64(i+(1023-40)<<3) << ringShift))
}

// takeApart fills the pieces of the whole mixture around a centre.
func (s *Summarizer) takeApart(centre geo.Point, meanSquare float64) {
	s.discs, s.needles = s.discs[:0], s.needles[:0]
	for i, m := range s.mass {
		if m > 0 {
			s.take(m, geo.Point{E: s.east[i], N: s.north[i]}.Sub(centre), s.covs[i], meanSquare)
		}
	}
	s.sorted = len(s.discs)+len(s.needles) > fewPieces
	s.beyond, s.activeDiscs, s.activeNeedles = 0, s.discs, s.needles
	if !s.sorted {
		return
	}
	clear(s.ringMass[:])
	s.maxReach = 0
	for i := range s.discs {
		a := &s.discs[i]
		s.ringMass[ringOf(a.d)] += a.mass
		s.maxReach = math.Max(s.maxReach, a.reach)
	}
	for i := range s.needles {
		a := &s.needles[i]
		s.ringMass[ringOf(a.d)] += a.mass
		s.maxReach = math.Max(s.maxReach, a.reach)
	}
}

// bracket returns radii between which the mass outside falls to target, and
// makes the pieces whose tails differ between them the active ones.
func (s *Summarizer) bracket(target float64) (low, high float64) {
	if !s.sorted {
		return 0, math.Inf(1)
	}
	// Everything moved outward by maxReach has at most target outside the
	// ring that begins at i+1; moved inward, more than target outside i.
	mass, i := 0.0, rings-1
	for ; i >= 0; i-- {
		if mass += s.ringMass[i]; mass > target {
			break
		}
	}
	low = math.Max(ringFrom(i)-s.maxReach, 0)
	high = (ringFrom(i+1) + s.maxReach) * (1 + 1e-9)
	s.beyond = 0
	s.nearDiscs, s.nearNeedles = s.nearDiscs[:0], s.nearNeedles[:0]
	for j := range s.discs {
		a := &s.discs[j]
		switch {
		case a.d+a.reach < low:
		case a.d-a.reach > high:
			s.beyond += a.mass
		default:
			s.nearDiscs = append(s.nearDiscs, *a)
		}
	}
	for j := range s.needles {
		a := &s.needles[j]
		switch {
		case a.d+a.reach < low:
		case a.d-a.reach > high:
			s.beyond += a.mass
		default:
			s.nearNeedles = append(s.nearNeedles, *a)
		}
	}
	s.activeDiscs, s.activeNeedles = s.nearDiscs, s.nearNeedles
	return low, high
}

// radius returns the smallest radius, to radiusStep above it, outside which
// lies at most target of the mass. rms is the root mean square distance from
// the centre, which gives the first guess: ln P = -r²/rms² for a circle.
//
// The search keeps a bracket whose upper end satisfies the condition, and cuts
// it by the secant of ln P over r², which is a straight line for one circular
// Gaussian, or in the middle where that gains too little.
func (s *Summarizer) radius(target, rms float64) float64 {
	r := s.search(target, rms)
	if len(s.needles) > 0 {
		r *= cuspWidening
	}
	return r
}

func (s *Summarizer) search(target, rms float64) float64 {
	low, high := s.bracket(target)
	lnTarget := kernel.Log(target)
	r := rms * math.Sqrt(-lnTarget)
	if r == 0 {
		return 0 // all mass is in one point
	}
	yLow, yHigh := 0.0, math.NaN() // ln P - ln target at the ends, where known
	knowLow := false
	for round := range 100 {
		if !(r > low && r < high) || round%4 == 3 {
			r = math.Sqrt(math.Max(low, 1e-3*high) * high)
			if math.IsInf(high, 1) {
				r = 2*low + rms
			}
		}
		y := kernel.Log(s.outside(r)) - lnTarget // -Inf if nothing is outside
		if y <= 0 {
			high, yHigh = r, y
			// Close enough if the slope is at least that of the guess's law
			// and the bracket is narrow enough for that to be so.
			if -y < -radiusStep*lnTarget && knowLow && high < 1.2*low {
				return high
			}
		} else {
			low, yLow, knowLow = r, y, true
		}
		if high <= low*(1+radiusStep) || high < 1e-9 {
			return high
		}
		switch {
		case knowLow && yHigh > -80:
			l2, h2 := low*low, high*high
			r = math.Sqrt(l2+(h2-l2)*yLow/(yLow-yHigh)) * (1 + 0.3*radiusStep)
		case knowLow && math.IsInf(high, 1):
			r = low * math.Min(math.Sqrt(lnTarget/(lnTarget+yLow)), 2) * (1 + 0.5*radiusStep)
			if !(r > low) {
				r = 2 * low
			}
		case yHigh > -80:
			r = high * math.Sqrt(lnTarget/(lnTarget+yHigh)) * (1 - 0.5*radiusStep)
		default:
			r = 0.5 * (low + high)
		}
	}
	return high
}
