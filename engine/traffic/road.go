package traffic

import (
	"fmt"
	"math"

	"leadline/engine/geo"
)

// Bounds of a stretch of road.
const (
	shortestM  = 20
	longestM   = 50_000
	maxCorners = 10_000
	nearestM   = 0.01 // two corners closer than this have no direction
	fastestMPS = 80   // for what a post may hear
)

// Road is a monitored stretch: a centreline, along which positions count in
// metres from its first point. Forward is away from there.
type Road struct {
	frame   geo.Frame
	corners []geo.Point
	fromM   []float64   // of each corner
	along   []geo.Point // unit vectors of the pieces between
	lengthM float64
}

// NewRoad makes a stretch out of a line in a frame, of 20 m to 50 km. The
// frame's scale is taken as 1: within 5 km of its origin that is right to 3e-7.
func NewRoad(frame geo.Frame, line []geo.Point) (*Road, error) {
	if len(line) < 2 || len(line) > maxCorners {
		return nil, fmt.Errorf("the road has %d points: give 2 to %d", len(line), maxCorners)
	}
	r := &Road{frame: frame, corners: append([]geo.Point(nil), line...), fromM: make([]float64, len(line))}
	for i, p := range line {
		if !geo.Finite(p.E, p.N) {
			return nil, fmt.Errorf("point %d of the road is not finite", i+1)
		}
		if i == 0 {
			continue
		}
		d := p.Sub(line[i-1])
		n := d.Norm()
		if !(n >= nearestM) {
			return nil, fmt.Errorf("points %d and %d of the road are one: leave one out", i, i+1)
		}
		r.along = append(r.along, geo.Point{E: d.E / n, N: d.N / n})
		r.fromM[i] = r.fromM[i-1] + n
	}
	r.lengthM = r.fromM[len(line)-1]
	if r.lengthM < shortestM || r.lengthM > longestM {
		return nil, fmt.Errorf("the road is %.1f m long: give %d to %d m", r.lengthM, shortestM, longestM)
	}
	return r, nil
}

// LengthM is the length of the stretch.
func (r *Road) LengthM() float64 { return r.lengthM }

// At is the place and the direction forward, clockwise from the frame's north,
// at a position along the road; beyond its ends the road goes straight on.
func (r *Road) At(positionM float64) (geo.Point, float64) {
	i := r.piece(positionM)
	d := positionM - r.fromM[i]
	p, u := r.corners[i], r.along[i]
	return geo.Point{E: p.E + float64(d*u.E), N: p.N + float64(d*u.N)}, geo.Heading(u)
}

// piece is the number of the straight piece that a position lies on.
func (r *Road) piece(positionM float64) int {
	lo, hi := 0, len(r.along)-1
	for lo < hi {
		if mid := (lo + hi + 1) / 2; r.fromM[mid] <= positionM {
			lo = mid
		} else {
			hi = mid - 1
		}
	}
	return lo
}

// Nearest is the position along the road nearest to a point, and how far off
// the road the point is.
func (r *Road) Nearest(p geo.Point) (positionM, awayM float64) {
	awayM = math.Inf(1)
	for i, u := range r.along {
		d := p.Sub(r.corners[i])
		x := math.Min(math.Max(float64(d.E*u.E)+float64(d.N*u.N), 0), r.fromM[i+1]-r.fromM[i])
		if away := (geo.Point{E: d.E - float64(x*u.E), N: d.N - float64(x*u.N)}).Norm(); away < awayM {
			positionM, awayM = r.fromM[i]+x, away
		}
	}
	return positionM, awayM
}

// Post is a place that hears vehicles and says from which direction.
type Post struct {
	ID string
	At geo.Point
	// AxisRad, where it is not nil, is the direction in the frame of a line of
	// microphones, which hears a direction and its mirror image alike.
	AxisRad *float64
}

// ear is a post beside a road: for each straight piece the post's distance from
// its line, and the position along the road of the foot of that distance.
type ear struct {
	post     Post
	road     *Road
	awayM    []float64
	footM    []float64
	soundMPS float64 // infinite if sound takes no time
	from, to float64 // positions between which it hears anything
	lateM    float64 // how far the fastest get while sound comes from the end of its reach
}

func newEar(road *Road, post Post, soundMPS, reachM float64) *ear {
	e := &ear{post: post, road: road, soundMPS: soundMPS, from: math.Inf(1), to: math.Inf(-1), lateM: reachM * fastestMPS / soundMPS}
	for i, u := range road.along {
		d := post.At.Sub(road.corners[i])
		x, away := float64(d.E*u.E)+float64(d.N*u.N), math.Abs(float64(d.E*u.N)-float64(d.N*u.E))
		foot := road.fromM[i] + x
		e.awayM, e.footM = append(e.awayM, away), append(e.footM, foot)
		if away < reachM {
			half := math.Sqrt(float64(reachM*reachM) - float64(away*away))
			if lo, hi := math.Max(foot-half, road.fromM[i]), math.Min(foot+half, road.fromM[i+1]); lo < hi {
				e.from, e.to = math.Min(e.from, lo), math.Max(e.to, hi)
			}
		}
	}
	return e
}

// emission is where the sound was made that arrives now from a vehicle that is
// now at a position, with a speed: at the position e with
//
//	s - e = v·d(e)/c,
//
// d the distance from the post. On a straight piece, with x and y the distances
// of e and s from the foot, a the post's from the line, and m = v/c,
//
//	x = (y - m·sqrt(y² + (1-m²)a²)) / (1-m²).
//
// The vehicle's speed is taken as constant over the delay, and below that of
// sound. piece is where to look first, and where it was found.
func (e *ear) emission(positionM, speedMPS float64, piece int) (atM, distanceM float64, found int) {
	m := speedMPS / e.soundMPS
	rest := 1 - float64(m*m)
	for moved := 0; ; {
		a, y := e.awayM[piece], positionM-e.footM[piece]
		x := (y - float64(m*math.Sqrt(float64(y*y)+float64(rest*a)*a))) / rest
		atM = e.footM[piece] + x
		switch {
		case piece > 0 && atM < e.road.fromM[piece] && moved <= 0:
			piece, moved = piece-1, -1
		case piece < len(e.awayM)-1 && atM >= e.road.fromM[piece+1] && moved >= 0:
			piece, moved = piece+1, 1
		default:
			return atM, math.Sqrt(float64(a*a) + float64(x*x)), piece
		}
	}
}

// offset is from the post to a position on a piece.
func (e *ear) offset(atM float64, piece int) geo.Point {
	d := atM - e.road.fromM[piece]
	p, u := e.road.corners[piece], e.road.along[piece]
	return geo.Point{E: p.E + float64(d*u.E) - e.post.At.E, N: p.N + float64(d*u.N) - e.post.At.N}
}
