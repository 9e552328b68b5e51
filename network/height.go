package network

import (
	"container/heap"
	"fmt"
	"math"

	"leadline/engine/geo"
)

// structureGrade is the standard deviation of the grade of a bridge or tunnel
// about the straight line between its ends: 3 %, so that roads built to the
// usual limit of 6 % lie within two of them (practice, no source).
const structureGrade = 0.03

// heights fills the height columns, from the field if there is one, otherwise
// from the points' own heights, and leaves them empty if no height is known.
//
// A field is the height of the ground, which a bridge leaves below and a
// tunnel above. There the height runs linearly, by distance, between the open
// ends of the chain of bridges and tunnels: the junctions with a road that is
// neither, or where the chain ends. A branching chain gets the heights for
// which that holds at every inner junction. The variance is the mean of the
// ends' plus (structureGrade·distance to the nearest open end)².
func (b *builder) heights() error {
	d := b.d
	n := len(d.SpreadN)
	height, variance := make([]float32, n), make([]float32, n)
	var err error
	if b.opt.Heights != nil {
		err = b.drape(height, variance)
	} else {
		b.ownHeights(height, variance)
	}
	if err != nil {
		return err
	}
	for _, h := range height {
		if h == h {
			d.Height, d.HeightVar = height, variance
			break
		}
	}
	return nil
}

// ownHeights interpolates the heights of the roads' points.
func (b *builder) ownHeights(height, variance []float32) {
	d := b.d
	sigma2 := float32(b.opt.HeightSigmaM * b.opt.HeightSigmaM)
	for c := range int32(d.Charts()) {
		first, end := d.StationStart[c], d.StationStart[c+1]
		a, z := d.VertexStart[c], d.VertexStart[c+1]
		length := d.Along[z-1]
		seg := a
		for i := first; i < end; i++ {
			s := math.Min(length, length*float64(i-first)/float64(end-first-1))
			seg = findSegment(d.Along, a, z, seg, s)
			x := (s - d.Along[seg]) / (d.Along[seg+1] - d.Along[seg])
			h := b.pointHeight[seg]
			if x > 0 {
				h += float64(x * (b.pointHeight[seg+1] - h))
			}
			height[i] = float32(h)
			if h == h {
				variance[i] = sigma2
			}
		}
	}
}

func (d *Data) structure(c int32) bool { return d.Flags[c]&(FlagTunnel|FlagBridge) != 0 }

// drape samples the field at the stations.
func (b *builder) drape(height, variance []float32) error {
	d := b.d
	same := b.opt.Heights.Frame().Origin() == b.graph.Frame.Origin()
	var east, north []float64
	for c := range int32(d.Charts()) {
		first, end := d.StationStart[c], d.StationStart[c+1]
		n := int(end - first)
		east, north = b.stationPoints(c, east[:0], north[:0])
		if !same {
			for i := range n {
				p := b.opt.Heights.Frame().Forward(b.graph.Frame.Inverse(geo.Point{E: east[i], N: north[i]}))
				east[i], north[i] = p.E, p.N
			}
		}
		h := geo.Heights{HeightM: make([]float64, n), VarianceM2: make([]float64, n)}
		b.opt.Heights.Sample(h, east, north)
		for i := range n {
			v := h.VarianceM2[i]
			if math.IsInf(h.HeightM[i], 0) || !(v >= 0) || math.IsInf(v, 0) {
				return fmt.Errorf("the height map gives %v m with variance %v m² at station %d of edge %d: it must be finite, or NaN where unknown", h.HeightM[i], v, i, c)
			}
			height[first+int32(i)] = float32(h.HeightM[i])
			variance[first+int32(i)] = float32(v)
		}
	}
	b.spanStructures(height, variance)
	return nil
}

func (b *builder) stationPoints(c int32, east, north []float64) ([]float64, []float64) {
	d := b.d
	a, z := d.VertexStart[c], d.VertexStart[c+1]
	n := d.StationStart[c+1] - d.StationStart[c]
	length, seg := d.Along[z-1], a
	for i := range n {
		s := math.Min(length, length*float64(i)/float64(n-1))
		seg = findSegment(d.Along, a, z, seg, s)
		x := (s - d.Along[seg]) / (d.Along[seg+1] - d.Along[seg])
		east = append(east, d.East[seg]+float64(x*(d.East[seg+1]-d.East[seg])))
		north = append(north, d.North[seg]+float64(x*(d.North[seg+1]-d.North[seg])))
	}
	return east, north
}

// ground is what is known at a junction of a chain of structures.
type ground struct {
	height, variance float64
	openM            float64 // distance to the nearest open end, along the chain
}

