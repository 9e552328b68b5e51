package sensor

import (
	"fmt"
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/kernel"
)

func sincos(a float64) (s, c float64) { return kernel.Sincos(a) }

// Pose is where a belief is, for turning true directions into the frame's and
// for what a step can only know on average.
type Pose struct {
	At geo.Point // the mean position
	// HeadingRad is the mean heading in the frame, and its variance; a
	// variance of NaN or +Inf says that there is none.
	HeadingRad, HeadingVar float64
}

// NoHeading is the HeadingVar of a pose without a heading.
var NoHeading = math.Inf(1)

// Step turns the segment's motion into a step for a belief over the
// quantities qs on roads (dim 1) or on a plane (dim 2, qs may be empty).
//
// heading += turn - bias·t + v, where the turn is of the gyro that the bias is
// of and t for how long it turned (drive).
//
// On roads: along += d·(1 + scale) + v; a ground displacement that covers more
// than the distance does moves each Gaussian by its component along the road,
// with the larger variance of its ellipse.
//
// On a plane: a ground displacement D moves east and north by k·R·((I + δJ)D -
// t·u) with R the rotation into the frame and k its scale at the mean, and its
// errors of azimuth δ and velocity u if they are estimated (source.errors). A
// motion in the
// vehicle's axes moves each Gaussian by k·R(heading + (turn - bias·t)/2)·
// (forward·(1 + scale), right), and needs a heading among the quantities.
//
// Every quantity gains its drift. Time that nobody covers gains the gap's
// spread (type Vehicle, gapPrior), or is gone through with the velocity that is
// estimated (coast); a turn that nobody measures, turnVar.
func (m *Motion) Step(qs []filter.Quantity, dim int, frame geo.Frame, pose Pose) (filter.Step, error) {
	var s filter.Step
	err := m.StepInto(&s, qs, dim, frame, pose)
	return s, err
}

// StepInto is Step into s, whose memory it keeps: nothing else may hold what s was.
func (m *Motion) StepInto(s *filter.Step, qs []filter.Quantity, dim int, frame geo.Frame, pose Pose) error {
	mustDim(dim)
	s.Reset(max(len(qs), dim))
	heading := filter.Index(qs, filter.Heading)
	scale := filter.Index(qs, filter.OdometerScale)
	b := m.body()
	g := m.ground(b.turn)
	for i := dim; i < len(qs); i++ {
		s.Q[filter.Packed(i, i)] += qs[i].DriftVar * m.Seconds()
	}
	if heading >= 0 {
		gap := float64(m.To-m.From-b.turnCovered) / 1e9
		s.Add[heading] = b.turn
		s.Q[filter.Packed(heading, heading)] += b.turnVar + m.Suite.Vehicle.turnVar(gap)
		if bias := filter.Index(qs, filter.GyroBias); bias >= 0 && b.biasS > 0 {
			drive(s, qs, bias, m.Seconds(), []int{heading}, []float64{-b.biasS})
		}
	}
	var covered Time
	var err error
	var plus [2]float64 // the mean motion in a gap
	if dim == 1 {
		covered = m.roadStep(s, b, g, frame, pose, scale)
		if o := m.Suite.Vehicle.KeepsRightM; o != 0 && heading >= 0 && s.Local == nil {
			beside(s, o, heading)
		}
	} else {
		covered, err = m.planeStep(s, b, g, frame, pose, qs)
	}
	if err != nil {
		return err
	}
	switch gapS := float64(m.To-m.From-covered) / 1e9; {
	case gapS > 0 && velocityIn(qs, dim) >= 0:
		coast(s, qs, dim, gapS)
	case gapS > 0:
		mean, v := m.Suite.Vehicle.gap(dim).step(m.GapAgeS, gapS, m.HasVelocity)
		for i := range dim {
			if m.HasVelocity {
				plus[i] = mean * m.VelocityMPS[i]
				s.Add[i] += plus[i]
			}
			s.Q[filter.Packed(i, i)] += v
		}
	}
	switch l := s.Local.(type) { // it replaces Add for positions
	case *alongRoad:
		l.plus = plus[0]
	case *bodyMotion:
		l.plus = plus
	}
	return nil
}

func (m *Motion) roadStep(s *filter.Step, b body, g ground, frame geo.Frame, pose Pose, scale int) Time {
	if g.covered > b.covered {
		d, cov := inFrame(g, frame, pose.At, false)
		s.Local = &alongRoad{d: d}
		s.Q[0] += largerVariance(cov)
		return g.covered
	}
	s.Add[0] = b.forward
	s.Q[0] += b.forwardVar + m.Suite.Vehicle.MapVar(b.forward, m.Bend.turned(b.forward, b.turn, b.turnVar))
	if scale >= 0 && b.scaled != 0 {
		s.SetF(0, scale, b.scaled)
	}
	return b.covered
}

// beside has the place along a road's line grow by o times what the heading grows
// by: a vehicle that keeps o metres right of the line goes o·θ less than the line
// where that bends right by θ, and so much more where it bends left. With h the
// heading, x' is replaced by x' + o (h' - h), noise included.
func beside(s *filter.Step, o float64, h int) {
	s.Add[0] += o * s.Add[h]
	k := len(s.Add)
	if s.F != nil {
		for j := range k {
			f := s.F[h*k+j]
			if j == h {
				f--
			}
			if f != 0 {
				s.SetF(0, j, s.F[j]+o*f)
			}
		}
	}
	s.Q[filter.Packed(0, 0)] += float64(2*o*s.Q[filter.Packed(h, 0)]) + float64(o*o*s.Q[filter.Packed(h, h)])
	for j := 1; j < k; j++ {
		s.Q[filter.Packed(j, 0)] += o * s.Q[filter.Packed(max(j, h), min(j, h))]
	}
}

