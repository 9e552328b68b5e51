package network

import (
	"cmp"
	"math"
	"slices"

	"leadline/engine/geo"
)

// NearMissM is how near an end must come to another road for Check to call it
// a near miss.
const NearMissM = 5.0

// mostListed bounds the lists of a Report: the worst come first, the counts
// are complete.
const mostListed = 20

// Report is what Check finds. Lengths of "road" count a road once, lengths of
// "edges" each direction; lists hold at most twenty entries, the worst first.
type Report struct {
	Fingerprint string `json:"fingerprint_sha256"`
	Source      string `json:"source"`
	Licence     string `json:"licence"`
	Note        string `json:"note"`

	Size       Size       `json:"size"`
	Weak       Parts      `json:"weakly_connected"`
	Strong     Parts      `json:"strongly_connected"`
	Traps      Places     `json:"traps"` // edges that nothing leaves
	DeadEnds   int        `json:"dead_ends"`
	NearMisses Places     `json:"near_misses"`
	Duplicates Places     `json:"duplicates"` // roads with the points of another
	Short      Places     `json:"short_edges"`
	Structures Structures `json:"structures"`
	Heights    Heights    `json:"heights"`
	Resolution Resolution `json:"resolution"`
}

// Size says how large a map is.
type Size struct {
	Roads     int        `json:"roads"`
	Edges     int        `json:"edges"`
	Junctions int        `json:"junctions"`
	Vertices  int        `json:"vertices"` // of edges
	Cells     int        `json:"cells"`    // at the finest level
	RoadKM    float64    `json:"road_km"`
	EdgeKM    float64    `json:"edge_km"`
	Bytes     int        `json:"bytes"` // of the columns
	BoundsDeg [4]float64 `json:"bounds_deg"`
}

// Parts describes connected components.
type Parts struct {
	Count     int     `json:"count"`
	LargestKM float64 `json:"largest_km"` // of edges
	Share     float64 `json:"share"`      // of the length of all edges
	// The other components, by how they hang together with the rest.
	Isolated  int     `json:"isolated"`   // no link to or from another one
	EnterOnly int     `json:"enter_only"` // links lead in, none out
	LeaveOnly int     `json:"leave_only"` // links lead out, none in
	Between   int     `json:"between"`    // links lead in and out
	OtherKM   float64 `json:"other_km"`   // all but the largest
	Others    []Spot  `json:"others"`     // the longest of them
}

// Places are a number of places, of which some are listed.
type Places struct {
	Count int    `json:"count"`
	List  []Spot `json:"list"`
}

// Spot is a place on the map that somebody may want to look at.
type Spot struct {
	LonDeg  float64 `json:"lon_deg"`
	LatDeg  float64 `json:"lat_deg"`
	Metres  float64 `json:"metres"` // length, or width of a gap
	Name    string  `json:"name"`
	Feature string  `json:"feature"`
	Other   string  `json:"other,omitempty"` // the feature across a gap
}

// Structures counts roads that are not on the ground.
type Structures struct {
	Tunnels  int     `json:"tunnels"`
	TunnelKM float64 `json:"tunnel_km"`
	Bridges  int     `json:"bridges"`
	BridgeKM float64 `json:"bridge_km"`
	Circles  int     `json:"roundabout_roads"`
}

// Heights says for how much of the road the height is known.
type Heights struct {
	KnownShare float64 `json:"known_share"` // of the length
	VoidKM     float64 `json:"void_km"`     // of edges
	LowM       float64 `json:"low_m"`       // 0 if nothing is known
	HighM      float64 `json:"high_m"`
	SigmaM     float64 `json:"sigma_m"` // root mean variance where known
	MaxGrade   float64 `json:"max_grade"`
}

