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
	for i := s.takeSquares(centre); i < len(s.mass); i++ {
		if m := s.mass[i]; m > 0 {
			s.take(m, geo.Point{E: s.east[i], N: s.north[i]}.Sub(centre), s.covs[i], meanSquare)
		}
	}
	s.known = s.known[:0]
	if s.sorted = len(s.discs)+len(s.needles) > fewPieces; !s.sorted {
		return
	}
	clear(s.ringMass[:])
	s.maxReach = 0
	for i := range s.discs {
		a := &s.discs[i]
		s.ringMass[ringOf(a.d)] += a.mass
		s.maxReach = max(s.maxReach, a.reach)
	}
	for i := range s.needles {
		a := &s.needles[i]
		s.ringMass[ringOf(a.distance())] += a.mass
		s.maxReach = max(s.maxReach, a.reach)
	}
}

// takeSquares takes the cells of a lattice, which are alike, if each is one disc; it returns how
// many entries that are.
func (s *Summarizer) takeSquares(centre geo.Point) int {
	if s.square == (Cov{}) {
		return 0
	}
	l1, l2 := s.covs[0].eigen()
	if l1 == 0 || l2 < asDisc*asDisc*l1 {
		return 0
	}
	sigma := math.Sqrt(l1)
	is, reach := 1/sigma, tailEnd*sigma
	east, north := s.east[:s.cells], s.north[:s.cells]
	for i, m := range s.mass[:s.cells] {
		if m > 0 {
			s.discs = append(s.discs, disc{m, geo.Point{E: east[i], N: north[i]}.Sub(centre).Norm(), is, reach})
		}
	}
	return s.cells
}

// lightShare is the part of the mass asked for outside that pieces may hold together
// which count as outside, wherever they are: their own mass then tells next to nothing
// of the radius.
const lightShare = 1e-3

// bracket returns radii between which the mass outside falls to target, and
// makes the pieces whose tails differ between them the near ones; of few pieces those
// that are not too light to tell.
func (s *Summarizer) bracket(target float64) (low, high float64) {
	s.beyond, s.nearDiscs = 0, s.nearDiscs[:0]
	if !s.sorted {
		light := lightShare * target / float64(len(s.discs)+len(s.needles))
		for i := range s.discs {
			if m := s.discs[i].mass; m < light {
				s.beyond += m
			} else {
				s.nearDiscs = append(s.nearDiscs, s.discs[i])
			}
		}
		s.keepNear(func(a *needle) (near, beyond bool) { return a.mass >= light, true })
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
	low = max(ringFrom(i)-s.maxReach, 0)
	high = (ringFrom(i+1) + s.maxReach) * (1 + 1e-9)
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
	s.keepNear(func(a *needle) (near, beyond bool) {
		d := a.distance()
		beyond = d-a.reach > high
		return !beyond && !(d+a.reach < low), beyond
	})
	return low, high
}

// keepNear makes the needles of which that is said the near ones, and counts the mass
// of others that are beyond.
func (s *Summarizer) keepNear(where func(a *needle) (near, beyond bool)) {
	n, c := len(s.needles), &s.near
	if s.sorted { // of many, few are
		n = 0
		for i := range s.needles {
			if near, _ := where(&s.needles[i]); near {
				n++
			}
		}
	}
	c.resize(n)
	n = 0
	mass, w2, v, is := c.mass, c.w2[:len(c.mass)], c.v[:len(c.mass)], c.is[:len(c.mass)]
	for i := range s.needles {
		a := &s.needles[i]
		switch near, beyond := where(a); {
		case near:
			mass[n], w2[n], v[n], is[n] = a.mass, a.w2, a.v, a.is
			n++
		case beyond:
			s.beyond += a.mass
		}
	}
	c.resize(n)
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

// tried is a squared radius and ln of the mass outside.
type tried struct{ r2, ln float64 }

// guess returns a first radius for a target below those of what was tried before: on
// the straight line of ln P over r² through the last two, through P = 1 at 0 and the
// root mean square if there are none; and the last of them.
func (s *Summarizer) guess(lnTarget, rms float64) (r float64, last tried) {
	if n := len(s.known); n >= 2 {
		a, b := s.known[n-2], s.known[n-1]
		if r := math.Sqrt(b.r2 + (lnTarget-b.ln)*(b.r2-a.r2)/(b.ln-a.ln)); r > 0 {
			return r * (1 + 0.4*radiusStep), b
		}
	}
	return rms * math.Sqrt(-lnTarget), tried{}
}

// search keeps a bracket whose upper end satisfies the condition. It guesses by
// the secant, over the last two radii, of ln P over r², which is a straight line
// for one circular Gaussian: see guess for the first. Where
// the guess leaves the bracket, and every fourth time, it takes the middle.
func (s *Summarizer) search(target, rms float64) float64 {
	low, high := s.bracket(target)
	lnTarget := kernel.Log(target)
	r, last := s.guess(lnTarget, rms)
	if r == 0 {
		return 0 // all mass is in one point
	}
	// The last point's y = ln P - ln target: y falls through 0.
	lastR2, lastY := last.r2, last.ln-lnTarget
	for round := 1; round <= 100; round++ {
		if !(r > low && r < high) || round%4 == 0 {
			r = 0.5 * (low + high)
			if math.IsInf(high, 1) {
				r = 2*low + rms
			}
		}
		r2 := r * r
		ln := kernel.Log(s.outside(r))
		y := ln - lnTarget // -Inf if nothing is outside
		s.known = append(s.known, tried{r2, ln})
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
