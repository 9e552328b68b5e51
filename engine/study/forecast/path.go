package forecast

import (
	"cmp"
	"errors"
	"fmt"
	"math"
	"slices"
	"time"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// Path is a route as it lies on a map.
type Path struct {
	space   filter.Space
	lengthM float64 // true metres
	// On roads: the charts, one after the other.
	legs []leg
	// On a plane: the corners in the frame, and the true way up to each.
	corners []geo.Point
	alongM  []float64
	// When the places wayM were reached, s after the start.
	wayM, timeS []float64
}

// leg is a part of a chart that is driven.
type leg struct {
	chart    int32
	from, to float64 // along the chart
	beforeM  float64 // of the path
}

// place is a spot of a path.
type place struct {
	wayM    float64
	chart   int32 // on roads
	alongM  float64
	at      geo.Point
	heading float64 // in the frame
	leg     int
}

// NewPath lays a route on a map. On roads it is matched to them (see match.go).
// speedMPS holds where the file gives no times; 0 asks for the times.
func NewPath(space filter.Space, r *Route, speedMPS float64) (*Path, error) {
	p := &Path{space: space}
	frame := space.Frame()
	points := make([]geo.Point, len(r.Points))
	for i, q := range r.Points {
		points[i] = frame.Forward(q)
	}
	var wayM []float64 // of the points
	var err error
	if lines, ok := space.(filter.Nearby); ok {
		wayM, err = p.match(lines, points)
	} else {
		wayM, err = p.lay(space.(filter.PlaneSpace), points)
	}
	if err != nil {
		return nil, fmt.Errorf("%s: %w", r.Name, err)
	}
	if p.lengthM < 1 {
		return nil, fmt.Errorf("%s: the route is %.2g m long on the map: it must be a metre and more", r.Name, p.lengthM)
	}
	if err := p.clock(wayM, r.Times, speedMPS); err != nil {
		return nil, fmt.Errorf("%s: %w", r.Name, err)
	}
	return p, nil
}

// maxPathS bounds how long a route may take.
const maxPathS = 24 * 3600

// clock says when which place is reached.
func (p *Path) clock(wayM []float64, times []time.Time, speedMPS float64) error {
	switch {
	case speedMPS != 0 && !(speedMPS > 0 && speedMPS <= math.MaxFloat64):
		return fmt.Errorf("the speed is %v m/s: it must be a number above 0", speedMPS)
	case speedMPS > 0:
		p.wayM, p.timeS = []float64{0, p.lengthM}, []float64{0, p.lengthM / speedMPS}
	case times == nil:
		return errors.New("it has no times of its own: give --speed, in metres a second")
	default:
		for i, s := range wayM {
			t := times[i].Sub(times[0]).Seconds()
			if n := len(p.wayM); n > 0 && s < p.wayM[n-1] { // matching may jitter by centimetres
				s = p.wayM[n-1]
			}
			p.wayM, p.timeS = append(p.wayM, s), append(p.timeS, t)
		}
	}
	if s := p.durationS(); !(s <= maxPathS) {
		return fmt.Errorf("it takes %.0f s: at most %d are forecast; cut it, or give a greater --speed", s, maxPathS)
	}
	return nil
}

func (p *Path) durationS() float64 { return p.timeS[len(p.timeS)-1] }

// LengthM is the path's true length.
func (p *Path) LengthM() float64 { return p.lengthM }

// wayAt is how far along the vehicle is t seconds after the start.
func (p *Path) wayAt(t float64) float64 { return interpolate(p.timeS, p.wayM, t) }

// timeAt is when it gets there, s.
func (p *Path) timeAt(wayM float64) float64 { return interpolate(p.wayM, p.timeS, wayM) }

// interpolate is linear between (x, y), which rise, and constant beyond.
func interpolate(x, y []float64, at float64) float64 {
	i, _ := slices.BinarySearch(x, at)
	switch {
	case i == 0:
		return y[0]
	case i == len(x):
		return y[len(y)-1]
	}
	if !(x[i] > x[i-1]) {
		return y[i]
	}
	return y[i-1] + (y[i]-y[i-1])*(at-x[i-1])/(x[i]-x[i-1])
}

// lay puts a route on a plane.
func (p *Path) lay(space filter.PlaneSpace, points []geo.Point) (wayM []float64, err error) {
	for i, q := range points {
		if !space.Bounds().Contains(q) {
			return nil, fmt.Errorf("point %d lies off the map: check its coordinates (longitude first) and the map's extent", i+1)
		}
		if i == 0 {
			p.corners, p.alongM = []geo.Point{q}, []float64{0}
		} else if d := q.Sub(points[i-1]); d.Norm() > 0 {
			_, k := space.Frame().Convergence(geo.Point{E: (q.E + points[i-1].E) / 2, N: (q.N + points[i-1].N) / 2})
			p.lengthM += d.Norm() / k
			p.corners, p.alongM = append(p.corners, q), append(p.alongM, p.lengthM)
		}
		wayM = append(wayM, p.lengthM)
	}
	return wayM, nil
}

// place finds a spot; beyond the ends it is the end.
func (p *Path) place(wayM float64) place {
	wayM = math.Min(math.Max(wayM, 0), p.lengthM)
	if p.legs == nil {
		i, _ := slices.BinarySearch(p.alongM, wayM)
		i = min(max(i, 1), len(p.corners)-1)
		a, b := p.corners[i-1], p.corners[i]
		f := (wayM - p.alongM[i-1]) / (p.alongM[i] - p.alongM[i-1])
		d := b.Sub(a)
		return place{wayM: wayM, at: geo.Point{E: a.E + f*d.E, N: a.N + f*d.N}, heading: geo.Heading(d), chart: -1}
	}
	i, found := slices.BinarySearchFunc(p.legs, wayM, func(l leg, s float64) int { return cmp.Compare(l.beforeM, s) })
	if !found {
		i--
	}
	l := p.legs[i]
	q := place{wayM: wayM, chart: l.chart, alongM: math.Min(l.from+wayM-l.beforeM, l.to), leg: i}
	c := filter.Columns{Wants: filter.WantPosition | filter.WantHeading}
	p.space.(filter.LineSpace).Sample(&c, []int32{q.chart}, []float64{q.alongM}, 1)
	q.at, q.heading = geo.Point{E: c.East[0], N: c.North[0]}, c.Heading[0]
	return q
}

// turned is by how much the heading changes between two places, rad; on roads it
// follows each bend, whatever its angle.
func (p *Path) turned(from, to place) float64 {
	if p.legs == nil || from.leg == to.leg {
		return geo.WrapPi(to.heading-from.heading) + p.whole(from, to)
	}
	sum, at := 0.0, from
	for i := from.leg; i <= to.leg; i++ {
		end := to
		if i < to.leg {
			end = p.place(p.legs[i+1].beforeM - 1e-9)
			end.leg = i
		}
		if at.leg != i { // over the junction
			next := p.place(p.legs[i].beforeM)
			sum += geo.WrapPi(next.heading - at.heading)
			at = next
		}
		sum += end.heading - at.heading // unwrapped along a chart
		at = end
	}
	return sum
}

// whole are the full turns between two places of one chart.
func (p *Path) whole(from, to place) float64 {
	if p.legs == nil {
		return 0
	}
	d := to.heading - from.heading
	return d - geo.WrapPi(d)
}

// lonLat is where a place is on the globe.
func (p *Path) lonLat(q place) geo.LonLat { return p.space.Frame().Inverse(q.at) }

// Charts are the directed edges that the path takes, in order; none on a plane.
func (p *Path) Charts() (out []int32) {
	for _, l := range p.legs {
		out = append(out, l.chart)
	}
	return out
}

// WayOf is how far along the path a place of a chart is, at or after a place
// along the path, as a vehicle that follows it comes by; NaN if it does not.
func (p *Path) WayOf(chart int32, alongM, afterM float64) float64 {
	const backM = 30.0 // a vehicle may back, and its place on the map jitter
	for _, l := range p.legs {
		if l.chart != chart {
			continue
		}
		if s := l.beforeM + math.Min(math.Max(alongM, l.from), l.to) - l.from; s >= afterM-backM || afterM != afterM {
			return s
		}
	}
	return math.NaN()
}