// Resolution says how finely the map is drawn and cut.
type Resolution struct {
	CellM        float64 `json:"cell_m"` // limit at the finest level
	MeanCellM    float64 `json:"mean_cell_m"`
	MeanSegmentM float64 `json:"mean_segment_m"`
	MaxSegmentM  float64 `json:"max_segment_m"`
	MaxEdgeM     float64 `json:"max_edge_m"`
	SharpTurns   int     `json:"sharp_turns"` // vertices within an edge where it turns by more than 120°
}

// shortM is the length below which Check lists an edge as short: what is
// left when two vertices that should be one lie side by side.
const shortM = 0.1

// first reports whether a chart speaks for its road.
func (m *Map) first(c int32) bool { t := m.d.Twin[c]; return t < 0 || c < t }

// Check looks for what may be wrong with a map.
func Check(m *Map) Report {
	d := m.d
	r := Report{Fingerprint: m.fingerprint, Source: d.Source, Licence: d.Licence, Note: d.Note}
	m.checkSize(&r)
	weak, strong, weakM, strongM := m.Components()
	r.Weak = m.describeParts(weak, weakM)
	r.Strong = m.describeParts(strong, strongM)
	for c := range int32(m.Charts()) {
		if to, _ := m.forward.Of(c); len(to) == 0 {
			_, q := m.Ends(c)
			r.Traps.add(m.spot(c, q, m.LengthM(c)))
		}
		if m.LengthM(c) < shortM && m.first(c) {
			p, _ := m.Ends(c)
			r.Short.add(m.spot(c, p, m.LengthM(c)))
		}
	}
	m.checkEnds(&r)
	m.checkDuplicates(&r)
	m.checkStructures(&r)
	m.checkHeights(&r)
	m.checkResolution(&r)
	for _, p := range []*Places{&r.Traps, &r.Duplicates} {
		p.sort(func(a, b Spot) int { return cmp.Compare(b.Metres, a.Metres) })
	}
	for _, p := range []*Places{&r.NearMisses, &r.Short} {
		p.sort(func(a, b Spot) int { return cmp.Compare(a.Metres, b.Metres) })
	}
	return r
}

func (p *Places) add(s Spot) { p.Count++; p.List = append(p.List, s) }

func (p *Places) sort(by func(a, b Spot) int) {
	slices.SortStableFunc(p.List, by)
	p.List = slices.Clip(p.List[:min(len(p.List), mostListed)])
	if p.List == nil {
		p.List = []Spot{}
	}
}

func (m *Map) spot(c int32, at geo.Point, metres float64) Spot {
	lon, lat := m.frame.Inverse(at).Degrees()
	// A hundred-millionth of a degree is a millimetre.
	round := func(x float64) float64 { return math.Round(x*1e8) / 1e8 }
	return Spot{round(lon), round(lat), metres, m.Name(c), m.Feature(c), ""}
}

func (m *Map) checkSize(r *Report) {
	d, s := m.d, &r.Size
	s.Edges, s.Vertices = m.Charts(), len(d.East)
	junctions := map[int32]struct{}{}
	lo, hi := [2]float64{math.Inf(1), math.Inf(1)}, [2]float64{math.Inf(-1), math.Inf(-1)}
	for c := range int32(m.Charts()) {
		l := m.LengthM(c) / 1000
		s.EdgeKM += l
		if m.first(c) {
			s.Roads++
			s.RoadKM += l
		}
		s.Cells += int(m.lines[0].Cells[c])
		junctions[d.From[c]], junctions[d.To[c]] = struct{}{}, struct{}{}
	}
	s.Junctions = len(junctions)
	lon0, _ := d.Origin.Degrees()
	for i := range d.East {
		lon, lat := m.frame.Inverse(geo.Point{E: d.East[i], N: d.North[i]}).Degrees()
		lon -= 360 * math.Round((lon-lon0)/360) // no jump at the antimeridian
		lo[0], lo[1] = math.Min(lo[0], lon), math.Min(lo[1], lat)
		hi[0], hi[1] = math.Max(hi[0], lon), math.Max(hi[1], lat)
	}
	s.BoundsDeg = [4]float64{lo[0], lo[1], hi[0], hi[1]}
	d.EachColumn(func(_ string, b []byte) { s.Bytes += len(b) })
}

