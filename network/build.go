package network

import (
	"fmt"
	"math"

	"leadline/engine/geo"
)

// New makes a map of a graph. The order of charts follows the order of roads,
// the forward direction first, so that the same graph gives the same map.
//
// Roads of no length (all points at one place) are left out; points that repeat
// the one before them too. Roads that repeat one another are kept: the reader
// of a file knows better what they mean, and Check lists them.
func New(g Graph, o Options) (*Map, error) {
	if err := o.Validate(); err != nil {
		return nil, err
	}
	if err := g.check(); err != nil {
		return nil, err
	}
	o = o.withDefaults()
	b := builder{graph: &g, opt: o, d: &Data{
		Origin: g.Frame.Origin(), CellM: o.CellM,
		Source: o.Source, Licence: o.Licence, Note: o.Note,
	}}
	if err := b.charts(); err != nil {
		return nil, err
	}
	b.links()
	m := &Map{d: b.d, frame: g.Frame}
	m.reverseLinks()
	b.d.headingKnots(m)
	if err := b.stations(m); err != nil {
		return nil, err
	}
	if err := b.heights(); err != nil {
		return nil, err
	}
	return FromData(b.d, "")
}

// builder carries what the steps of New share.
type builder struct {
	graph *Graph
	opt   Options
	d     *Data
	// forward and backward are the charts of each road, -1 where closed.
	forward, backward []int32
	// pointHeight is the height of each vertex, NaN where unknown.
	pointHeight []float64
	junction    []int32 // the map's number of each of the graph's junctions
	junctions   int32
	words       [4]interner // name, ref, class, feature
}

// interner collects a column of words.
type interner struct {
	words *Words
	known map[string]int32
}

func (n *interner) add(s string) {
	i, ok := n.known[s]
	if !ok {
		i = int32(len(n.words.Text))
		n.known[s] = i
		n.words.Text = append(n.words.Text, s)
	}
	n.words.Index = append(n.words.Index, i)
}

// charts lays out the directed edges and their geometry.
func (b *builder) charts() error {
	d := b.d
	for i, w := range [4]*Words{&d.Name, &d.Ref, &d.Class, &d.Feature} {
		b.words[i] = interner{w, map[string]int32{}}
	}
	b.junction = make([]int32, b.graph.Junctions)
	for j := range b.junction {
		b.junction[j] = -1
	}
	b.forward = make([]int32, len(b.graph.Roads))
	b.backward = make([]int32, len(b.graph.Roads))
	d.VertexStart = append(d.VertexStart, 0)
	var kept []int32
	var alongM []float64
	total := 0.0
	for i := range b.graph.Roads {
		r := &b.graph.Roads[i]
		b.forward[i], b.backward[i] = -1, -1
		kept, alongM = trueAlong(b.graph.Frame, r.Points, kept[:0], alongM[:0])
		length := alongM[len(alongM)-1]
		if !(length > 0) {
			continue
		}
		if r.Forward {
			b.forward[i] = b.chart(int32(i), false, kept, alongM)
			total += length
		}
		if r.Backward {
			b.backward[i] = b.chart(int32(i), true, kept, alongM)
			total += length
		}
		if r.Forward && r.Backward {
			d.Twin[b.forward[i]], d.Twin[b.backward[i]] = b.backward[i], b.forward[i]
		}
		if !(total <= b.opt.MaxLengthM) {
			return fmt.Errorf("more than %.0f km of directed edges, the bound that was set: cut the region, look for stray coordinates (%s ends here), or raise the bound",
				b.opt.MaxLengthM/1000, r.Feature)
		}
	}
	if d.Charts() == 0 {
		return fmt.Errorf("none of the %d roads has a length", len(b.graph.Roads))
	}
	return nil
}

// trueAlong returns the indices of the points that differ from the one before,
// and the true distance of each from the first: frame length divided by the
// frame's scale at the middle of the segment. The scale is 1 + x²/2R² at x
// metres east, so over a segment of l metres its middle is good to l²/24R²
// (2.5e-10 for 500 m).
func trueAlong(f geo.Frame, points []geo.Point, kept []int32, along []float64) ([]int32, []float64) {
	kept, along = append(kept, 0), append(along, 0)
	last := points[0]
	for i, p := range points[1:] {
		frameM := p.Sub(last).Norm()
		if frameM == 0 {
			continue
		}
		_, scale := f.Convergence(geo.Point{E: (p.E + last.E) / 2, N: (p.N + last.N) / 2})
		next := along[len(along)-1] + frameM/scale
		if !(next > along[len(along)-1]) {
			continue // below a rounding of the distance so far
		}
		kept, along = append(kept, int32(i)+1), append(along, next)
		last = p
	}
	return kept, along
}

// renumber numbers the junctions that roads have in the order of their first
// use, so that no number is above twice the number of charts.
func (b *builder) renumber(j int32) int32 {
	if b.junction[j] < 0 {
		b.junction[j] = b.junctions
		b.junctions++
	}
	return b.junction[j]
}

func (b *builder) chart(road int32, reversed bool, kept []int32, alongM []float64) int32 {
	d, r := b.d, &b.graph.Roads[road]
	c := int32(d.Charts())
	from, to := b.renumber(r.From), b.renumber(r.To)
	if reversed {
		from, to = to, from
	}
	d.From, d.To, d.Twin = append(d.From, from), append(d.To, to), append(d.Twin, -1)
	for i, s := range [4]string{r.Attr.Name, r.Attr.Ref, r.Attr.Class, r.Feature} {
		b.words[i].add(s)
	}
	d.Speed = append(d.Speed, float32(r.Attr.SpeedMps))
	var flags uint8
	if r.Attr.Tunnel {
		flags |= FlagTunnel
	}
	if r.Attr.Bridge {
		flags |= FlagBridge
	}
	if r.Attr.Circle {
		flags |= FlagCircle
	}
	d.Flags = append(d.Flags, flags)
	d.Layer = append(d.Layer, r.Attr.Layer)
	for i := range kept {
		along := alongM[i]
		if reversed {
			i = len(kept) - 1 - i
			along = alongM[len(kept)-1] - alongM[i]
		}
		p, h := r.Points[kept[i]], math.NaN()
		if r.HeightM != nil {
			h = r.HeightM[kept[i]]
		}
		d.East, d.North = append(d.East, p.E), append(d.North, p.N)
		d.Along = append(d.Along, along)
		b.pointHeight = append(b.pointHeight, h)
	}
	d.VertexStart = append(d.VertexStart, int32(len(d.East)))
	return c
}
