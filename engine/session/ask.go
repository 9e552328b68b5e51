package session

import (
	"fmt"
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// summarise makes the posterior of the present state and takes the pose from
// it.
func (s *Session) summarise() *summary.Posterior {
	st := &s.state
	p := &summary.Posterior{}
	// The posterior of a huge belief comes seldom, and what it is made with is as large
	// as the belief: it is not held meanwhile, nor what moves the belief while it is made.
	huge := s.lines != nil && st.belief.Cells() > s.hugeSize
	if huge {
		s.desk().work.Release()
	}
	in := s.input()
	if huge {
		s.desk().work.Release()
	}
	if err := s.desk().sum.Summarize(p, &in); err != nil {
		panic(fmt.Sprintf("session: %v", err)) // a belief is never empty
	}
	p.GapS = st.gapS
	p.LostAlarm = st.aside.raise(p)
	if !s.standOnLattice() {
		s.stand(p.MeanFrame, p.Heading)
	}
	st.evidence, st.gapS, st.posteriorAt, st.unread = nil, 0, st.time, false
	s.fresh = true
	if huge {
		s.clearDesk()
	}
	return p
}

// pose takes the pose that summarise would, at a fraction of its cost; on roads not
// before somebody asks for it, since odometers and gyros do not.
func (s *Session) pose() {
	if s.state.posedAt, s.state.poseDue = s.state.time, true; s.lines == nil || s.suite.Vehicle.HasVelocity() {
		s.takePose()
	}
}

// poseFor takes the pose if it is due and one of the events, or what measures the
// motion, is turned into the frame by it.
func (s *Session) poseFor(events ...sensor.Event) {
	if !s.state.poseDue {
		return
	}
	for i := range events {
		if !alongRoads(events[i].Measurement) {
			s.takePose()
			return
		}
	}
	for i := range s.log.sources {
		if of := s.log.sources[i].events; !alongRoads(of[len(of)-1].Measurement) {
			s.takePose()
			return
		}
	}
}

// alongRoads says that a measurement means the same on roads wherever the vehicle is.
func alongRoads(m sensor.Measurement) bool {
	switch m.(type) {
	case sensor.Travel, sensor.Turn, sensor.Standstill:
		return true
	}
	return false
}

func (s *Session) takePose() {
	if s.standOnLattice() {
		return
	}
	s.fresh = false // the desk's sum has only part of it
	in := s.input()
	mean, heading, err := s.desk().sum.Pose(&in)
	if err != nil {
		panic(fmt.Sprintf("session: %v", err)) // a belief is never empty
	}
	s.stand(mean, heading)
}

// standOnLattice takes the pose of a lattice without velocities and with nothing beside it,
// which is its mean, without reading its cells one by one; false if the belief is none.
func (s *Session) standOnLattice() bool {
	b := s.state.belief
	if len(b.Axes) > 0 || b.K() > 0 || s.state.aside.off > 0 {
		return false
	}
	_, mean, _ := b.Moments(s.space, &s.desk().work)
	s.stand(mean, summary.Direction{})
	return true
}

// stand keeps where the vehicle is and which way it faces, for what is turned into
// the frame from there.
func (s *Session) stand(at geo.Point, heading summary.Direction) {
	st := &s.state
	st.pose, st.posedAt, st.poseDue = sensor.Pose{At: at, HeadingVar: sensor.NoHeading}, st.time, false
	if heading.Known {
		g, _ := s.space.Frame().Convergence(at)
		st.pose.HeadingRad = geo.WrapPi(heading.TrueRad - g)
		st.pose.HeadingVar = heading.SigmaRad * heading.SigmaRad
	}
}

// read summarizes the present belief into dst and changes nothing else.
func (s *Session) read(sum *summary.Summarizer, dst *summary.Posterior) error {
	in := s.input()
	return sum.Summarize(dst, &in)
}

// input is what the present posterior is made of.
func (s *Session) input() summary.Input {
	st := &s.state
	b := st.belief
	d := s.desk()
	b.Read(&d.cloud, s.space, &d.work)
	if v, ok := s.velocity(); ok {
		st.speed = v
	}
	in := summary.Input{
		TimeNS: int64(st.time), Frame: s.space.Frame(), Belief: b, Cloud: &d.cloud,
		Speed: st.speed, Evidence: st.evidence, LogEvidence: st.logEvidence,
		Accepted: st.processed, Refused: s.refused, RestartMass: b.Restarted,
		Contradicted: st.monitor.Contradicted(), Alarms: st.monitor.Alarms(), Sensors: st.monitor.Sensors(),
		Off: s.offMap(), Lost: st.aside.lost,
	}
	if p, ok := s.space.(filter.PlaneSpace); ok {
		in.OffMapMass = s.beyond(p)
	}
	if s.lines != nil {
		in.Lines = s.lines.Lines(b.Level)
	}
	if s.names != nil {
		in.Names = s.names
	}
	return in
}

// groundRun is how many places beyond looks up at once: as many as stay in the
// cache.
const groundRun = 1024

// beyond is how much of the belief lies where a plane's map ends or knows no
// height; nothing of one that has left the roads.
func (s *Session) beyond(p filter.PlaneSpace) float64 {
	d := s.desk()
	c := &d.cloud
	off, all := 0.0, 0.0
	switch h, ok := p.(interface{ HasHeights() bool }); {
	case !ok:
		return 0
	case h.HasHeights():
		for i := 0; i < len(c.Mass); i += groundRun {
			run := c.Mass[i:min(i+groundRun, len(c.Mass))]
			d.ground.Resize(filter.WantHeight, 2, len(run))
			copy(d.ground.East, c.East[i:])
			copy(d.ground.North, c.North[i:])
			p.Sample(&d.ground)
			for j, m := range run {
				all += m
				if h := d.ground.Height[j]; h != h {
					off += m
				}
			}
		}
	default:
		box := p.Bounds()
		for i, m := range c.Mass {
			all += m
			if !box.Contains(geo.Point{E: c.East[i], N: c.North[i]}) {
				off += m
			}
		}
	}
	if !(off > 0) {
		return 0
	}
	return math.Min(off/all, 1)
}

// refresh has the summarizer look at the present belief, if that has moved on
// since the last posterior. Before the first one there is nothing to ask.
func (s *Session) refresh() error {
	if s.desk(); s.fresh || !s.state.begun {
		return nil
	}
	var p summary.Posterior
	if err := s.read(&s.desk().sum, &p); err != nil {
		return err
	}
	s.fresh = true
	return nil
}

// Region returns the densest part of the plane that holds a fraction of the
// present belief; see summary.Summarizer.Region. The present belief may be
// that of a time after the latest posterior, while posteriors are passed over.
func (s *Session) Region(fraction float64) (*summary.Region, error) {
	if err := s.refresh(); err != nil {
		return nil, err
	}
	return s.desk().sum.Region(fraction)
}

// Inside returns the probability of a polygon under the present belief; see
// summary.Summarizer.Inside.
func (s *Session) Inside(polygon [][]geo.LonLat) (float64, error) {
	if err := s.refresh(); err != nil {
		return 0, err
	}
	return s.desk().sum.Inside(polygon)
}

// Protection returns the protection radius of the present belief at another
// integrity risk than the suite's. An error says what is wrong with the risk.
func (s *Session) Protection(risk float64) (summary.Protection, error) {
	v := s.suite.Vehicle
	sum, err := summary.New(summary.Options{AlertLimitM: v.AlertLimitM, IntegrityRisk: risk, LateralSigmaM: v.LateralSigmaM})
	if err != nil {
		return summary.Protection{}, err
	}
	var p summary.Posterior
	if err := s.read(sum, &p); err != nil {
		return summary.Protection{}, err
	}
	return p.Protection, nil
}