// MapVar is the variance with which a way driven differs from the way on the
// map, m²: by what the map's error stretches it, and by what a driver cuts off
// or goes out of the way at corners, in proportion to the angle turned.
func (v Vehicle) MapVar(forward, turned float64) float64 {
	stretch := float64(v.StretchMPerSqrtM * v.StretchMPerSqrtM * math.Abs(forward))
	return stretch + float64(v.CornerSigmaM*v.CornerSigmaM*turned)/(math.Pi/2)
}

// inFrame turns a true displacement into the frame at a point; scaled says
// whether lengths take the frame's scale (on roads they stay true).
func inFrame(g ground, frame geo.Frame, at geo.Point, scaled bool) (geo.Point, [3]float64) {
	c, s, k := frame.Rotation(at)
	if !scaled {
		k = 1
	}
	d := geo.Point{E: k * (float64(c*g.east) - float64(s*g.north)), N: k * (float64(s*g.east) + float64(c*g.north))}
	ee, en, nn := g.cov[0], g.cov[1], g.cov[2]
	k2 := k * k
	return d, [3]float64{
		k2 * (float64(c*c*ee) - float64(2*c*s*en) + float64(s*s*nn)),
		k2 * (float64(c*s*(ee-nn)) + float64((c*c-s*s)*en)),
		k2 * (float64(s*s*ee) + float64(2*c*s*en) + float64(c*c*nn)),
	}
}

// largerVariance is the larger eigenvalue of a covariance.
func largerVariance(c [3]float64) float64 {
	return 0.5*(c[0]+c[2]) + hypot(0.5*(c[0]-c[2]), c[1])
}

func (m *Motion) planeStep(s *filter.Step, b body, g ground, frame geo.Frame, pose Pose, qs []filter.Quantity) (Time, error) {
	if g.covered >= b.covered && g.covered > 0 {
		d, cov := inFrame(g, frame, pose.At, true)
		s.Add[0], s.Add[1] = d.E, d.N
		for i, v := range cov {
			s.Q[i] += v
		}
		for i, name := range [3]string{filter.VelocityErrorEast, filter.VelocityErrorNorth, filter.AzimuthError} {
			if q := filter.Index(qs, name); q >= 0 && g.by[i] != (geo.Point{}) {
				by, _ := inFrame(ground{east: g.by[i].E, north: g.by[i].N}, frame, pose.At, true)
				drive(s, qs, q, m.Seconds(), []int{0, 1}, []float64{by.E, by.N})
			}
		}
		return g.covered, nil
	}
	if b.covered == 0 {
		return 0, nil
	}
	heading := filter.Index(qs, filter.Heading)
	if heading < 0 {
		return 0, fmt.Errorf("sensor: motion in the vehicle's own axes needs a heading on a plane: declare the sensor in the suite, so that heading_rad is estimated, or send displacement or speed with course")
	}
	_, ks := frame.Convergence(pose.At)
	local := &bodyMotion{
		k: len(qs), heading: heading, scale: filter.Index(qs, filter.OdometerScale), bias: -1, b: b, frameScale: ks,
	}
	if b.biasS > 0 {
		local.bias = filter.Index(qs, filter.GyroBias)
	}
	s.Local = local
	local.spread(s.Q, pose)
	return b.covered, nil
}

// alongRoad moves each Gaussian by a displacement's component along its road.
type alongRoad struct {
	d    geo.Point
	plus float64
}

var _ filter.Local = (*alongRoad)(nil)

// Wants asks for the road's direction and bend.
func (l *alongRoad) Wants() filter.Wants { return filter.WantPosition | filter.WantHeading }

// Local implements filter.Local. The road bends by κ·s over the way s, whose
// chord points along the direction at its middle, t(s/2), s = D·t(0) to first
// order: the shift is D·t(s/2), its derivative along the road κ·D·n with n
// the road's right-hand normal there.
func (l *alongRoad) Local(add, f []float64, at *filter.Columns, mean, _ []float64) {
	n := at.Len()
	if n == 0 {
		return
	}
	k := len(mean) / n
	for i := range n {
		tE, tN := midTangent(at, i, 0.5*(float64(l.d.E*at.TangentE[i])+float64(l.d.N*at.TangentN[i])))
		add[i] = float64(l.d.E*tE) + float64(l.d.N*tN)
		row := f[i*k : i*k+k]
		clear(row)
		row[0] = 1 + at.Curvature[i]*(float64(l.d.E*tN)-float64(l.d.N*tE))
		add[i] += l.plus
		affine(add[i:i+1], row, mean[i*k:i*k+k])
	}
}

// affine turns shifts into the constant terms of an affine map: filter.Predict
// moves a mean x to F x + add, and the shift of a motion that is not linear is
// its value at the mean, x' = x + shift. So add = shift - (F - I) x. f holds
// the rows of the positions only.
func affine(add, f, x []float64) {
	k := len(x)
	for d := range add {
		for j, v := range f[d*k : d*k+k] {
			if j == d {
				v--
			}
			add[d] -= float64(v * x[j])
		}
	}
}

// midTangent is the road's direction way metres on from position i, turned by
// its curvature.
func midTangent(at *filter.Columns, i int, way float64) (tE, tN float64) {
	s, c := kernel.Sincos(at.Curvature[i] * way) // clockwise
	tE, tN = at.TangentE[i], at.TangentN[i]
	return float64(tE*c) + float64(tN*s), float64(tN*c) - float64(tE*s)
}
