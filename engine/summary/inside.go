package summary

import (
	"errors"
	"fmt"
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// maxPolygonCorners bounds the polygons that Inside takes.
const maxPolygonCorners = 100_000

// ErrNothing is returned by Inside and Region before the first Summarize.
var ErrNothing = errors.New("summary: no belief has been summarized yet")

// Inside returns the probability, under the last belief that was summarized,
// that the vehicle is inside a polygon: an exterior ring, then holes, each a
// closed or open chain of positions in either sense. Edges are straight in the
// map's frame. Rings must not cross themselves or each other.
//
// The mass of a Gaussian in a polygon is, after whitening, that of a polygon
// under the standard normal; with the triangles from the mean to each edge,
// at distance h from it and subtending the angle from θ₁ to θ₂ off its
// perpendicular,
//
//	P = Σ ± ( (θ₂-θ₁)/2π - T(h, tan θ₂) + T(h, tan θ₁) ),
//
// T being Owen's function (Owen, Annals of Mathematical Statistics 27, 1956).
// The error is below 1e-8 a Gaussian. Gaussians farther than 7 of their major
// sigmas from every edge count by their means, an error below 2.4e-11.
func (s *Summarizer) Inside(polygon [][]geo.LonLat) (float64, error) {
	if len(s.mass) == 0 {
		return 0, ErrNothing
	}
	rings, err := s.project(polygon)
	if err != nil {
		return 0, err
	}
	sum := 0.0
	for i, m := range s.mass {
		if m > 0 {
			sum += float64(m * s.insideOne(geo.Point{E: s.east[i], N: s.north[i]}, s.covs[i], rings))
		}
	}
	return math.Min(math.Max(sum, 0), 1), nil
}

// project turns the rings into frame points, the exterior counter-clockwise
// and the holes clockwise, each closed.
func (s *Summarizer) project(polygon [][]geo.LonLat) ([][]geo.Point, error) {
	if len(polygon) == 0 {
		return nil, errors.New("summary: a polygon without rings; give an exterior ring of at least three positions")
	}
	corners := 0
	out := make([][]geo.Point, len(polygon))
	for r, ring := range polygon {
		if corners += len(ring); corners > maxPolygonCorners {
			return nil, fmt.Errorf("summary: a polygon of more than %d positions; simplify it", maxPolygonCorners)
		}
		if n := len(ring); n > 1 && ring[0] == ring[n-1] {
			ring = ring[:n-1]
		}
		if len(ring) < 3 {
			return nil, fmt.Errorf("summary: ring %d of the polygon has %d different positions; at least three are needed", r, len(ring))
		}
		pts := make([]geo.Point, 0, len(ring)+1)
		for i, p := range ring {
			if err := p.Check(); err != nil {
				return nil, fmt.Errorf("summary: ring %d of the polygon, position %d: %w", r, i, err)
			}
			q := s.frame.Forward(p)
			if !geo.Finite(q.E, q.N) {
				return nil, fmt.Errorf("summary: ring %d of the polygon, position %d is too far from the map", r, i)
			}
			pts = append(pts, q)
		}
		pts = append(pts, pts[0])
		area := 0.0
		for i := range len(pts) - 1 {
			a, b := pts[i].Sub(pts[0]), pts[i+1].Sub(pts[0])
			area += float64(a.E*b.N) - float64(a.N*b.E)
		}
		if (area < 0) == (r == 0) {
			for i, j := 0, len(pts)-1; i < j; i, j = i+1, j-1 {
				pts[i], pts[j] = pts[j], pts[i]
			}
		}
		out[r] = pts
	}
	return out, nil
}

// sureSigmas from every edge, a Gaussian is all in or all out.
const sureSigmas = 7

func (s *Summarizer) insideOne(mean geo.Point, c Cov, rings [][]geo.Point) float64 {
	l1, l2 := c.eigen()
	reach := sureSigmas * math.Sqrt(l1)
	near, winding := false, 0
	for _, ring := range rings {
		for i := range len(ring) - 1 {
			a, b := ring[i].Sub(mean), ring[i+1].Sub(mean)
			if !near && distance(a, b) <= reach {
				near = true
			}
			cross := float64(a.E*b.N) - float64(a.N*b.E)
			if a.N <= 0 && b.N > 0 && cross > 0 {
				winding++
			} else if a.N > 0 && b.N <= 0 && cross < 0 {
				winding--
			}
		}
	}
	if !near || l1 == 0 {
		return float64(min(max(winding, 0), 1))
	}
	// Whiten along the axes; the floor makes a line a strip of a millionth of
	// its length.
	l2 = math.Max(l2, 1e-12*l1)
	axis := c.axis()
	i1, i2 := 1/math.Sqrt(l1), 1/math.Sqrt(l2)
	white := func(p geo.Point) geo.Point {
		p = p.Sub(mean)
		return geo.Point{
			E: i1 * (float64(p.E*axis.E) + float64(p.N*axis.N)),
			N: i2 * (float64(p.N*axis.E) - float64(p.E*axis.N)),
		}
	}
	sum := 0.0
	for _, ring := range rings {
		a := white(ring[0])
		for _, p := range ring[1:] {
			b := white(p)
			sum += triangle(a, b)
			a = b
		}
	}
	return math.Min(math.Max(sum, 0), 1)
}

// distance returns that of the origin from the segment ab.
func distance(a, b geo.Point) float64 {
	d := b.Sub(a)
	l2 := float64(d.E*d.E) + float64(d.N*d.N)
	u := 0.0
	if l2 > 0 {
		u = math.Min(math.Max(-(float64(a.E*d.E)+float64(a.N*d.N))/l2, 0), 1)
	}
	return geo.Point{E: a.E + float64(u*d.E), N: a.N + float64(u*d.N)}.Norm()
}

// triangle returns the standard normal's mass in the triangle of the origin and
// the edge from a to b, negative if it turns clockwise.
func triangle(a, b geo.Point) float64 {
	d := b.Sub(a)
	l := d.Norm()
	cross := float64(a.E*b.N) - float64(a.N*b.E)
	if l == 0 || cross == 0 {
		return 0
	}
	h := math.Abs(cross) / l
	// Places of a and b along the edge from the foot of the perpendicular.
	pa := (float64(a.E*d.E) + float64(a.N*d.N)) / l
	pb := (float64(b.E*d.E) + float64(b.N*d.N)) / l
	area := (kernel.Atan2(pb, h)-kernel.Atan2(pa, h))/(2*math.Pi) - owen(h, pb/h) + owen(h, pa/h)
	if cross < 0 {
		return -area
	}
	return area
}

// owen returns Owen's T(h, a) = 1/2π ∫₀^a exp(-h²(1+x²)/2)/(1+x²) dx for h ≥ 0,
// to 1e-10; beyond |a| = 1 by T(h, a) = ½Q(h) + ½Q(ah) - Q(h)Q(ah) - T(ah, 1/a)
// (Owen 1956, eq. 2.3).
func owen(h, a float64) float64 {
	switch {
	case a < 0:
		return -owen(h, -a)
	case a == 0:
		return 0
	case a > 1:
		ah := a * h
		q1, q2 := kernel.NormalUpper(h), kernel.NormalUpper(ah)
		t := 0.5*(q1+q2) - float64(q1*q2)
		if math.IsInf(a, 1) {
			return t
		}
		return t - owen(ah, 1/a)
	case h > 9:
		return 0 // below exp(-40)
	}
	sum := 0.0
	for i, x := range gauss10[0] {
		for _, x := range [2]float64{0.5 * a * (1 - x), 0.5 * a * (1 + x)} {
			u := 1 + float64(x*x)
			sum += gauss10[1][i] * kernel.Exp(-0.5*float64(h*h)*u) / u
		}
	}
	return sum * 0.5 * a / (2 * math.Pi)
}

// gauss10 are the positive nodes of Gauss and Legendre's rule with ten nodes,
// and its weights: Abramowitz & Stegun table 25.4.
var gauss10 = [2][5]float64{
	{0.1488743389816312, 0.4333953941292472, 0.6794095682990244, 0.8650633666889845, 0.9739065285171717},
	{0.2955242247147529, 0.2692667193099963, 0.2190863625159821, 0.1494513491505806, 0.0666713443086881},
}
