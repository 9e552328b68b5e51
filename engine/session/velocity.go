package session

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// motionSensor names in a posterior's evidence what measured motion says of a velocity
// that is estimated.
const motionSensor = "motion"

// coasts is into how many parts of time a stretch is cut in which the velocity alone
// moves the belief. On roads, so that what is wide meets and merges at junctions, as
// after measured motion; with velocities as axes, so that what passes between
// neighbouring ones has not come far apart.
func (s *Session) coasts() sensor.Time {
	b := s.state.belief
	t := s.motion.GapS()
	switch {
	case s.lines != nil:
		mean, variance, _ := b.Moment(filter.Speed)
		return sensor.Time(math.Ceil(t * math.Max((math.Abs(mean)+2*math.Sqrt(variance))/partShiftM, 1/keepAboveS)))
	case len(b.Axes) > 0:
		return sensor.Time(math.Ceil(b.Slices.CellsApart(t) / mostApart))
	}
	return 1
}

// keepAboveS is after how many seconds at most a speed along a road is kept from being
// below 0: the position goes backwards in between.
const keepAboveS = 2.0

// mostApart is how many cells neighbouring velocities come apart in one step.
const mostApart = 2.0

// learnVelocity takes what the motion that was gathered tells of the velocity, keeps a
// speed along a road from turning round, and says what the speed is.
func (s *Session) learnVelocity() {
	st := &s.state
	b := st.belief
	if !s.suite.Vehicle.HasVelocity() {
		return
	}
	if s.lines != nil {
		filter.KeepAbove(b, filter.Speed, 0)
	}
	if l, ok := s.motion.MeasuredVelocity(b.Moved(), s.dim, s.space.Frame(), st.pose); ok {
		s.weigh(sensor.Event{Time: s.motion.To, Sensor: motionSensor, Measurement: sensor.Speed{}}, l)
	}
}

// velocity is the speed, and on a plane the course, of a belief that has velocities.
func (s *Session) velocity() (summary.Speed, bool) {
	b := s.state.belief
	if mean, variance, ok := b.Moment(filter.Speed); ok {
		return summary.Speed{Known: true, MPS: mean, SigmaMPS: math.Sqrt(variance)}, true
	}
	m, ok := b.State(s.space, &s.desk().work)
	if !ok {
		return summary.Speed{}, false
	}
	at := geo.Point{E: m.Mean[0], N: m.Mean[1]}
	gamma, k := s.space.Frame().Convergence(at)
	cov := [3]float64{m.Cov[filter.Packed(2, 2)], m.Cov[filter.Packed(3, 2)], m.Cov[filter.Packed(3, 3)]}
	course, sigma, mps, sigmaMPS := sensor.Course(m.Mean[2], m.Mean[3], cov)
	v := summary.Speed{Known: true, MPS: mps / k, SigmaMPS: sigmaMPS / k}
	if sigma < math.Pi/2 {
		v.Course = summary.Direction{Known: true, TrueRad: geo.WrapCompass(course + gamma), SigmaRad: sigma}
	}
	return v, true
}
