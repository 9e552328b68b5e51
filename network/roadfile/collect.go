package roadfile

import (
	"fmt"
	"math"
	"slices"

	"leadline/engine/geo"
	"leadline/network"
)

// line is a road as the file has it.
type line struct {
	nodes   []int32   // indices of collector.at
	heightM []float64 // one a node, or nil
	feature int32     // index of collector.features
	attr    network.Attributes
	dir     direction
}

// layerKey tells lines apart that cross without meeting.
type layerKey struct {
	layer          int8
	bridge, tunnel bool
}

func (l *line) layer() layerKey { return layerKey{l.attr.Layer, l.attr.Bridge, l.attr.Tunnel} }

// ban is a forbidden turn between features, at one node or (node < 0) wherever
// they meet. With only set, every other turn from there is forbidden instead.
type ban struct {
	from, to string
	node     int32
	only     bool
}

// collector takes the lines of a file; every format fills one.
type collector struct {
	opt      Options
	notes    Notes
	at       [][2]float64 // lon, lat of the nodes in degrees
	features []string
	lines    []line
	bans     []ban
	licence  string
	byPlace  map[[2]int64]nodeList
}

// nodeList holds the nodes in one cell of the grid that finds shared vertices.
type nodeList struct {
	first int32
	more  []int32
}

// Lines share a vertex when their coordinates agree within shareDeg. The grid
// is four times wider, so that a cell holds few nodes and most lookups touch
// one cell.
const (
	shareDeg = 1e-9
	gridDeg  = 4e-9
)

// node returns the index of the node at a position, a new one if none is
// there. Positions must have been checked.
func (c *collector) node(lon, lat float64) int32 {
	if c.byPlace == nil {
		c.byPlace = map[[2]int64]nodeList{}
	}
	x, y := lon/gridDeg, lat/gridDeg
	const reach = shareDeg / gridDeg
	for i := int64(math.Floor(x - reach)); i <= int64(math.Floor(x+reach)); i++ {
		for j := int64(math.Floor(y - reach)); j <= int64(math.Floor(y+reach)); j++ {
			list, ok := c.byPlace[[2]int64{i, j}]
			if !ok {
				continue
			}
			if c.shared(list.first, lon, lat) {
				return list.first
			}
			for _, n := range list.more {
				if c.shared(n, lon, lat) {
					return n
				}
			}
		}
	}
	n := int32(len(c.at))
	c.at = append(c.at, [2]float64{lon, lat})
	key := [2]int64{int64(math.Floor(x)), int64(math.Floor(y))}
	if list, ok := c.byPlace[key]; ok {
		list.more = append(list.more, n)
		c.byPlace[key] = list
	} else {
		c.byPlace[key] = nodeList{first: n}
	}
	return n
}

func (c *collector) shared(n int32, lon, lat float64) bool {
	return math.Abs(c.at[n][0]-lon) <= shareDeg && math.Abs(c.at[n][1]-lat) <= shareDeg
}

// wanted reports whether the line with these tags is a road, and counts it if
// it is not.
func (c *collector) wanted(t tags) bool {
	switch class := t("highway"); {
	case isSet(t("area")):
		c.notes.Areas++
	case class != "" && !c.opt.takes(class):
		c.notes.OtherClass++
	case c.opt.SkipPrivate && (t("access") == "private" || t("access") == "no"):
		c.notes.Private++
	default:
		return true
	}
	return false
}

// add takes a line, whose nodes and heights it copies. Nodes that repeat the
// one before are left out.
func (c *collector) add(nodes []int32, heightM []float64, feature string, attr network.Attributes, dir direction) error {
	kept := make([]int32, 0, len(nodes))
	var heights []float64
	for i, n := range nodes {
		if i > 0 && n == kept[len(kept)-1] {
			continue
		}
		kept = append(kept, n)
		if heightM != nil {
			heights = append(heights, heightM[i])
		}
	}
	if len(kept) < 2 {
		c.notes.NoLength++
		return nil
	}
	if k := len(c.features); k == 0 || c.features[k-1] != feature {
		c.features = append(c.features, feature)
	}
	if !slices.ContainsFunc(heights, func(h float64) bool { return h == h }) {
		heights = nil
	}
	c.lines = append(c.lines, line{kept, heights, int32(len(c.features) - 1), attr, dir})
	c.notes.Lines++
	if attr.Tunnel {
		c.notes.Tunnels++
	}
	if attr.Bridge {
		c.notes.Bridges++
	}
	c.notes.Vertices += len(kept)
	if c.notes.Vertices > maxVertices || c.notes.Lines > maxFeatures {
		return fmt.Errorf("more than %d lines or %d vertices: cut the region", maxFeatures, maxVertices)
	}
	return nil
}

// frame returns the metric frame around the middle of the lines. Maps across
// the antimeridian are as good as others.
func (c *collector) frame() (geo.Frame, error) {
	span := func(shift float64) (lo, hi [2]float64) {
		lo, hi = [2]float64{math.Inf(1), math.Inf(1)}, [2]float64{math.Inf(-1), math.Inf(-1)}
		for i := range c.lines {
			for _, n := range c.lines[i].nodes {
				p := c.at[n]
				if p[0] < 0 {
					p[0] += shift
				}
				for k := range p {
					lo[k], hi[k] = math.Min(lo[k], p[k]), math.Max(hi[k], p[k])
				}
			}
		}
		return lo, hi
	}
	lo, hi := span(0)
	if hi[0]-lo[0] > 180 {
		lo, hi = span(360)
	}
	lon := (lo[0] + hi[0]) / 2
	if lon >= 180 {
		lon -= 360
	}
	origin := geo.FromDegrees(lon, (lo[1]+hi[1])/2)
	f := geo.NewFrame(origin)
	// Degrees of latitude are 111 km; of longitude no more.
	const kmPerDeg = 111.3
	widestLat := math.Max(0, math.Min(math.Abs(lo[1]), math.Abs(hi[1])))
	if lo[1] < 0 && hi[1] > 0 {
		widestLat = 0
	}
	ew := (hi[0] - lo[0]) * kmPerDeg * math.Cos(geo.Rad(widestLat))
	ns := (hi[1] - lo[1]) * kmPerDeg
	if ew > maxExtentKM || ns > maxExtentKM {
		return f, fmt.Errorf("the roads reach from lon %.3f, lat %.3f to lon %.3f, lat %.3f, some %.0f by %.0f km: a map may be %d km wide; cut the region, or look for stray coordinates",
			lo[0], lo[1], hi[0], hi[1], ew, ns, maxExtentKM)
	}
	return f, nil
}
