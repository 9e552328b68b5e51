package summary

import (
	"math"
	"slices"

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
	s.discs, s.needles, s.dots = s.discs[:0], s.needles[:0], false
	if s.dim == 1 && len(s.mass) > fewPieces {
		s.needles = slices.Grow(s.needles, 2*len(s.mass)) // a wide belief has mostly one or two each
	}
	if s.square != (Cov{}) {
		s.discs = slices.Grow(s.discs, len(s.mass)) // and a lattice just one
	}
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
		s.ringMass[ringOf(a.distance())] += a.mass
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
		switch d := a.distance(); {
		case d+a.reach < low:
		case d-a.reach > high:
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
// the centre.
func (s *Summarizer) radius(target, rms float64) float64 {
	r := s.search(target, rms)
	if len(s.needles) > 0 || s.dots {
		r *= cuspWidening
	}
	return r
}

// search keeps a bracket whose upper end satisfies the condition. It guesses by
// the secant, over the last two radii, of ln P over r², which is a straight line
// for one circular Gaussian: the first from P = 1 at 0 and ln P = -r²/rms². Where
// the guess leaves the bracket, and every fourth time, it takes the middle.
func (s *Summarizer) search(target, rms float64) float64 {
	low, high := s.bracket(target)
	lnTarget := kernel.Log(target)
	r := rms * math.Sqrt(-lnTarget)
	if r == 0 {
		return 0 // all mass is in one point
	}
	// The last point, as r² and y = ln P - ln target: y falls through 0.
	lastR2, lastY := 0.0, -lnTarget
	for round := 1; round <= 100; round++ {
		if !(r > low && r < high) || round%4 == 0 {
			r = 0.5 * (low + high)
			if math.IsInf(high, 1) {
				r = 2*low + rms
			}
		}
		r2 := r * r
		y := kernel.Log(s.outside(r)) - lnTarget // -Inf if nothing is outside
		slope := (y - lastY) / (r2 - lastR2)
		if y <= 0 {
			high = r
			// Done if the slope here says that the root is radiusStep away:
			// dr/r = y/(2r²·slope). It is the slope here if it was taken
			// nearby. (It is -Inf where nothing is outside: far from the root.)
			if !math.IsInf(y, -1) && y >= 2*r2*slope*radiusStep && math.Abs(r2-lastR2) < 0.4*r2 {
				return high
			}
		} else {
			low = r
		}
		if high <= low*(1+radiusStep) || high < 1e-9 {
			return high
		}
		root := r2 - y/slope
		lastR2, lastY = r2, y
		r = math.Sqrt(root) * (1 + 0.4*radiusStep) // NaN goes to the middle
	}
	return high
}