// describeParts classifies components, the largest of which is number 0.
func (m *Map) describeParts(of []int32, lengths []float64) Parts {
	n := len(lengths)
	in, out := make([]bool, n), make([]bool, n)
	first := make([]int32, n)
	for c := len(of) - 1; c >= 0; c-- {
		first[of[c]] = int32(c)
		to, _ := m.forward.Of(int32(c))
		for _, t := range to {
			if of[t] != of[c] {
				out[of[c]], in[of[t]] = true, true
			}
		}
	}
	total := 0.0
	for _, l := range lengths {
		total += l
	}
	p := Parts{Count: n, LargestKM: lengths[0] / 1000, Share: lengths[0] / total, OtherKM: (total - lengths[0]) / 1000, Others: []Spot{}}
	for k := 1; k < n; k++ {
		switch {
		case in[k] && out[k]:
			p.Between++
		case in[k]:
			p.EnterOnly++
		case out[k]:
			p.LeaveOnly++
		default:
			p.Isolated++
		}
		if k <= mostListed {
			at, _ := m.Ends(first[k])
			p.Others = append(p.Others, m.spot(first[k], at, lengths[k]))
		}
	}
	return p
}

func (m *Map) checkStructures(r *Report) {
	s := &r.Structures
	for c := range int32(m.Charts()) {
		if !m.first(c) {
			continue
		}
		if m.Tunnel(c) {
			s.Tunnels++
			s.TunnelKM += m.LengthM(c) / 1000
		}
		if m.Bridge(c) {
			s.Bridges++
			s.BridgeKM += m.LengthM(c) / 1000
		}
		if m.Roundabout(c) {
			s.Circles++
		}
	}
}

func (m *Map) checkHeights(r *Report) {
	d, h := m.d, &r.Heights
	if !m.HasHeights() {
		h.VoidKM = r.Size.EdgeKM
		return
	}
	known, total, variance, low, high := 0.0, 0.0, 0.0, math.Inf(1), math.Inf(-1)
	for c := range int32(m.Charts()) {
		step := 1 / m.stationsPerM[c]
		for i := d.StationStart[c]; i < d.StationStart[c+1]-1; i++ {
			total += step
			a, b := float64(d.Height[i]), float64(d.Height[i+1])
			if a != a || b != b {
				continue
			}
			known += step
			variance += step * float64(d.HeightVar[i]+d.HeightVar[i+1]) / 2
			low, high = math.Min(low, math.Min(a, b)), math.Max(high, math.Max(a, b))
			h.MaxGrade = math.Max(h.MaxGrade, math.Abs(b-a)/step)
		}
	}
	h.KnownShare, h.VoidKM = known/total, (total-known)/1000
	if known > 0 {
		h.LowM, h.HighM, h.SigmaM = low, high, math.Sqrt(variance/known)
	}
}

func (m *Map) checkResolution(r *Report) {
	d, s := m.d, &r.Resolution
	s.CellM, s.MeanCellM = d.CellM, r.Size.EdgeKM*1000/float64(r.Size.Cells)
	segments := 0
	for c := range int32(m.Charts()) {
		s.MaxEdgeM = math.Max(s.MaxEdgeM, m.LengthM(c))
		a, b := d.VertexStart[c], d.VertexStart[c+1]
		for i := a; i < b-1; i++ {
			segments++
			s.MaxSegmentM = math.Max(s.MaxSegmentM, d.Along[i+1]-d.Along[i])
			if i > a && m.first(c) && math.Abs(geo.WrapPi(d.segmentHeading(i)-d.segmentHeading(i-1))) > 2*math.Pi/3 {
				s.SharpTurns++
			}
		}
	}
	s.MeanSegmentM = r.Size.EdgeKM * 1000 / float64(segments)
}
