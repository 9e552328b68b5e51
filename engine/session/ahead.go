package session

import (
	"errors"
	"fmt"
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/kernel"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// Ahead is a copy of a session's belief that can be carried on to a time for
// which there is no measurement yet. The session does not change with it, nor
// it with the session: another goroutine may have it.
type Ahead struct {
	s *Session // without events
	p *summary.Posterior
}

// Ahead copies the present belief. What waits for a motion sensor, at most
// hold_s of events, is not in it.
func (s *Session) Ahead() (*Ahead, error) {
	if !s.state.begun {
		return nil, errors.New("there is no posterior yet")
	}
	if s.state.poseDue {
		s.takePose()
	}
	c := &Session{
		vehicle: s.vehicle, space: s.space, lines: s.lines, names: s.names, suite: s.suite, dim: s.dim,
		cellsM: s.cellsM, maxCells: s.maxCells, maxCarried: maxCarried, manyPieces: s.manyPieces,
		rates: s.rates, nowhere: s.nowhere, near: s.near, entry: s.entry, areaM2: s.areaM2,
		state: s.state.clone(), accepted: s.accepted, refused: s.refused,
	}
	c.motion.Suite = s.suite
	return &Ahead{s: c}, nil
}

// Bounds of Carry. A belief on roads that spreads through a town for minutes
// costs more than an answer may: it is followed over the roads while that makes
// no more than maxCarried pieces of Gaussians in all, each of which takes 0.2 µs
// to 1 µs.
const (
	maxCarried  = 800_000
	carryPieceS = 1.0
)

// Carry moves the belief on to a time by the motion prior, as a gap does, and
// returns the posterior for then. A time that has been computed already gives
// the present belief. It is an error to go more than a day ahead.
//
// On roads a belief that has become wide is no longer followed along them. Each
// of its places then spreads as a circle over the plane, with a variance on
// each axis that is the mean square distance which the prior gives for the rest
// of the time: no less than following the roads would give, along which one
// gets less far. Edges, heading and nuisances are unknown from there on, and the
// entropy is that of a Gaussian of the covariance, ln m².
func (a *Ahead) Carry(to sensor.Time) (*summary.Posterior, error) {
	s := a.s
	st := &s.state
	if ahead := to.Seconds(st.time); ahead > maxJumpS {
		return nil, fmt.Errorf("the belief is of %.0f s before that, and is carried on by a day at most", ahead)
	}
	if to > st.time {
		if s.lines == nil {
			s.drift(to)
			s.adapt()
		} else {
			s.wander(to)
		}
		st.evidence = nil
	}
	s.fresh = false
	p := &summary.Posterior{}
	if err := s.read(&s.desk().sum, p); err != nil {
		panic(fmt.Sprintf("session: %v", err)) // a belief is never empty
	}
	p.GapS, p.LostAlarm = st.gapS, st.aside.alarm
	if _, left := s.space.(offRoads); left {
		c := p.CovFrame
		p.EntropyNats = 0.5 * kernel.Log(float64(2*math.Pi*math.E*2*math.Pi*math.E)*(float64(c.EE*c.NN)-float64(c.EN*c.EN)))
	}
	s.fresh = true
	a.p = p
	return p, nil
}

// Time is the time that the belief is of: before Carry, that of the last
// measurement in it.
func (a *Ahead) Time() sensor.Time { return a.s.state.time }

// Region is Session.Region of the belief that was carried.
func (a *Ahead) Region(fraction float64) (*summary.Region, error) { return a.s.Region(fraction) }

// Inside is Session.Inside of the belief that was carried.
func (a *Ahead) Inside(polygon [][]geo.LonLat) (float64, error) { return a.s.Inside(polygon) }

// Protection is Session.Protection of the belief that was carried.
func (a *Ahead) Protection(risk float64) (summary.Protection, error) { return a.s.Protection(risk) }

// ReadBelief spells out the belief that was carried.
func (a *Ahead) ReadBelief(dst *filter.Cloud) { a.s.ReadBelief(dst) }

// drift moves the belief over a stretch in which nothing measures the motion.
func (s *Session) drift(to sensor.Time) {
	s.gather(s.state.time, to)
	s.predict()
	s.state.time = to
}

// wander moves a belief on roads, piece by piece, while that is cheap. Cells as
// wide as what is added do.
func (s *Session) wander(to sensor.Time) {
	st := &s.state
	for made := 0.0; st.time < to; {
		s.gather(st.time, to)
		whole, err := s.motion.Step(st.belief.Moved(), s.dim, s.space.Frame(), st.pose)
		if err != nil {
			panic(fmt.Sprintf("session: %v", err)) // a gap is a step for any quantities
		}
		piece := min(to, st.time+sensor.Time(carryPieceS*1e9))
		q := whole.Q[0] * float64(piece-st.time) / float64(to-st.time)
		sigma := math.Sqrt(q)
		for l := st.belief.Level + 1; l < s.lines.Levels() && s.cellsM[l] <= 2*sigma; l++ {
			filter.Relevel(st.belief, s.lines, l, &s.desk().work)
		}
		parts := math.Max(1, q/(partM*partM))
		made += float64(st.belief.Cells()) * parts * (1 + 12*math.Min(sigma, partM)/s.cellM())
		if made > s.maxCarried {
			s.lose(to.Seconds(st.time), false)
			s.leaveRoads(float64(whole.Add[0]*whole.Add[0]) + whole.Q[0])
			st.gapS += to.Seconds(st.time)
			st.speed = summary.Speed{}
			st.time = to
			return
		}
		s.drift(piece)
	}
}
