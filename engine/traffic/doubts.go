package traffic

import (
	"fmt"
	"math"
	"slices"

	"leadline/engine/geo"
)

// Doubt is a reason not to rely on a picture.
type Doubt struct {
	Kind  DoubtKind
	Post  string // that it is about; "" where it is about none
	Count int    // how often, where it is counted
	Words string // what it is and what to do
}

// DoubtKind is what a doubt is about.
type DoubtKind int

// The kinds: three of where posts stand, and four of what came of them.
const (
	AmbiguousSide DoubtKind = iota + 1
	InLine
	OutOfReach
	Silent
	OverBudget
	Crowded
	UnknownPost
)

// Doubts are those of a watch so far.
func (w *Watch) Doubts() []Doubt {
	out := slices.Clone(w.filter.doubts)
	for i, p := range w.posts {
		if p.deaf {
			id := w.filter.ears[i].post.ID
			out = append(out, Doubt{Silent, id, 0, fmt.Sprintf("post %q has been silent for so long that it is taken for out of order: see to it", id)})
		}
	}
	if n := w.filter.account.Refused; n > 0 {
		out = append(out, Doubt{OverBudget, "", n, fmt.Sprintf("%d times there were more vehicles than the %d that are followed at once: those beyond are expected and have no label; raise traffic.max_vehicles", n, w.filter.model.MaxVehicles)})
	}
	if n := w.filter.account.Crowded; n > 0 {
		out = append(out, Doubt{Crowded, "", n, fmt.Sprintf("%d bearings came together with more than %d others and were taken for false: posts should say what they hear more often, or less of it", n, mostBearings)})
	}
	if w.unknown > 0 {
		out = append(out, Doubt{UnknownPost, w.unknownPost, w.unknown, fmt.Sprintf("%d bearings of posts that are none of this road's were refused, the last of %q: name that one in the suite", w.unknown, w.unknownPost)})
	}
	return out
}

// Doubts about a post.
const (
	// inLineM: a post this near to the road's line hears vehicles ahead and
	// behind, and not how far.
	inLineM = 2
	doubtM  = 1 // places of the road are compared so far apart
)

// doubts says what of a post's place or axis leaves open where a vehicle is.
func (e *ear) doubts(m *Model) (out []Doubt) {
	_, away := e.road.Nearest(e.post.At)
	if e.from > e.to {
		return []Doubt{{OutOfReach, e.post.ID, 0, fmt.Sprintf("post %q is %.0f m from the road and hears nothing of it: its reach is %.0f m", e.post.ID, away, m.ReachM)}}
	}
	if away < inLineM {
		out = append(out, Doubt{InLine, e.post.ID, 0, fmt.Sprintf("post %q stands in line with the road (%.1f m off): its bearings tell on which side of it a vehicle is and not how far; put it some 20 m beside", e.post.ID, away)})
	}
	axis := e.post.AxisRad
	if axis == nil {
		return out
	}
	// A mirror image that is on the road, too, and elsewhere.
	const same = 3 * math.Pi / 180
	places, doubtful := 0, 0
	for x := e.from; x <= e.to; x += doubtM {
		at, _ := e.road.At(x)
		mirror := geo.WrapPi(2*(*axis) - geo.Heading(at.Sub(e.post.At)))
		places++
		for y := e.from; y <= e.to; y += doubtM {
			there, _ := e.road.At(y)
			if math.Abs(y-x) > 20 && math.Abs(geo.WrapPi(geo.Heading(there.Sub(e.post.At))-mirror)) < same {
				doubtful++
				break
			}
		}
	}
	if share := float64(doubtful) / float64(places); share > 0.1 {
		out = append(out, Doubt{AmbiguousSide, e.post.ID, 0, fmt.Sprintf("post %q has its microphones across the road: for %.0f %% of what it hears a vehicle sounds alike on either side of it; turn its axis along the road, or let another post tell", e.post.ID, 100*share)})
	}
	return out
}
