package network

import (
	"fmt"
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// Heading variance. A vehicle's heading differs from the map's by its wander
// within the road, BaseHeadingSigmaRad, and because it is not quite where the
// map has it: it cuts corners, the map is off by metres, and the caller looks
// at the road with a resolution of its own. So, at position s,
//
//	var(s) = base² + E[(h(s+u) - H(s))²],  u uniform in ±r,
//
// where h is the heading of the polyline and H its smoothed heading. Beyond a
// chart's ends h is that of the charts linked there, each with the weight of
// its link (and so on, to the end of the window); where a chart leads nowhere
// its last heading goes on. Differences across a link are wrapped to ±π. The
// variance is capped at π²/3, that of an angle about which nothing is known.
const (
	// BaseHeadingSigmaRad is 10°: with less, filters on real odometry were too
	// sure of themselves (measured on recorded drives over city networks).
	BaseHeadingSigmaRad = 10 * math.Pi / 180
	// NarrowM is the least half window r: half the path of a vehicle turning a
	// street corner, whose curve radius is about 6 m.
	NarrowM = 6.0
)

const maxHeadingVar = math.Pi * math.Pi / 3

// wideM returns the half window for cells of the top level: half their width.
func wideM(cellM float64) float64 {
	return math.Max(2*NarrowM, cellM*float64(int(1)<<(levels-1))/2)
}

// stationCount returns how many stations a chart of the length has.
func stationCount(lengthM float64) int {
	return max(2, int(math.Ceil(lengthM/StationM))+1)
}

// stations computes the heading variance at the stations.
func (b *builder) stations(m *Map) error {
	d := b.d
	n := d.Charts()
	d.StationStart = make([]int32, 1, n+1)
	total := 0
	for c := range n {
		total += stationCount(d.Along[d.VertexStart[c+1]-1])
		if total > math.MaxInt32 {
			return fmt.Errorf("%d stations are more than a map may hold: cut the region", total)
		}
		d.StationStart = append(d.StationStart, int32(total))
	}
	d.SpreadN = make([]uint16, total)
	d.SpreadW = make([]uint16, total)
	w := spreader{d: d, forward: &m.forward, backward: &m.backward}
	wide := wideM(d.CellM)
	for c := range int32(n) {
		a, z := d.StationStart[c], d.StationStart[c+1]
		w.use(c)
		step := w.length / float64(z-a-1)
		knot := d.KnotStart[c]
		for i := a; i < z; i++ {
			s := math.Min(float64(i-a)*step, w.length)
			for knot+2 < d.KnotStart[c+1] && s > float64(d.KnotAlong[knot+1]) {
				knot++
			}
			h := d.knotHeading(knot, s)
			d.SpreadN[i] = packVar(w.meanSquare(s, h, NarrowM))
			d.SpreadW[i] = packVar(w.meanSquare(s, h, wide))
		}
	}
	return nil
}

// knotHeading interpolates between knots i and i+1.
func (d *Data) knotHeading(i int32, s float64) float64 {
	s0, h0 := float64(d.KnotAlong[i]), float64(d.KnotHeading[i])
	return h0 + float64((s-s0)*d.knotSlope(i))
}

func (d *Data) knotSlope(i int32) float64 {
	return (float64(d.KnotHeading[i+1]) - float64(d.KnotHeading[i])) /
		(float64(d.KnotAlong[i+1]) - float64(d.KnotAlong[i]))
}

func packVar(meanSquare float64) uint16 {
	v := min(meanSquare+BaseHeadingSigmaRad*BaseHeadingSigmaRad, maxHeadingVar)
	return uint16(math.Round(v / VarStep))
}

// spreader computes mean squares of heading differences for one chart at a
// time.
type spreader struct {
	d                 *Data
	forward, backward *filter.Links
	chart             int32
	length            float64
	first             int32     // vertex
	h                 []float64 // unwrapped heading of each segment
	seg               int
}

func (w *spreader) use(c int32) {
	d := w.d
	a, b := d.VertexStart[c], d.VertexStart[c+1]
	w.chart, w.first, w.length, w.seg = c, a, d.Along[b-1], 0
	w.h = w.h[:0]
	for i := a; i < b-1; i++ {
		g := d.segmentHeading(i)
		if i > a {
			g = w.h[i-a-1] + geo.WrapPi(g-w.h[i-a-1])
		}
		w.h = append(w.h, g)
	}
}

// meanSquare returns E[(h(s+u) - heading)²] over |u| < r.
func (w *spreader) meanSquare(s, heading, r float64) float64 {
	along := w.d.Along[w.first:]
	lo, hi := s-r, s+r
	// Both windows and rising s: the first segment only moves forward, up to
	// the wide window's edge, so look back a little from there.
	for w.seg > 0 && along[w.seg] > lo {
		w.seg--
	}
	for w.seg+1 < len(w.h) && along[w.seg+1] <= lo {
		w.seg++
	}
	sum := 0.0
	for i := w.seg; i < len(w.h) && along[i] < hi; i++ {
		l := min(hi, along[i+1]) - max(lo, along[i])
		if l > 0 {
			sum += float64(l * square(w.h[i]-heading))
		}
	}
	if lo < 0 {
		sum += w.beyond(w.backward, false, w.chart, w.h[0], heading, -lo, 1, 0)
	}
	if hi > w.length {
		sum += w.beyond(w.forward, true, w.chart, w.h[len(w.h)-1], heading, hi-w.length, 1, 0)
	}
	return sum / (2 * r)
}

// Paths beyond an end are followed while they carry at least this weight and
// at most so many links, then they go straight on: what is left out changes
// the mean square by less than leastWeight·π² a path, and the work is bounded
// where many short edges meet.
const (
	leastWeight = 0.01
	mostLinks   = 32
)

// beyond returns ∫(h - heading)² over the next r metres past an end of chart
// c, whose heading there, unwrapped, is h.
func (w *spreader) beyond(links *filter.Links, ahead bool, c int32, h, heading, r, weight float64, depth int) float64 {
	to, share := links.Of(c)
	if len(to) == 0 || weight < leastWeight || depth >= mostLinks {
		return r * square(h-heading)
	}
	d, sum := w.d, 0.0
	for k, t := range to {
		a, b := d.VertexStart[t], d.VertexStart[t+1]
		part, left, g := 0.0, r, h
		for n := int32(0); n < b-a-1 && left > 0; n++ {
			i := a + n
			if !ahead {
				i = b - 2 - n
			}
			g += geo.WrapPi(d.segmentHeading(i) - g)
			l := min(left, d.Along[i+1]-d.Along[i])
			part += float64(l * square(g-heading))
			left -= l
		}
		if left > 0 {
			part += w.beyond(links, ahead, t, g, heading, left, weight*share[k], depth+1)
		}
		sum += float64(share[k] * part)
	}
	return sum
}

func square(x float64) float64 { return x * x }
