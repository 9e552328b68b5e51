package network

import (
	"fmt"
	"math"

	"leadline/engine/geo"
)

// Bounds of what a map may hold. They keep every offset within an int32 and
// the memory of a build below some 30 GB; a country fits.
const (
	MaxRoads    = 20_000_000
	MaxVertices = 200_000_000
	MaxLengthM  = 2e9 // directed, hence some 1e9 stations and 2e9 cells of 1 m
)

// Attributes are what the source says about a road. The zero value says
// nothing.
type Attributes struct {
	Name, Ref string
	Class     string  // the value of the source's highway tag
	SpeedMps  float64 // speed limit, 0 if not given
	Tunnel    bool
	Bridge    bool
	Circle    bool // part of a roundabout
	Layer     int8
}

// Road is a stretch of road between two junctions.
type Road struct {
	From, To int32 // junctions
	// Points run from junction From to junction To: at least two of them.
	Points []geo.Point
	// HeightM holds a height a point, NaN where unknown; nil if none is known.
	HeightM []float64
	// Feature names the feature of the source that the road came from.
	Feature string
	Attr    Attributes
	// Forward and Backward say in which directions it may be driven; at least
	// one is true.
	Forward, Backward bool
}

// Ban forbids the turn from one road into another where they meet at a
// junction.
type Ban struct {
	From, Via, To int32 // road, junction, road
}

// Graph is the roads of a map.
type Graph struct {
	Frame     geo.Frame
	Junctions int32 // junctions are 0 to Junctions-1
	Roads     []Road
	Bans      []Ban
}

// Options say how a Graph becomes a Map. The zero value is useful.
type Options struct {
	// CellM is the width that no cell of level 0 exceeds; 0 means 1 m.
	CellM float64
	// UTurnWeight is the probability that a vehicle turns round at an ordinary
	// junction, in [0, 1). At a dead end it always does.
	UTurnWeight float64
	// MaxLengthM bounds the directed length of the map in metres; 0 means 2e8,
	// some 100 000 km of two-way road, which take up to 1 GB. It keeps a few
	// stray coordinates from taking all memory. At most MaxLengthM.
	MaxLengthM float64
	// Heights is draped over the roads, in place of the heights of their
	// points. Its frame may differ from the map's.
	Heights geo.Field
	// HeightSigmaM is the standard deviation of the error of the points'
	// heights; 0 means 2 m, a common accuracy of surveyed road heights taken
	// from maps (practice, no source).
	HeightSigmaM float64
	// Source and Licence travel with the map.
	Source, Licence string
	// Note is a description of how the roads were read, kept with the map.
	Note string
}

func (o Options) withDefaults() Options {
	if o.CellM == 0 {
		o.CellM = 1
	}
	if o.MaxLengthM == 0 {
		o.MaxLengthM = 2e8
	}
	if o.HeightSigmaM == 0 {
		o.HeightSigmaM = 2
	}
	return o
}

// Validate lists everything that is wrong with the options.
func (o Options) Validate() error {
	var wrong []string
	if o.CellM != 0 && !(o.CellM >= 0.05 && o.CellM <= 1000) {
		wrong = append(wrong, fmt.Sprintf("cell width %v m is not between 0.05 and 1000 m", o.CellM))
	}
	if !(o.UTurnWeight >= 0 && o.UTurnWeight < 1) {
		wrong = append(wrong, fmt.Sprintf("U-turn weight %v is not in [0, 1)", o.UTurnWeight))
	}
	if !(o.MaxLengthM >= 0 && o.MaxLengthM <= MaxLengthM) {
		wrong = append(wrong, fmt.Sprintf("length bound %v m is not between 0 and %g", o.MaxLengthM, MaxLengthM))
	}
	if !(o.HeightSigmaM >= 0) || math.IsInf(o.HeightSigmaM, 0) {
		wrong = append(wrong, fmt.Sprintf("height sigma %v m is not a finite number ≥ 0", o.HeightSigmaM))
	}
	return joinWrong("map options", wrong)
}

func joinWrong(what string, wrong []string) error {
	if len(wrong) == 0 {
		return nil
	}
	s := wrong[0]
	for _, w := range wrong[1:] {
		s += "; " + w
	}
	return fmt.Errorf("%s: %s", what, s)
}

// check reports misuse by the code that made the graph, and bounds.
func (g *Graph) check() error {
	if g.Frame.IsZero() {
		panic("network: New: the graph has no frame")
	}
	if len(g.Roads) == 0 {
		return fmt.Errorf("the map has no roads")
	}
	if len(g.Roads) > MaxRoads {
		return fmt.Errorf("%d roads are more than the %d that a map may hold: cut the region", len(g.Roads), MaxRoads)
	}
	vertices := 0
	for i := range g.Roads {
		r := &g.Roads[i]
		if len(r.Points) < 2 || r.From < 0 || r.From >= g.Junctions || r.To < 0 || r.To >= g.Junctions ||
			!(r.Forward || r.Backward) || (r.HeightM != nil && len(r.HeightM) != len(r.Points)) {
			panic(fmt.Sprintf("network: New: road %d (%s) is malformed", i, r.Feature))
		}
		vertices += 2 * len(r.Points)
	}
	for i, b := range g.Bans {
		n := int32(len(g.Roads))
		if b.From < 0 || b.From >= n || b.To < 0 || b.To >= n || b.Via < 0 || b.Via >= g.Junctions {
			panic(fmt.Sprintf("network: New: ban %d is malformed", i))
		}
	}
	if vertices > MaxVertices {
		return fmt.Errorf("%d vertices are more than the %d that a map may hold: cut the region", vertices, MaxVertices)
	}
	return nil
}
