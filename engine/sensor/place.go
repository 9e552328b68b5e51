package sensor

import (
	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// skew is the meridian convergence around a point, by interpolation between
// four exact values 20 km to either side, in E, N and E·N. Within 20 km of
// the point it is good to 2e-6 rad, within 100 km to 1e-4 (the tests compare
// at 60° latitude): far below any bearing.
type skew struct {
	at             geo.Point
	g0, gE, gN, gX float64
}

func newSkew(f geo.Frame, at geo.Point) skew {
	const h = 20000
	var g [4]float64
	for i := range g {
		g[i], _ = f.Convergence(geo.Point{E: at.E + h*float64(2*(i&1)-1), N: at.N + h*float64(2*(i>>1)-1)})
	}
	return skew{
		at: at,
		g0: (g[0] + g[1] + g[2] + g[3]) / 4,
		gE: (g[1] - g[0] + g[3] - g[2]) / (4 * h),
		gN: (g[2] + g[3] - g[0] - g[1]) / (4 * h),
		gX: (g[3] - g[2] - g[1] + g[0]) / (4 * h * h),
	}
}

// gamma is the convergence at a point: a true direction α is α - gamma in the
// frame.
func (s *skew) gamma(e, n float64) float64 {
	e, n = e-s.at.E, n-s.at.N
	return s.g0 + float64(s.gE*e) + float64(s.gN*n) + float64(float64(s.gX*e)*n)
}

// lengths gives the frame's scale over a line: frame length over true length
// for the line between eastings e1 and e2 is the mean of 1 + e²/2R² along it,
// 1 + (e1² + e1·e2 + e2²)/6R². Source: Simpson's rule on the transverse
// Mercator scale, as in survey practice; the next term is e⁴/24R⁴, 3e-9 at
// 100 km.
type lengths struct{ sixth float64 } // 1/6R²

func newLengths(f geo.Frame, at geo.Point) lengths {
	const e = 100000
	_, k := f.Convergence(geo.Point{E: e, N: at.N})
	return lengths{(k - 1) * 2 / (e * e) / 6}
}

func (l lengths) scale(e1, e2 float64) float64 {
	return 1 + l.sixth*(float64(e1*e1)+float64(e1*e2)+float64(e2*e2))
}

// arm is where a sensor sits beside the reference point, turned into the
// frame at each position: by the road's direction on roads, by the heading
// among the quantities on a plane, else by the pose's heading. Where no
// heading is known the arm is left out and half of its square is variance on
// each axis (unknownVar).
type arm struct {
	forward, right float64
	heading        int // index of the quantity, -1 without
	known          bool
	s, c           float64
	unknownVar     float64
}

func newArm(c *Context, forward, right float64) arm {
	a := arm{forward: forward, right: right, heading: filter.Index(c.Quantities, filter.Heading)}
	if forward == 0 && right == 0 {
		return a
	}
	v := c.Pose.HeadingVar
	// Beyond a radian the mean heading says next to nothing.
	a.known = v >= 0 && v < 1
	a.s, a.c = kernel.Sincos(c.Pose.HeadingRad)
	if c.Dim == 2 && a.heading < 0 {
		square := 0.5 * (forward*forward + right*right)
		a.unknownVar = square
		if a.known {
			a.unknownVar = square * (1 - kernel.Exp(-v))
		}
	}
	return a
}

func (a *arm) zero() bool { return a.forward == 0 && a.right == 0 }

// at returns the arm in the frame at position i and its derivative with
// respect to the heading quantity (zero where there is none). mean may be nil.
func (a *arm) at(i int, at *filter.Columns, k int, mean []float64) (oE, oN, dE, dN float64) {
	s, c := a.s, a.c
	observes := false
	switch {
	case at.Dim == 1:
		s, c = at.TangentE[i], at.TangentN[i]
	case a.heading >= 0 && mean != nil:
		s, c = kernel.Sincos(mean[i*k+a.heading])
		observes = true
	case !a.known:
		return 0, 0, 0, 0
	}
	oE = float64(a.forward*s) + float64(a.right*c)
	oN = float64(a.forward*c) - float64(a.right*s)
	if observes {
		dE, dN = oN, -oE // turning clockwise
	}
	return oE, oN, dE, dN
}

// lateral returns the variance, along a frame direction (uE, uN), of where a
// vehicle drives beside a road's centreline; 0 on a plane.
func lateral(at *filter.Columns, i int, varM2, uE, uN float64) float64 {
	if at.Dim != 1 {
		return 0
	}
	cross := float64(uE*at.TangentN[i]) - float64(uN*at.TangentE[i])
	return varM2 * cross * cross
}
