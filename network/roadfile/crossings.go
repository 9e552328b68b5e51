package roadfile

import (
	"fmt"

	"leadline/engine/geo"
)

const maxCrossings = 5_000_000

// splitCrossings puts a common node where two segments on one layer cross
// inside both. Crossings that fall on one spot of a segment share a node only
// if they fall on the same spot of the other one as well.
func (s *stitcher) splitCrossings() error {
	for i := range s.lines {
		l := &s.lines[i]
		for k := range len(l.nodes) - 1 {
			if err := s.splitSegment(int32(i), int32(k)); err != nil {
				return err
			}
			if err := s.checkWork(); err != nil {
				return err
			}
		}
	}
	return nil
}

func (s *stitcher) splitSegment(line, seg int32) error {
	l := &s.lines[line]
	a, b := s.find(l.nodes[seg]), s.find(l.nodes[seg+1])
	box := geo.EmptyBox().Extend(s.pos[a]).Extend(s.pos[b])
	full := false
	s.tree.Search([2]float64{box.Min.E, box.Min.N}, [2]float64{box.Max.E, box.Max.N},
		func(_, _ [2]float64, r run) bool {
			other := &s.lines[r.line]
			s.work += runSegments
			if r.line < line || other.layer() != l.layer() {
				return true
			}
			for k := r.first; k < r.last; k++ {
				if r.line == line && k <= seg {
					continue // each pair once
				}
				p, q := s.find(other.nodes[k]), s.find(other.nodes[k+1])
				if p == a || p == b || q == a || q == b {
					continue
				}
				t, u, ok := intersect(s.pos[a], s.pos[b], s.pos[p], s.pos[q])
				if !ok {
					continue
				}
				n := int32(len(s.pos))
				v := s.pos[b].Sub(s.pos[a])
				s.pos = append(s.pos, geo.Point{E: s.pos[a].E + float64(t*v.E), N: s.pos[a].N + float64(t*v.N)})
				s.alias = append(s.alias, n)
				s.cuts = append(s.cuts, cut{line, seg, t, n}, cut{r.line, k, u, n})
				s.notes.Crossings++
				if s.notes.Crossings > maxCrossings {
					full = true
					return false
				}
			}
			return true
		})
	if full {
		return fmt.Errorf("more than %d crossings: the lines are no road network; read them without splitting crossings", maxCrossings)
	}
	return nil
}

// intersect returns where a-b and p-q cross, as fractions of each, if they do
// so inside both.
func intersect(a, b, p, q geo.Point) (t, u float64, ok bool) {
	v, w, d := b.Sub(a), q.Sub(p), p.Sub(a)
	det := float64(v.E*w.N) - float64(v.N*w.E)
	if det == 0 {
		return 0, 0, false
	}
	t = (float64(d.E*w.N) - float64(d.N*w.E)) / det
	u = (float64(d.E*v.N) - float64(d.N*v.E)) / det
	return t, u, t > 0 && t < 1 && u > 0 && u < 1
}
