package traffic

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// Picture is what is known at the time of the last scan.
type Picture struct {
	Time     sensor.Time
	Vehicles []Vehicle // by label
	Lines    []Count
	// Expected is how many vehicles are expected on the road, Unseen how many of
	// them are none of those that are followed.
	Expected, Unseen float64
}

// Vehicle is one that may be there.
type Vehicle struct {
	Label     uint64
	Existence float64
	// If it exists: its position along the road and its speed, positive forward.
	PositionM, PositionSigmaM float64
	SpeedMPS, SpeedSigmaMPS   float64
	// Forward is the probability that it drives away from the road's beginning.
	Forward float64
	// At is its mean place in the frame; HeadingRad where it drives, by the more
	// probable way, clockwise from the frame's north.
	At         geo.Point
	HeadingRad float64
	// Cells is the size of its grid.
	Cells int
}

// Count is what passed a line.
type Count struct {
	AtM                       float64
	Forward, Backward         int
	ExpectForward, ExpectBack float64 // the sums of their existence
	Recent                    []Crossing
}

// Flow is what passed a line an hour, forward and backward, over the last windowS,
// or since the first scan, or as far back as Recent reaches; and over how long
// that is. Before that is a minute it is none.
func (f *Filter) Flow(line int, windowS float64) (forward, backward, overS float64) {
	since := max(f.now-seconds(windowS), f.began)
	recent := f.lines[line].recent
	if len(recent) == mostCrossings {
		since = max(since, recent[0].Time)
	}
	if overS = float64(f.now-since) * 1e-9; overS < leastFlowS {
		return 0, 0, overS
	}
	for _, c := range recent {
		switch {
		case c.Time <= since:
		case c.Forward:
			forward++
		default:
			backward++
		}
	}
	return forward * 3600 / overS, backward * 3600 / overS, overS
}

const leastFlowS = 60

// Picture returns the vehicles that exist with a probability or more.
func (f *Filter) Picture(leastExistence float64) Picture {
	p := Picture{Time: f.now, Unseen: f.unseen.total()}
	p.Expected = p.Unseen
	for _, t := range f.tracks {
		p.Expected += t.existence
		if t.existence >= leastExistence {
			p.Vehicles = append(p.Vehicles, f.describe(t))
		}
	}
	for _, l := range f.lines {
		p.Lines = append(p.Lines, Count{l.atM, l.count[0], l.count[1], l.expected[0], l.expected[1], append([]Crossing(nil), l.recent...)})
	}
	return p
}

func (f *Filter) describe(t *track) Vehicle {
	m := t.grid.moments()
	v := Vehicle{
		Label: t.label, Existence: t.existence, Forward: t.grid.forward(), Cells: t.grid.count(),
		PositionM: m.positionM, PositionSigmaM: math.Sqrt(m.varM2), SpeedMPS: m.speedMPS, SpeedSigmaMPS: math.Sqrt(m.varSpeed),
	}
	v.At, v.HeadingRad = f.road.At(m.positionM)
	if v.Forward < 0.5 {
		v.HeadingRad = geo.WrapPi(v.HeadingRad + math.Pi)
	}
	return v
}

// Intensity is how many vehicles are expected a metre of road, seen and unseen,
// in even parts of the road; their sum times a part's length is Expected, but
// for what lies on the ends.
func (f *Filter) Intensity(parts int) []float64 {
	out := make([]float64, parts)
	width := f.road.lengthM / float64(parts)
	add := func(g *grid, times float64) {
		for _, s := range g.slices {
			for i, m := range s.mass {
				x := (s.fromM + float64(float64(i)*g.stepM)) / width
				out[min(max(int(x), 0), parts-1)] += float64(m*times) / width
			}
		}
	}
	add(&f.unseen.grid, 1)
	for _, t := range f.tracks {
		add(&t.grid, t.existence)
	}
	return out
}
