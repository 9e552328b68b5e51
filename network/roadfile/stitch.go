package roadfile

import (
	"cmp"
	"errors"
	"math"
	"slices"

	"github.com/tidwall/rtree"

	"leadline/engine/geo"
)

// stitcher joins lines whose ends come near.
type stitcher struct {
	*collector
	pos   []geo.Point // of the nodes, in the frame
	alias []int32     // the node that a node was joined to, itself if none
	group map[int32][]int32
	uses  occurrences
	tree  rtree.RTreeG[run]
	cuts  []cut
	work  int // segments looked at
}

// run is a few consecutive segments of a line.
type run struct{ line, first, last int32 }

const runSegments = 8

// cut is a node to be put into a segment of a line, a fraction of its length
// from its start.
type cut struct {
	line, segment int32
	at            float64
	node          int32
}

// occurrences lists, for each node, where lines have it.
type occurrences struct {
	start []int32
	where [][2]int32 // line, index in line
}

func (c *collector) occurrences() occurrences {
	o := occurrences{start: make([]int32, len(c.at)+1)}
	for i := range c.lines {
		for _, n := range c.lines[i].nodes {
			o.start[n+1]++
		}
	}
	for i := range c.at {
		o.start[i+1] += o.start[i]
	}
	o.where = make([][2]int32, o.start[len(c.at)])
	next := slices.Clone(o.start)
	for i := range c.lines {
		for k, n := range c.lines[i].nodes {
			o.where[next[n]] = [2]int32{int32(i), int32(k)}
			next[n]++
		}
	}
	return o
}

func (o *occurrences) of(n int32) [][2]int32 { return o.where[o.start[n]:o.start[n+1]] }

func newStitcher(c *collector, f geo.Frame) *stitcher {
	s := &stitcher{collector: c, group: map[int32][]int32{}}
	s.pos = make([]geo.Point, len(c.at))
	s.alias = make([]int32, len(c.at))
	for i, p := range c.at {
		s.pos[i] = f.Forward(geo.FromDegrees(p[0], p[1]))
		s.alias[i] = int32(i)
	}
	s.uses = c.occurrences()
	return s
}

func (s *stitcher) find(n int32) int32 {
	for s.alias[n] != n {
		n = s.alias[n]
	}
	return n
}

// members returns the nodes that are joined to root, and itself.
func (s *stitcher) members(root int32) []int32 {
	return append([]int32{root}, s.group[root]...)
}

func (s *stitcher) buildTree() {
	for i := range s.lines {
		nodes := s.lines[i].nodes
		for k := 0; k < len(nodes)-1; k += runSegments {
			r := run{int32(i), int32(k), int32(min(k+runSegments, len(nodes)-1))}
			box := geo.EmptyBox()
			for _, n := range nodes[r.first : r.last+1] {
				box = box.Extend(s.pos[n])
			}
			s.tree.Insert([2]float64{box.Min.E, box.Min.N}, [2]float64{box.Max.E, box.Max.N}, r)
		}
	}
}

// joinEnds joins each end of a line to what it comes near, in the order of the
// lines.
func (s *stitcher) joinEnds() error {
	if s.opt.JoinM < 0 {
		return nil
	}
	seen := make([]bool, len(s.at))
	for i := range s.lines {
		nodes := s.lines[i].nodes
		if nodes[0] == nodes[len(nodes)-1] {
			continue
		}
		for _, n := range [2]int32{nodes[0], nodes[len(nodes)-1]} {
			if n = s.find(n); !seen[n] {
				seen[n] = true
				s.joinEnd(n)
				if err := s.checkWork(); err != nil {
					return err
				}
			}
		}
	}
	return nil
}

// checkWork refuses input in which far more segments lie near one another than
// in any road network: on average a few of them, and in a city's densest
// corner some dozens, are looked at for each line.
func (s *stitcher) checkWork() error {
	if s.work > 10_000_000+1000*s.notes.Vertices {
		return errors.New("too many lines lie on top of one another to be joined: this is no road network, or the joining distance is too large")
	}
	return nil
}

// target is the best place found to join an end to.
type target struct {
	dist float64
	line int32
	seg  int32
	at   float64
	node int32 // an existing node, or -1: inside the segment
}

func (t target) better(u target) bool {
	if c := cmp.Compare(t.dist, u.dist); c != 0 {
		return c < 0
	}
	if c := cmp.Compare(t.line, u.line); c != 0 {
		return c < 0
	}
	return t.seg < u.seg
}

