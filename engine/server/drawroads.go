package server

import (
	"context"
	"math"
	"sync"

	"leadline/engine/geo"
	leadlinev1 "leadline/proto/leadline/v1"
)

// maxDrawnPoints bounds the points of a drawing: some 400 KiB.
const maxDrawnPoints = 60_000

// outlines are the boxes around the edges of a road map, found once.
type outlines struct {
	once  sync.Once
	boxes []geo.Box // of edges that are the first of their road; others are empty
	all   geo.Box
}

func (o *outlines) of(r Roads) {
	o.once.Do(func() {
		o.boxes, o.all = make([]geo.Box, r.Charts()), geo.EmptyBox()
		for c := range o.boxes {
			o.boxes[c] = geo.EmptyBox()
			if t := r.Twin(int32(c)); t >= 0 && t < int32(c) {
				continue
			}
			east, north := r.Polyline(int32(c))
			for i := range east {
				o.boxes[c] = o.boxes[c].Extend(geo.Point{E: east[i], N: north[i]})
			}
			o.all = o.all.Extend(o.boxes[c].Min).Extend(o.boxes[c].Max)
		}
	})
}

// drawRoads adds the roads that touch a box, nil for all. It fails with ctx
// alone.
func (m *mapUse) drawRoads(ctx context.Context, out *leadlinev1.DrawMapResponse, box *geo.Box) error {
	m.outlines.of(m.Roads)
	if box == nil {
		box = &m.outlines.all
	}
	for {
		points := 0
		out.Lines, out.LeftOut = nil, 0
		for c, b := range m.outlines.boxes {
			if c%10_000 == 0 && ctx.Err() != nil {
				return ctx.Err()
			}
			if !touches(b, *box) {
				continue
			}
			if math.Max(b.Max.E-b.Min.E, b.Max.N-b.Min.N) < out.DetailM/2 {
				out.LeftOut++
				continue
			}
			line := m.roadLine(int32(c), out.DetailM/2)
			if points += len(line.GetEastCm()); points > maxDrawnPoints {
				break
			}
			out.Lines = append(out.Lines, line)
		}
		if points <= maxDrawnPoints {
			return nil
		}
		out.DetailM = math.Max(2*out.DetailM, 0.1)
	}
}

func (m *mapUse) roadLine(c int32, toleranceM float64) *leadlinev1.RoadLine {
	r := m.Roads
	line := &leadlinev1.RoadLine{
		Edge: uint32(c), Name: r.Name(c), Class: r.Class(c), OneWay: r.Twin(c) < 0, Tunnel: r.Tunnel(c), Bridge: r.Bridge(c),
	}
	east, north := r.Polyline(c)
	var lastE, lastN int32
	for _, i := range simplified(east, north, toleranceM) {
		e, n := int32(math.Round(100*east[i])), int32(math.Round(100*north[i]))
		line.EastCm, line.NorthCm = append(line.EastCm, e-lastE), append(line.NorthCm, n-lastN)
		lastE, lastN = e, n
	}
	return line
}

// simplified returns the points of a line to keep so that none is farther than
// a tolerance from what is kept, by the method of Ramer (1972), Douglas and
// Peucker (1973).
func simplified(east, north []float64, toleranceM float64) []int {
	last := len(east) - 1
	keep := []int{0}
	if last == 0 {
		return keep
	}
	// Parts that are still to be looked at, the first one on top.
	ends := []int{last}
	for from := 0; len(ends) > 0; {
		to := ends[len(ends)-1]
		far, at := toleranceM, -1
		for i := from + 1; i < to; i++ {
			if d := distanceToSegment(east, north, i, from, to); d > far {
				far, at = d, i
			}
		}
		if at >= 0 {
			ends = append(ends, at)
			continue
		}
		keep = append(keep, to)
		from, ends = to, ends[:len(ends)-1]
	}
	return keep
}

// distanceToSegment is that of point i from the line between points a and b.
func distanceToSegment(east, north []float64, i, a, b int) float64 {
	ue, un := east[b]-east[a], north[b]-north[a]
	pe, pn := east[i]-east[a], north[i]-north[a]
	if l := float64(ue*ue) + float64(un*un); l > 0 {
		t := math.Min(1, math.Max(0, (float64(pe*ue)+float64(pn*un))/l))
		pe, pn = pe-float64(t*ue), pn-float64(t*un)
	}
	return math.Hypot(pe, pn)
}
