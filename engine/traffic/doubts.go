package traffic

import (
	"fmt"
	"math"

	"leadline/engine/geo"
)

// Doubts about a post.
const (
	// inLineM: a post this near to the road's line hears vehicles ahead and
	// behind, and not how far.
	inLineM = 2
	doubtM  = 1 // places of the road are compared so far apart
)

// doubts says what of a post's place or axis leaves open where a vehicle is.
func (e *ear) doubts(m *Model) (out []string) {
	_, away := e.road.Nearest(e.post.At)
	if e.from > e.to {
		return []string{fmt.Sprintf("post %q is %.0f m from the road and hears nothing of it: its reach is %.0f m", e.post.ID, away, m.ReachM)}
	}
	if away < inLineM {
		out = append(out, fmt.Sprintf("post %q stands in line with the road (%.1f m off): its bearings tell on which side of it a vehicle is and not how far; put it some 20 m beside", e.post.ID, away))
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
		out = append(out, fmt.Sprintf("post %q has its microphones across the road: for %.0f %% of what it hears a vehicle sounds alike on either side of it; turn its axis along the road, or let another post tell", e.post.ID, 100*share))
	}
	return out
}