func (s *stitcher) joinEnd(n int32) {
	p, tol := s.pos[n], s.opt.JoinM
	best := target{dist: math.Inf(1)}
	var near map[int32]bool // found when first needed: most ends have nothing near
	var layers map[layerKey]bool
	s.tree.Search([2]float64{p.E - tol, p.N - tol}, [2]float64{p.E + tol, p.N + tol},
		func(_, _ [2]float64, r run) bool {
			nodes := s.lines[r.line].nodes
			s.work += runSegments
			for k := r.first; k < r.last; k++ {
				a, b := s.find(nodes[k]), s.find(nodes[k+1])
				if a == n || b == n || a == b {
					continue
				}
				t, d := project(p, s.pos[a], s.pos[b])
				if d > tol {
					continue
				}
				if near == nil {
					near, layers = s.around(n)
				}
				if near[a] || near[b] {
					continue
				}
				if x, ok := s.target(p, r.line, k, a, b, t, d, layers); ok && x.better(best) {
					best = x
				}
			}
			return true
		})
	if math.IsInf(best.dist, 1) {
		return
	}
	s.notes.JoinedEnds++
	if best.node >= 0 {
		s.alias[n] = best.node
		s.group[best.node] = append(append(s.group[best.node], n), s.group[n]...)
		delete(s.group, n)
		return
	}
	nodes := s.lines[best.line].nodes
	a, b := s.pos[s.find(nodes[best.seg])], s.pos[s.find(nodes[best.seg+1])]
	s.pos[n] = geo.Point{E: a.E + float64(best.at*(b.E-a.E)), N: a.N + float64(best.at*(b.N-a.N))}
	s.cuts = append(s.cuts, cut{best.line, best.seg, best.at, n})
}

// target says where on the segment a-b of a line an end at p would be joined:
// at a vertex if one is within tolerance, the nearer of the two; otherwise
// where it is nearest. A line on another layer is joined at its ends alone.
func (s *stitcher) target(p geo.Point, line, seg, a, b int32, at, dist float64, layers map[layerKey]bool) (target, bool) {
	nodes := s.lines[line].nodes
	same := layers[s.lines[line].layer()]
	x := target{math.Inf(1), line, seg, at, -1}
	if da := p.Sub(s.pos[a]).Norm(); da <= s.opt.JoinM && (same || seg == 0) {
		x.dist, x.node = da, a
	}
	if db := p.Sub(s.pos[b]).Norm(); db <= s.opt.JoinM && db < x.dist && (same || int(seg) == len(nodes)-2) {
		x.dist, x.node = db, b
	}
	if x.node < 0 && same {
		x.dist = dist
	}
	return x, !math.IsInf(x.dist, 1)
}

// around returns the nodes that can be reached from n along lines within three
// joining distances, n included: an end is not joined to its own road. It also
// returns the layers of the lines at n.
func (s *stitcher) around(n int32) (near map[int32]bool, layers map[layerKey]bool) {
	const most = 64 // nodes; more within a metre or two are no road
	near, layers = map[int32]bool{n: true}, map[layerKey]bool{}
	type reached struct {
		node int32
		dist float64
	}
	queue := []reached{{n, 0}}
	for len(queue) > 0 && len(near) < most {
		r := queue[0]
		queue = queue[1:]
		for _, member := range s.members(r.node) {
			for _, w := range s.uses.of(member) {
				l := &s.lines[w[0]]
				if r.node == n {
					layers[l.layer()] = true
				}
				for _, k := range [2]int32{w[1] - 1, w[1] + 1} {
					if k < 0 || int(k) >= len(l.nodes) {
						continue
					}
					next := s.find(l.nodes[k])
					d := r.dist + s.pos[next].Sub(s.pos[r.node]).Norm()
					if !near[next] && d <= 3*s.opt.JoinM {
						near[next] = true
						queue = append(queue, reached{next, d})
					}
				}
			}
		}
	}
	return near, layers
}

// project returns where on a-b, as a fraction, the nearest point to p is, and
// how far away.
func project(p, a, b geo.Point) (t, dist float64) {
	v, w := b.Sub(a), p.Sub(a)
	if l := float64(v.E*v.E) + float64(v.N*v.N); l > 0 {
		t = math.Min(math.Max((float64(w.E*v.E)+float64(w.N*v.N))/l, 0), 1)
	}
	return t, geo.Point{E: w.E - float64(t*v.E), N: w.N - float64(t*v.N)}.Norm()
}
