package roadfile

import (
	"cmp"
	"encoding/binary"
	"errors"
	"hash/maphash"
	"slices"

	"leadline/engine/geo"
	"leadline/network"
)

var errNoRoads = errors.New("no roads found: want LineStrings, or ways with a highway tag of a class that is read")

// graph joins the lines and cuts them into roads between junctions.
func (c *collector) graph() (network.Graph, error) {
	if len(c.lines) == 0 {
		return network.Graph{}, errNoRoads
	}
	frame, err := c.frame()
	if err != nil {
		return network.Graph{}, err
	}
	s := newStitcher(c, frame)
	s.buildTree()
	if err := s.joinEnds(); err != nil {
		return network.Graph{}, err
	}
	if c.opt.SplitCrossings {
		if err := s.splitCrossings(); err != nil {
			return network.Graph{}, err
		}
	}
	s.applyCuts()
	p := &pieces{stitcher: s}
	p.cut()
	p.dropRepeated()
	p.joinThrough()
	if len(p.list) == 0 {
		return network.Graph{}, errNoRoads
	}
	return p.roads(frame), nil
}

// pieces are lines cut at junctions.
type pieces struct {
	*stitcher
	list     []line
	junction []bool // of nodes
}

// cut cuts the lines at every node that is an end or that is used twice.
func (p *pieces) cut() {
	count := make([]uint8, len(p.pos))
	for i := range p.lines {
		nodes := p.lines[i].nodes
		for k, n := range nodes {
			if k == 0 || k == len(nodes)-1 {
				count[n] = 2
			}
			count[n] = min(2, count[n]+1)
		}
	}
	p.junction = make([]bool, len(p.pos))
	for n, k := range count {
		p.junction[n] = k == 2
	}
	for i := range p.lines {
		l := &p.lines[i]
		first := 0
		for k := 1; k < len(l.nodes); k++ {
			if !p.junction[l.nodes[k]] {
				continue
			}
			x := *l
			x.nodes = l.nodes[first : k+1 : k+1]
			if l.heightM != nil {
				x.heightM = l.heightM[first : k+1 : k+1]
			}
			p.list = append(p.list, x)
			first = k
		}
		if len(l.nodes) < 2 { // joined into one point
			p.notes.NoLength++
		}
	}
}

// dropRepeated leaves out a piece that has the same nodes as one before it, in
// the same order or reversed; the one before opens in its directions too.
func (p *pieces) dropRepeated() {
	seed := maphash.MakeSeed() // only finds candidates: what is dropped does not depend on it
	hash := func(nodes []int32, reverse bool) uint64 {
		var h maphash.Hash
		h.SetSeed(seed)
		var b [4]byte
		for i := range nodes {
			n := nodes[i]
			if reverse {
				n = nodes[len(nodes)-1-i]
			}
			binary.LittleEndian.PutUint32(b[:], uint32(n))
			h.Write(b[:])
		}
		return h.Sum64()
	}
	seen := make(map[uint64]int32, len(p.list))
	kept := p.list[:0]
	for _, x := range p.list {
		same, reversed := hash(x.nodes, false), hash(x.nodes, true)
		if i, ok := seen[same]; ok && slices.Equal(kept[i].nodes, x.nodes) {
			kept[i].dir.forward = kept[i].dir.forward || x.dir.forward
			kept[i].dir.backward = kept[i].dir.backward || x.dir.backward
			p.notes.Repeated++
			continue
		}
		if i, ok := seen[reversed]; ok && equalReversed(kept[i].nodes, x.nodes) {
			kept[i].dir.forward = kept[i].dir.forward || x.dir.backward
			kept[i].dir.backward = kept[i].dir.backward || x.dir.forward
			p.notes.Repeated++
			continue
		}
		seen[same] = int32(len(kept))
		kept = append(kept, x)
	}
	p.list = kept
}

func equalReversed(a, b []int32) bool {
	if len(a) != len(b) {
		return false
	}
	for i := range a {
		if a[i] != b[len(b)-1-i] {
			return false
		}
	}
	return true
}

// roads numbers the junctions and translates lines and bans.
func (p *pieces) roads(frame geo.Frame) network.Graph {
	g := network.Graph{Frame: frame, Roads: make([]network.Road, len(p.list))}
	number := make([]int32, len(p.pos))
	for i := range number {
		number[i] = -1
	}
	junction := func(n int32) int32 {
		if number[n] < 0 {
			number[n] = g.Junctions
			g.Junctions++
		}
		return number[n]
	}
	for i := range p.list {
		x := &p.list[i]
		r := network.Road{
			From: junction(x.nodes[0]), To: junction(x.nodes[len(x.nodes)-1]),
			Points: make([]geo.Point, len(x.nodes)), HeightM: x.heightM,
			Feature: p.features[x.feature], Attr: x.attr,
			Forward: x.dir.forward, Backward: x.dir.backward,
		}
		for k, n := range x.nodes {
			r.Points[k] = p.pos[n]
		}
		g.Roads[i] = r
	}
	p.forbid(&g, number)
	return g
}

// forbid translates the bans of features into bans of roads.
func (p *pieces) forbid(g *network.Graph, number []int32) {
	if len(p.bans) == 0 {
		return
	}
	type end struct {
		road, junction int32
	}
	of := map[string][]end{} // of the features that bans name
	for _, b := range p.bans {
		of[b.from], of[b.to] = nil, nil
	}
	at := make([][]int32, g.Junctions)
	for i := range g.Roads {
		r := &g.Roads[i]
		ends := []int32{r.From, r.To}
		if r.From == r.To {
			ends = ends[:1]
		}
		for _, j := range ends {
			at[j] = append(at[j], int32(i))
			if _, named := of[r.Feature]; named {
				of[r.Feature] = append(of[r.Feature], end{int32(i), j})
			}
		}
	}
	for _, b := range p.bans {
		via := int32(-1)
		if b.node >= 0 {
			if via = number[p.find(b.node)]; via < 0 {
				p.notes.UnusedBans++
				continue
			}
		}
		before := len(g.Bans)
		for _, from := range of[b.from] {
			if via >= 0 && from.junction != via {
				continue
			}
			allowed := map[int32]bool{}
			for _, to := range of[b.to] {
				if to.junction == from.junction {
					allowed[to.road] = true
				}
			}
			if len(allowed) == 0 {
				continue
			}
			for _, road := range at[from.junction] {
				if allowed[road] != b.only {
					g.Bans = append(g.Bans, network.Ban{From: from.road, Via: from.junction, To: road})
				}
			}
		}
		if len(g.Bans) == before {
			p.notes.UnusedBans++
		}
	}
	slices.SortFunc(g.Bans, func(a, b network.Ban) int {
		return cmp.Or(cmp.Compare(a.From, b.From), cmp.Compare(a.Via, b.Via), cmp.Compare(a.To, b.To))
	})
	g.Bans = slices.Compact(g.Bans)
	p.notes.Bans = len(g.Bans)
}
