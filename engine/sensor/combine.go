package sensor

import (
	"math"

	"leadline/engine/geo"
)

// best calls use for the sources of a component that cover as much of the
// segment as the best one does; a standstill that does so silences the rest.
func (m *Motion) best(of part, use func(*source)) (covered Time) {
	still := false
	for i := range m.sources {
		if s := &m.sources[i]; s.has&of != 0 {
			if s.covered > covered {
				covered, still = s.covered, false
			}
			still = still || s.covered == covered && s.still
		}
	}
	for i := range m.sources {
		if s := &m.sources[i]; s.has&of != 0 && s.covered == covered && covered > 0 && (s.still || !still) {
			use(s)
		}
	}
	return min(covered, m.To-m.From)
}

// body is the combined motion in the vehicle's axes.
type body struct {
	forward, scaled, forwardVar float64 // scaled: the part that the odometer's scale stretches
	right, rightVar             float64
	turn, turnVar               float64
	biasS                       float64 // for how long the gyro's bias is in the turn
	covered, turnCovered        Time
}

// slipMPerSqrtM is the standard deviation of the sideways motion of a vehicle
// of which only the forward distance is measured, per square root of the
// distance (practice: tyres and hulls drift a little).
const slipMPerSqrtM = 0.02

func (m *Motion) body() body {
	var b body
	sum := 0.0
	b.turnCovered = m.best(hasTurn, func(s *source) {
		w := 1 / s.turnVar
		sum += w
		b.turn += w * s.turn
		if s.biased {
			b.biasS += w * float64(s.covered) / 1e9
		}
	})
	if sum > 0 {
		b.turn, b.turnVar, b.biasS = b.turn/sum, 1/sum, b.biasS/sum
	}
	sum = 0
	rightSum := 0.0
	b.covered = m.best(hasForward, func(s *source) {
		forward, right := s.forward, s.right
		if !s.still {
			// A sensor at (f, r) of the vehicle moves by turn·(-r, f) more
			// than the reference point, in the axes at the middle.
			forward += b.turn * s.arm.RightM
			right -= b.turn * s.arm.ForwardM
		}
		w := 1 / s.forwardVar
		sum += w
		b.forward += w * forward
		if s.scaled {
			b.scaled += w * s.forward
		}
		if !s.slip {
			w = 1 / s.rightVar
			rightSum += w
			b.right += w * right
		}
	})
	if sum > 0 {
		b.forward, b.scaled, b.forwardVar = b.forward/sum, b.scaled/sum, 1/sum
	}
	if rightSum > 0 {
		b.right, b.rightVar = b.right/rightSum, 1/rightSum
	} else {
		b.rightVar = slipMPerSqrtM * slipMPerSqrtM * math.Abs(b.forward)
	}
	return b
}

// ground is the combined displacement in true east and north.
type ground struct {
	east, north float64
	cov         [3]float64
	covered     Time
	// by is what the true displacement, less (east, north), grows by for each
	// unit of an error: of the velocity east and north, of the azimuth.
	by [3]geo.Point
}

// errors of a source, see ground.by: the true displacement is
//
//	(I + δ·J)·(east, north) - t·velocity error,  J = (0 1; -1 0),
//
// a small turn clockwise by δ. Inertial units integrate in a level frame that
// does not turn with the vehicle, so the error of the velocity keeps its
// direction when the vehicle turns, and is in true east and north. What is
// left of an odometry in the vehicle's own axes is its heading and its scale,
// which are quantities of their own (BodyDisplacement).
func (s *source) errors() (by [3]geo.Point) {
	if s.drifting {
		t := float64(s.covered) / 1e9
		by[0].E, by[1].N = -t, -t
	}
	if s.turned {
		by[2] = geo.Point{E: s.north, N: -s.east}
	}
	return by
}

func (m *Motion) ground(turn float64) ground {
	var g ground
	var info [3]float64
	var e, n float64
	var by [3]geo.Point
	count := 0
	g.covered = m.best(hasGround, func(s *source) {
		// A sensor away from the reference point swings round it by the
		// turn, in a direction that only the heading would tell: half of its
		// square goes to each axis.
		swing := square(turn) * (square(s.arm.ForwardM) + square(s.arm.RightM)) / 2
		c := [3]float64{s.cov[0] + swing, s.cov[1], s.cov[2] + swing}
		if count++; count == 1 {
			g.east, g.north, g.cov, g.by = s.east, s.north, c, s.errors()
		}
		det := float64(c[0]*c[2]) - float64(c[1]*c[1])
		inv := [3]float64{c[2] / det, -c[1] / det, c[0] / det}
		e += float64(inv[0]*s.east) + float64(inv[1]*s.north)
		n += float64(inv[1]*s.east) + float64(inv[2]*s.north)
		for i := range info {
			info[i] += inv[i]
		}
		for i, v := range s.errors() {
			by[i].E += float64(inv[0]*v.E) + float64(inv[1]*v.N)
			by[i].N += float64(inv[1]*v.E) + float64(inv[2]*v.N)
		}
	})
	if count > 1 {
		det := float64(info[0]*info[2]) - float64(info[1]*info[1])
		g.cov = [3]float64{info[2] / det, -info[1] / det, info[0] / det}
		g.east = float64(g.cov[0]*e) + float64(g.cov[1]*n)
		g.north = float64(g.cov[1]*e) + float64(g.cov[2]*n)
		for i, v := range by {
			g.by[i] = geo.Point{E: float64(g.cov[0]*v.E) + float64(g.cov[1]*v.N), N: float64(g.cov[1]*v.E) + float64(g.cov[2]*v.N)}
		}
	}
	return g
}
