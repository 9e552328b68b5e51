package sensor

import "math"

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
	})
	if sum > 0 {
		b.turn, b.turnVar = b.turn/sum, 1/sum
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
}

func (m *Motion) ground(turn float64) ground {
	var g ground
	var info [3]float64
	var e, n float64
	count := 0
	g.covered = m.best(hasGround, func(s *source) {
		// A sensor away from the reference point swings round it by the
		// turn, in a direction that only the heading would tell: half of its
		// square goes to each axis.
		swing := square(turn) * (square(s.arm.ForwardM) + square(s.arm.RightM)) / 2
		c := [3]float64{s.cov[0] + swing, s.cov[1], s.cov[2] + swing}
		if count++; count == 1 {
			g.east, g.north, g.cov = s.east, s.north, c
		}
		det := float64(c[0]*c[2]) - float64(c[1]*c[1])
		inv := [3]float64{c[2] / det, -c[1] / det, c[0] / det}
		e += float64(inv[0]*s.east) + float64(inv[1]*s.north)
		n += float64(inv[1]*s.east) + float64(inv[2]*s.north)
		for i := range info {
			info[i] += inv[i]
		}
	})
	if count > 1 {
		det := float64(info[0]*info[2]) - float64(info[1]*info[1])
		g.cov = [3]float64{info[2] / det, -info[1] / det, info[0] / det}
		g.east = float64(g.cov[0]*e) + float64(g.cov[1]*n)
		g.north = float64(g.cov[1]*e) + float64(g.cov[2]*n)
	}
	return g
}
