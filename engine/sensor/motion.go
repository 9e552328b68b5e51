package sensor

import (
	"math"
	"slices"
	"strings"
)

// Motion collects the increments of one time segment (From, To] and turns
// them into one filter.Step. One goroutine owns it; Reset makes it ready for
// the next segment.
//
// Sensors of one kind, and kinds that measure the same thing, see the same
// motion: they are combined by inverse variance, never added up. Of the
// forward distances (travel, the forward part of a body displacement, speed),
// of the turns (turn, body displacement) and of the ground displacements
// (displacement, speed with course) those count that cover most of the
// segment. A position moves by the ground displacement on a plane, by the
// forward distance on roads, unless the other one covers more. What nobody
// covers is a gap and spreads the belief by the motion prior.
type Motion struct {
	Suite    *Suite // with its defaults filled in (Suite.For)
	From, To Time
	// GapAgeS is for how long the position had not been covered at From,
	// and the velocity then, if it was known: along the road, or in frame
	// east and north.
	GapAgeS     float64
	HasVelocity bool
	VelocityMPS [2]float64
	// Bend is how the way before From bends.
	Bend Bend

	sources []source
}

// source is what one sensor says about one segment.
type source struct {
	sensor, kind        string
	arm                 Mounting
	covered             Time
	has                 part
	forward, right      float64
	forwardVar          float64
	rightVar            float64
	turn, turnVar       float64
	east, north         float64
	cov                 [3]float64
	scaled, still, slip bool
	// Which errors that are estimated are in it: the gyro's bias in the turn;
	// of the velocity, and of the azimuth, in the ground displacement.
	biased, drifting, turned bool
}

// part says which components of motion a source measures.
type part uint

const (
	hasForward part = 1 << iota
	hasTurn
	hasGround
)

// Reset empties the motion for a new segment.
func (m *Motion) Reset(from, to Time) {
	if to <= from {
		panic("sensor: a segment ends after it begins")
	}
	clear(m.sources)
	m.sources = m.sources[:0]
	m.From, m.To, m.GapAgeS, m.HasVelocity, m.Bend = from, to, 0, false, Bend{}
}

// Seconds is the length of the segment.
func (m *Motion) Seconds() float64 { return m.To.Seconds(m.From) }

// Add adds the part of a prepared event that falls into the segment, if any.
// previous is the time of the same sensor's previous event, or the event's
// own time for its first; only kinds without a beginning of their own need
// it (speed, standstill). It panics on a kind that is no motion. Events of
// one sensor must not overlap.
func (m *Motion) Add(ev Event, previous Time) {
	meas := ev.Measurement
	d := m.Suite.Sensor(ev.Sensor, meas.Kind())
	switch s := meas.(type) {
	case Speed:
		if previous >= ev.Time {
			return
		}
		meas = s.Increment(previous, ev.Time, d.correlation(), true)
	case Standstill:
		m.addStandstill(ev, previous)
		return
	}
	if !IsMotion(meas.Kind()) {
		panic("sensor: " + meas.Kind() + " is no motion")
	}
	cut, since, until, ok := Split(meas, ev.Time, m.From, m.To)
	if !ok {
		return
	}
	src := m.source(ev.Sensor, d)
	src.covered += until - since
	switch c := cut.(type) {
	case Travel:
		src.has |= hasForward
		src.forward += c.DistanceM
		src.forwardVar += square(c.SigmaM)
		src.scaled = d.Kind == KindTravel
		src.slip = true
	case Turn:
		src.has |= hasTurn
		src.turn += c.AngleRad
		src.turnVar += square(c.SigmaRad)
		src.biased = d.has(NuisanceGyroBias)
	case Displacement:
		src.has |= hasGround
		src.east += c.EastM
		src.north += c.NorthM
		for i, v := range c.CovM2 {
			src.cov[i] += v
		}
		src.drifting, src.turned = d.has(NuisanceVelocityEast), d.has(NuisanceAzimuth)
		if d.Kind == KindSpeed { // on roads it serves as a distance
			s := meas.(Displacement)
			sign := math.Copysign(1, ev.Measurement.(Speed).MPS)
			src.has |= hasForward
			src.forward += sign * hypot(s.EastM, s.NorthM) * until.Seconds(since) / ev.Time.Seconds(s.Since)
			src.forwardVar += c.CovM2[0]
			src.slip = true
		}
	case BodyDisplacement:
		src.has |= hasForward | hasTurn
		// Forward and right are in the axes at the middle of each part: turn
		// them into the axes at the middle of the whole so far. For parts of
		// one segment that is a second-order effect in the turn.
		half := 0.5 * (src.turn + c.TurnRad)
		f0, r0 := rotateBody(src.forward, src.right, 0.5*c.TurnRad)
		f1, r1 := rotateBody(c.ForwardM, c.RightM, -(half - 0.5*c.TurnRad))
		src.forward, src.right = f0+f1, r0+r1
		src.forwardVar += square(c.SigmaForwardM)
		src.rightVar += square(c.SigmaRightM)
		src.turn += c.TurnRad
		src.turnVar += square(c.SigmaTurnRad)
		src.scaled = true
	}
}

// rotateBody returns the components of (forward, right) in axes that are
// turned clockwise by angle.
func rotateBody(forward, right, angle float64) (f, r float64) {
	s, c := sincos(angle)
	return float64(c*forward) + float64(s*right), float64(c*right) - float64(s*forward)
}

func (m *Motion) addStandstill(ev Event, previous Time) {
	begin := ev.Time - Time(standstillS*1e9)
	if previous < ev.Time {
		begin = max(begin, previous)
	}
	since, until := max(begin, m.From), min(ev.Time, m.To)
	if since >= until {
		return
	}
	src := m.source(ev.Sensor, m.Suite.Sensor(ev.Sensor, KindStandstill))
	s := until.Seconds(since)
	src.covered += until - since
	src.has, src.still = hasForward|hasTurn|hasGround, true
	v := standstillMPerSqrtS * standstillMPerSqrtS * s
	src.forwardVar += v
	src.rightVar += v
	src.cov[0] += v
	src.cov[2] += v
	src.turnVar += standstillRadPerSqrtS * standstillRadPerSqrtS * s
}

// source finds or makes the entry of a sensor; entries are in order of name,
// so that sums do not depend on the order of adding different sensors.
func (m *Motion) source(name string, d Sensor) *source {
	i, found := slices.BinarySearchFunc(m.sources, name, func(s source, n string) int { return strings.Compare(s.sensor, n) })
	if !found {
		m.sources = slices.Insert(m.sources, i, source{sensor: name, kind: d.Kind, arm: d.Mounting})
	}
	return &m.sources[i]
}

// TravelledM is the distance covered in the segment as measured, in metres
// and without a sign; 0 where nothing measured it. Tempering by distance
// (RoadAlignment) uses it.
func (m *Motion) TravelledM() float64 {
	b := m.body()
	g := m.ground(b.turn)
	if g.covered > b.covered {
		return hypot(g.east, g.north)
	}
	return hypot(b.forward, b.right)
}

// BendAfter is how the way bends at To; after a gap it is not known to.
func (m *Motion) BendAfter() Bend {
	b := m.body()
	if b.covered < m.To-m.From {
		return Bend{}
	}
	return m.Bend.after(b.forward, b.turn, b.turnVar)
}

// GapS is how much of the segment, in seconds, no sensor covers.
func (m *Motion) GapS() float64 {
	b := m.body()
	covered := max(b.covered, m.ground(b.turn).covered)
	return float64(m.To-m.From-covered) / 1e9
}
