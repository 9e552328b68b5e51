package session

import (
	"errors"
	"math"

	"leadline/engine/filter"
	"leadline/engine/kernel"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// aside is what is kept beside the belief: on roads, that the vehicle is on none of
// them, with a position of its own; and that it is lost, which says nothing of where it
// is. The belief has what is left of 1. A belief on a plane goes where the motion
// says, beyond the heights, too: being off the map is within it.
type aside struct {
	off   float64 // probability
	loose filter.Loose
	lost  float64 // probability
	// roadM is the way travelled since roads and plane last exchanged mass,
	// quietS for how long the vehicle has been silent or standing.
	roadM, quietS float64
	alarm         bool // lost
	// woke is when the last quiet of more than quietAfterS ended; search is on
	// its way, nil for none, and searched when the last one came in; sure is when being
	// lost was last as good as ruled out.
	woke, searched, sure sensor.Time
	tries                int // searches since the vehicle was located, or woke
	search               *search
	named                int // the search of a checkpoint, by its number from 1
}

func (a *aside) on() float64 { return 1 - a.off - a.lost }

// The hypotheses beside the belief.
const (
	// exchangeM is after how many metres roads and plane exchange mass: over
	// less, the comparison with the road (its power a metre) tells little.
	exchangeM = 5.0
	// smallShare is the probability of being off below which loose is kept as
	// few Gaussians, and does not come back onto roads: a tenth of an integrity
	// risk of 0.01.
	smallShare  = 1e-3
	fewLoose    = 6
	mostLoose   = 32
	leastOn     = 1e-9 // of each hypothesis that there is, so that it can grow again
	enterSigmaM = 5.0  // about a road: lane, map error, and what the driver cuts off
	enterRad    = 15 * math.Pi / 180
	besideM     = 100.0 // from the outermost roads, a vehicle is still among them
	// quietAfterS is after how long a silence or a stop is longer than those of
	// traffic (practice).
	quietAfterS = 60.0
	// alarmFrom is the probability of being lost that is said aloud in any case.
	alarmFrom = 0.5
	quietMPS  = 0.1
)

// raise keeps the alarm of being lost by the posterior.
func (a *aside) raise(p *summary.Posterior) bool {
	switch {
	case p.Lost >= alarmFrom:
		a.alarm = true
	case p.Status == summary.Located:
		a.alarm, a.tries = false, 0
	}
	return a.alarm
}

// rates are those of the suite, 0 where it has none.
type rates struct{ off, in, lost, moved float64 }

func (s *Session) setRates() {
	v := &s.suite.Vehicle
	if s.lines == nil {
		if q := s.state.belief; len(q.Axes) == 0 { // of a grid with velocities nothing is kept
			s.rates.lost, s.rates.moved = rateOf(v.LostPerS), rateOf(v.MovedPerS)
		}
		return
	}
	s.rates = rates{*v.OffMapPerM, *v.OnMapPerM, *v.LostPerS, *v.MovedPerS}
	loose, ok := filter.NewLoose(s.state.belief.Quantities)
	s.near, _ = s.lines.(filter.Nearby)
	if !ok || s.near == nil {
		s.rates.off = 0 // nobody knows where it goes, or how it comes back
	}
	s.state.aside.loose = loose
	s.entry = filter.Entry{LateralVar: enterSigmaM * enterSigmaM, HeadingVar: enterRad * enterRad}
	if s.rates.lost > 0 || s.rates.moved > 0 {
		s.survey()
	}
}

// rateOf is 0 where the suite does not say.
func rateOf(rate *float64) float64 {
	if rate == nil {
		return 0
	}
	return *rate
}

// anyPlace is the belief of a vehicle that may be anywhere on a plane, which nothing
// moves or weighs: what it expects of a measurement is what is expected of a lost one.
func (s *Session) anyPlace() *filter.Belief {
	if s.nowhere == nil {
		b, err := filter.Seed(s.space, filter.Anywhere{}, s.state.belief.Quantities, anyPlaces)
		if err != nil {
			panic("session: " + err.Error()) // setRates has tried it
		}
		s.nowhere = b
	}
	return s.nowhere
}

// anyPlaces is the number of cells, or Gaussians, of anyPlace: of a map of 20 km the
// places are 300 m apart. A cell's width is in what it expects.
const anyPlaces = 4096

// survey takes the area of the map's box, m², at least that over which outlying
// fixes are flat, and how many roads there are within.
func (s *Session) survey() {
	var all filter.Survey
	if known, ok := s.lines.(filter.Surveyed); ok {
		all = known.Survey()
	} else {
		all = filter.SurveyOf(s.lines)
	}
	d := all.Box.Max.Sub(all.Box.Min)
	s.areaM2 = math.Max(d.E*d.N, 1e8)
	s.entry.Among = s.entry.AmongLines(all.LengthM, (d.E+2*besideM)*(d.N+2*besideM))
}

// moveAside moves what is beside the belief by the motion that was gathered and
// taken by the belief.
func (s *Session) moveAside() {
	if s.rates == (rates{}) {
		return
	}
	st, m := &s.state, &s.motion
	a := &st.aside
	travelled, dt := m.TravelledM(), m.Seconds()
	if a.loose.Len() > 0 {
		at, heading, variance := a.loose.Heaviest()
		known := m.HasVelocity
		m.HasVelocity = false // that is a velocity along the road
		step := &s.desk().aside
		err := m.StepInto(step, a.loose.Quantities, 2, s.space.Frame(), sensor.Pose{At: at, HeadingRad: heading, HeadingVar: variance})
		m.HasVelocity = known
		if err != nil {
			panic("session: " + err.Error()) // it has a heading
		}
		a.loose.Predict(*step, &s.desk().work)
	}
	if s.rates.off > 0 {
		s.exchange(travelled)
	}
	s.lose(dt, m.GapS() == 0 && travelled > quietMPS*dt)
}

// lose lets a while pass in which the vehicle may have come to be elsewhere.
func (s *Session) lose(dt float64, moves bool) {
	a := &s.state.aside
	before := math.Max(a.quietS-quietAfterS, 0)
	a.quietS += dt
	rate := float64(s.rates.lost*dt) + float64(s.rates.moved*(math.Max(a.quietS-quietAfterS, 0)-before))
	if moves {
		if a.quietS-dt > quietAfterS {
			a.woke, a.tries = s.motion.From, 0
		}
		a.quietS = 0
	}
	keep := kernel.Exp(-rate)
	a.off *= keep
	a.lost = math.Min(1-float64(keep*(1-a.lost)), 1-leastOn)
}

// exchange lets mass leave the roads and come back to them, after each exchangeM
// travelled, and takes what has gone over the ends of roads. What leaves a wide
// belief, and what comes back from a place that is as good as unknown, is on its way
// where nobody follows it: it is lost.
func (s *Session) exchange(travelledM float64) {
	st := &s.state
	a, v := &st.aside, &s.suite.Vehicle
	lateral := v.LateralSigmaM * v.LateralSigmaM
	s.takeDeparted(lateral)
	a.roadM += travelledM
	// Coming back costs a pass over the belief: a wide one is passed over as much
	// less often as it is wide.
	if a.roadM < exchangeM*max(1, float64(st.belief.Cells())/float64(s.wideSize)) {
		return
	}
	way := a.roadM
	a.roadM = 0
	if a.off >= smallShare {
		e := s.entry
		e.Hazard = s.rates.in * way
		_, off, astray := a.loose.Enter(st.belief, s.near, e, a.on(), a.off, &s.desk().work)
		a.off = off
		a.lost += astray
		s.takeDeparted(lateral)
	}
	switch gain := 1 - kernel.Exp(-s.rates.off*way); {
	case !(a.on() > leastOn):
	case st.belief.Cells() < s.wideSize:
		part := filter.Loose{Quantities: a.loose.Quantities}
		st.belief.Loosen(&part, s.lines, lateral, mostLoose, &s.desk().work)
		s.leave(&part, gain)
	case s.entry.Among > 0: // where it leaves them nobody follows
		a.lost += (a.on() - leastOn) * gain
	}
}

// takeDeparted has what has gone over the ends of roads leave them.
func (s *Session) takeDeparted(lateralM2 float64) {
	part := filter.Loose{Quantities: s.state.aside.loose.Quantities}
	if share := s.state.belief.Departed(&part, s.lines, lateralM2, mostLoose, &s.desk().work); share > 0 {
		s.leave(&part, share)
	}
}

// leave adds a share of the belief's mass to what is off.
func (s *Session) leave(part *filter.Loose, share float64) {
	a := &s.state.aside
	if part.Len() == 0 {
		return
	}
	gain := math.Min(a.on()*share, a.on()-leastOn)
	if !(gain > 0) {
		return
	}
	most := fewLoose
	if a.off+gain >= smallShare {
		most = mostLoose
	}
	a.loose.Mix(part, gain/(a.off+gain), most, &s.desk().work)
	a.off += gain
}

// weighAside weighs what is beside the belief by what has weighed the belief,
// with the log evidence on, and returns the evidence of the whole: -Inf if it is
// impossible for all of it.
func (s *Session) weighAside(ev sensor.Event, l any, way bool, on float64) float64 {
	a := &s.state.aside
	if a.off == 0 && a.lost == 0 || ev.Measurement.Kind() == sensor.KindStandstill {
		return on // the latter says nothing of a place
	}
	off := math.Inf(-1)
	var lost float64
	switch {
	case s.lines == nil:
		var err error
		if lost, err = filter.Try(s.anyPlace(), s.space, l, &s.desk().work); errors.Is(err, filter.ErrContradiction) {
			lost = math.Inf(-1)
		}
	case way:
		linear, _ := l.(filter.LinearLikelihood)
		lost = sensor.WayElsewhere(linear, s.state.bend, s.motion.TravelledM())
		off = lost
	default:
		c := s.context(ev)
		lost = sensor.Elsewhere(ev, c, s.areaM2)
		if a.off > 0 {
			off = s.weighOff(ev, c, l)
		}
	}
	logs := [3]float64{on + kernel.Log(a.on()), off + kernel.Log(a.off), lost + kernel.Log(a.lost)}
	most := math.Max(logs[0], math.Max(logs[1], logs[2]))
	if math.IsInf(most, -1) {
		return most
	}
	sum := 0.0
	for i := range logs {
		logs[i] = kernel.Exp(logs[i] - most)
		sum += logs[i]
	}
	a.off, a.lost = logs[1]/sum, logs[2]/sum
	// The belief stays, however little it has, to be come back to.
	if over := a.off + a.lost - (1 - leastOn); over > 0 {
		scale := (1 - leastOn) / (a.off + a.lost)
		a.off *= scale
		a.lost *= scale
	}
	return most + kernel.Log(sum)
}

// weighOff weighs the loose Gaussians by an event and returns its log evidence.
func (s *Session) weighOff(ev sensor.Event, c sensor.Context, of any) float64 {
	a := &s.state.aside
	c.Dim, c.Quantities, c.Plane, c.CellM = 2, a.loose.Quantities, nil, 0
	ls, flat := sensor.OffRoads(ev, c)
	if len(ls) == 0 {
		return flat
	}
	e, err := a.loose.Update(offRoads{s.space}, ls[0], &s.desk().work)
	if errors.Is(err, filter.ErrContradiction) {
		return math.Inf(-1)
	}
	return e
}

// offMap is what the summary takes of it.
func (s *Session) offMap() *summary.OffRoads {
	a := &s.state.aside
	if a.off == 0 {
		return nil
	}
	return &summary.OffRoads{Probability: a.off, Loose: &a.loose}
}