// spanStructures replaces the draped heights of bridges and tunnels.
func (b *builder) spanStructures(height, variance []float32) {
	d := b.d
	at := b.structureEnds(height, variance)
	for c := range int32(d.Charts()) {
		if !d.structure(c) {
			continue
		}
		p, q := at[d.From[c]], at[d.To[c]]
		length := d.Along[d.VertexStart[c+1]-1]
		first, end := d.StationStart[c], d.StationStart[c+1]
		for i := first; i < end; i++ {
			x := float64(i-first) / float64(end-first-1)
			h := p.height + float64(x*(q.height-p.height))
			openM := math.Min(p.openM+float64(x*length), q.openM+float64((1-x)*length))
			height[i], variance[i] = float32(h), 0
			if h == h {
				variance[i] = float32((p.variance+q.variance)/2 + float64(square(structureGrade*openM)))
			}
		}
	}
}

// structureEnds returns height and variance at the junctions that structures
// touch: draped at open ends, otherwise spanned.
func (b *builder) structureEnds(height, variance []float32) map[int32]ground {
	d := b.d
	type edge struct {
		to     int32
		length float64
	}
	open := map[int32]bool{}
	chain := map[int32][]edge{}
	var inner []int32
	for c := range int32(d.Charts()) {
		// Each road once, by its first chart.
		if t := d.Twin[c]; t >= 0 && t < c {
			continue
		}
		from, to := d.From[c], d.To[c]
		if !d.structure(c) {
			open[from], open[to] = true, true
			continue
		}
		length := d.Along[d.VertexStart[c+1]-1]
		for _, e := range [2][2]int32{{from, to}, {to, from}} {
			if chain[e[0]] == nil {
				inner = append(inner, e[0])
			}
			chain[e[0]] = append(chain[e[0]], edge{e[1], length})
		}
	}
	at := map[int32]ground{}
	var queue openQueue
	rest := inner[:0]
	for _, j := range inner {
		if open[j] || len(chain[j]) == 1 {
			queue = append(queue, openEnd{0, j})
		} else {
			rest = append(rest, j)
		}
		at[j] = ground{openM: math.Inf(1)}
	}
	// The ground at open ends, from any chart that ends there.
	for c := range int32(d.Charts()) {
		for _, e := range [2]struct{ j, station int32 }{{d.From[c], d.StationStart[c]}, {d.To[c], d.StationStart[c+1] - 1}} {
			if g, ok := at[e.j]; ok {
				g.height, g.variance = float64(height[e.station]), float64(variance[e.station])
				at[e.j] = g
			}
		}
	}
	// Distances to the nearest open end (Dijkstra), which also start the
	// heights of the inner junctions at those of that end.
	heap.Init(&queue)
	done := map[int32]bool{}
	for queue.Len() > 0 {
		e := heap.Pop(&queue).(openEnd)
		if done[e.junction] {
			continue
		}
		done[e.junction] = true
		g := at[e.junction]
		g.openM = e.openM
		at[e.junction] = g
		for _, next := range chain[e.junction] {
			if n := at[next.to]; e.openM+next.length < n.openM {
				n.openM, n.height, n.variance = e.openM+next.length, g.height, g.variance
				at[next.to] = n
				heap.Push(&queue, openEnd{n.openM, next.to})
			}
		}
	}
	// A ring of structures without an open end stays draped.
	spanned := rest[:0]
	for _, j := range rest {
		if done[j] {
			spanned = append(spanned, j)
			continue
		}
		g := at[j]
		g.openM = 0
		at[j] = g
	}
	// Gauss-Seidel on "each inner height is the mean of its neighbours',
	// weighted by 1/length". Chains are short; the bound on sweeps only limits
	// the work in a hostile map, whose variance then covers what is left.
	for range 2000 {
		worst := 0.0
		for _, j := range spanned {
			h, v, sum := 0.0, 0.0, 0.0
			for _, e := range chain[j] {
				w := 1 / e.length
				h, v, sum = h+float64(w*at[e.to].height), v+float64(w*at[e.to].variance), sum+w
			}
			g := at[j]
			if by := math.Abs(g.height - h/sum); by > worst { // NaN is not
				worst = by
			}
			g.height, g.variance = h/sum, v/sum
			at[j] = g
		}
		if worst <= 1e-3 { // a millimetre, far below any height's error
			break
		}
	}
	return at
}

// openEnd is an entry of the queue that finds the nearest open end.
type openEnd struct {
	openM    float64
	junction int32
}

type openQueue []openEnd

func (q openQueue) Len() int { return len(q) }
func (q openQueue) Less(i, j int) bool {
	return q[i].openM < q[j].openM || q[i].openM == q[j].openM && q[i].junction < q[j].junction
}
func (q openQueue) Swap(i, j int) { q[i], q[j] = q[j], q[i] }
func (q *openQueue) Push(x any)   { *q = append(*q, x.(openEnd)) }
func (q *openQueue) Pop() any {
	old := *q
	x := old[len(old)-1]
	*q = old[:len(old)-1]
	return x
}
