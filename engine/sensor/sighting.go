package sensor

import "leadline/engine/geo"

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
