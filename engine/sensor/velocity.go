package sensor

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// A vehicle that reports no motion can be given a velocity that is estimated: it goes
// on as it went, and changes by white acceleration,
//
//	x' = x + v·t + w, v' = v + u, with cov(w, u) = q·(t³/3, t²/2; t²/2, t),
//
// where √q is the suite's velocity_drift_mps_per_sqrt_s. On a plane it has a part east
// and one north, on roads it is the speed along the road, which stays at junctions.
// Source: Bar-Shalom, Li & Kirubarajan, Estimation with Applications to Tracking and
// Navigation (2001), §6.2.2, the nearly constant velocity model.

// HasVelocity reports whether the velocity is estimated.
func (v Vehicle) HasVelocity() bool { return v.VelocityDriftMPSPerSqrtS > 0 }

// velocities are the quantities of it. Their prior is that of the motion prior: a
// velocity uniform in the disc of the largest speed has the variance max²/4 an axis, a
// speed uniform up to it the mean max/2 and the variance max²/12.
func (v Vehicle) velocities(dim int) []filter.Quantity {
	if !v.HasVelocity() {
		return nil
	}
	q := filter.Quantity{Name: filter.Speed, DriftVar: square(v.VelocityDriftMPSPerSqrtS)}
	q.PriorMean, q.PriorVar = v.MaxSpeedMPS/2, v.MaxSpeedMPS*v.MaxSpeedMPS/12
	if dim == 2 {
		q.Name, q.Axis = filter.VelocityEast, v.VelocityGrid
		q.PriorMean, q.PriorVar = 0, v.MaxSpeedMPS*v.MaxSpeedMPS/4
	}
	if v.VelocitySigmaMPS > 0 {
		q.PriorVar = square(v.VelocitySigmaMPS)
	}
	if dim == 1 {
		return []filter.Quantity{q}
	}
	north := q
	north.Name = filter.VelocityNorth
	return []filter.Quantity{q, north}
}

// velocityIn is the index of the first velocity among the quantities, or -1.
func velocityIn(qs []filter.Quantity, dim int) int {
	if dim == 1 {
		return filter.Index(qs, filter.Speed)
	}
	return filter.Index(qs, filter.VelocityEast)
}

// coast moves the positions by the velocities, where nothing measures the motion for
// gapS seconds.
func coast(s *filter.Step, qs []filter.Quantity, dim int, gapS float64) {
	first := velocityIn(qs, dim)
	for a := range dim {
		drive(s, qs, first+a, gapS, []int{a}, []float64{gapS})
	}
}

// MeasuredVelocity is what the segment's motion says of the velocity at its end, where
// that is estimated and all of the segment is measured: the displacement over the
// time, with the error of the displacement, and with q·t/3 for what the velocity has
// changed since its mean over the segment. That the position's error is the same is
// left out: it adds up over the segments, of which this is one. False if it says
// nothing.
func (m *Motion) MeasuredVelocity(qs []filter.Quantity, dim int, frame geo.Frame, pose Pose) (filter.LinearLikelihood, bool) {
	first := velocityIn(qs, dim)
	p, ok := m.Pace()
	if first < 0 || !ok {
		return nil, false
	}
	t := m.Seconds()
	own := qs[first].DriftVar * t / 3
	switch {
	case dim == 1 && !p.Over:
		return &velocity{first: first, rows: 1, mps: [2]float64{p.ForwardM / t}, cov: [3]float64{p.VarM2/(t*t) + own}}, true
	case dim == 2 && p.Over:
		g := m.ground(m.body().turn)
		d, cov := inFrame(g, frame, pose.At, true)
		for i := range cov {
			cov[i] /= t * t
		}
		cov[0] += own
		cov[2] += own
		return &velocity{first: first, rows: 2, mps: [2]float64{d.E / t, d.N / t}, cov: cov}, true
	}
	return nil, false
}

// velocity is a measured velocity.
type velocity struct {
	first, rows int
	mps         [2]float64
	cov         [3]float64
}

var (
	_ filter.LinearLikelihood = (*velocity)(nil)
	_ filter.OfVelocity       = (*velocity)(nil)
)

func (l *velocity) Wants() filter.Wants { return 0 }
func (l *velocity) Rows() int           { return l.rows }

func (l *velocity) Noise() filter.Noise {
	return filter.Noise{Parts: []filter.NoisePart{{Weight: 1, Cov: l.cov}}}
}

// Linearize implements filter.LinearLikelihood.
func (l *velocity) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, mean []float64) {
	k := len(qs)
	for i := range at.Len() {
		for r := range l.rows {
			t.Residual[i*l.rows+r] = l.mps[r] - mean[i*k+l.first+r]
			t.Row[(i*l.rows+r)*k+l.first+r] = 1
		}
	}
}

// LogVelocity implements filter.OfVelocity.
func (l *velocity) LogVelocity(east, north float64, least [2]float64) float64 {
	ee, en, nn := math.Max(l.cov[0], least[0]), l.cov[1], math.Max(l.cov[2], least[1])
	e, n := l.mps[0]-east, l.mps[1]-north
	det := float64(ee*nn) - float64(en*en)
	q := (float64(float64(e*e)*nn) - float64(2*en*float64(e*n)) + float64(float64(n*n)*ee)) / det
	return -2*kernel.LogSqrt2Pi - 0.5*(kernel.Log(det)+q)
}

// Course is the direction of a velocity in the frame and its standard deviation, and
// the speed with its own: along and across the mean.
func Course(vE, vN float64, cov [3]float64) (rad, sigmaRad, mps, sigmaMPS float64) {
	mps = hypot(vE, vN)
	if mps == 0 {
		return 0, math.Inf(1), 0, math.Sqrt(largerVariance(cov))
	}
	s, c := vE/mps, vN/mps
	along := float64(s*s*cov[0]) + float64(2*s*c*cov[1]) + float64(c*c*cov[2])
	across := float64(c*c*cov[0]) - float64(2*s*c*cov[1]) + float64(s*s*cov[2])
	return kernel.Atan2(vE, vN), math.Sqrt(math.Max(across, 0)) / mps, mps, math.Sqrt(math.Max(along, 0))
}
