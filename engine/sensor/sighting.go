package sensor

import (
	"fmt"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// Sighting is what somebody says: the vehicle is in an area or on a named
// road, unless they are mistaken.
type Sighting struct {
	Area     [][]geo.LonLat // polygon: exterior ring, then holes
	Road     string
	Mistaken float64 // probability
	Who      string
}

// Kind is "sighting".
func (Sighting) Kind() string { return KindSighting }

// Check reports a sighting that no filter could use: neither or both of area
// and road, a ring of fewer than three corners, a probability outside [0, 1).
func (m Sighting) Check(Time) error {
	p := problems{what: KindSighting}
	if (len(m.Area) == 0) == (m.Road == "") {
		p.addf("give either an area or a road")
	}
	if !(m.Mistaken >= 0 && m.Mistaken < 1) {
		p.addf("mistaken is %v: it must be a probability from 0 to below 1", m.Mistaken)
	}
	p.name("road", m.Road)
	p.name("who", m.Who)
	n := 0
	for i, ring := range m.Area {
		n += len(ring)
		if n > maxVertices {
			p.addf("the area has more than %d corners: simplify it", maxVertices)
			break
		}
		if len(openRing(ring)) < 3 {
			p.addf("ring %d of the area has fewer than three corners", i+1)
		}
		for _, c := range ring {
			if c.Check() != nil {
				p.position(c)
				break
			}
		}
	}
	return p.err()
}

// openRing returns a ring without the closing repetition of its first corner.
func openRing(ring []geo.LonLat) []geo.LonLat {
	if n := len(ring); n > 1 && ring[0] == ring[n-1] {
		return ring[:n-1]
	}
	return ring
}

// likelihood: p(said | inside) = 1 - mistaken, p(said | outside) = mistaken;
// with mistaken 0 the outside is impossible. A road that the map does not
// know is an error; a corner of an area counts by its own place in the frame,
// edges are straight there. Source: the law of total probability.
func (m Sighting) likelihood(c *Context) (any, error) {
	in, out := kernel.Log(1-m.Mistaken), kernel.Log(m.Mistaken)
	if m.Road != "" {
		var charts []int32
		if c.Roads != nil {
			charts = c.Roads.Named(m.Road)
		}
		if len(charts) == 0 {
			return nil, fmt.Errorf("the map has no road named %q: check the spelling, or give an area", m.Road)
		}
		return newOnRoad(c.Roads, charts, in, out), nil
	}
	l := &inArea{in: in, out: out}
	for _, ring := range m.Area {
		var points []geo.Point
		for _, p := range openRing(ring) {
			q, err := c.point(p, "a corner of the area")
			if err != nil {
				return nil, err
			}
			points = append(points, q)
		}
		l.rings = append(l.rings, points)
	}
	return l, nil
}

type inArea struct {
	rings   [][]geo.Point
	in, out float64
}

var _ filter.Likelihood = (*inArea)(nil)

// Wants implements filter.Likelihood.
func (l *inArea) Wants() filter.Wants { return filter.WantPosition }

// LogLikelihood implements filter.Likelihood.
func (l *inArea) LogLikelihood(dst []float64, at *filter.Columns) {
	for i := range dst {
		if l.inside(at.East[i], at.North[i]) {
			dst[i] += l.in
		} else {
			dst[i] += l.out
		}
	}
}

// inside counts the edges that a ray to the east crosses (even-odd rule):
// holes count once more and are outside. A point on an edge is on one side
// of it by rounding.
func (l *inArea) inside(e, n float64) bool {
	odd := false
	for _, ring := range l.rings {
		a := ring[len(ring)-1]
		for _, b := range ring {
			if (a.N > n) != (b.N > n) && e < a.E+(n-a.N)/(b.N-a.N)*(b.E-a.E) {
				odd = !odd
			}
			a = b
		}
	}
	return odd
}
