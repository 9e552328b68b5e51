package summary

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/monitor"
)

// Posterior is what goes out. Directions in it are clockwise from true north
// and covariances are in true east and north, unless a name says Frame;
// lengths are true metres. Its slices are reused when it is given to Summarize
// again.
type Posterior struct {
	TimeNS int64 // nanoseconds since the Unix epoch, UTC
	Status Status
	Map    string // fingerprint

	// MeanFrame and CovFrame are in the metres of the map's frame; Mean and
	// Cov are the same on the globe.
	MeanFrame geo.Point
	CovFrame  Cov
	Mean      geo.LonLat
	Cov       Cov

	MostProbable Cell

	// Modes are the heaviest, by falling mass; ModeCount is how many there
	// are and ModeRest the mass of those that are not listed.
	Modes     []Mode
	ModeCount int
	ModeRest  float64

	Heading Direction
	Speed   Speed

	// Edges are the directed edges of a road map by falling probability;
	// EdgeCount is how many have any and EdgeRest what the others hold. Empty
	// on a plane.
	Edges     []Edge
	EdgeCount int
	EdgeRest  float64

	// Radii around the mean that hold 50, 95 and 99 %.
	Radius50M, Radius95M, Radius99M float64
	// OffMap is the probability of being off the map, whose places are part of
	// mean, covariance, radii, modes and protection; Lost that of being where
	// neither map nor motion says, which is not.
	OffMap, Lost float64
	// LostAlarm says that being lost is the likeliest, or was, or that the whole map
	// was searched, and the vehicle has not been located since. The session sets it.
	LostAlarm  bool
	Protection Protection
	// AlertLimitM is the one of the options, which Radius95M is compared with.
	AlertLimitM float64

	Nuisances []Nuisance
	// EntropyNats is the differential entropy of the place, in nats relative
	// to one metre on roads and one square metre on a plane.
	EntropyNats float64

	// Evidence is that of each measurement at this time, LogEvidence the sum
	// since the start.
	Evidence    []Evidence
	LogEvidence float64
	Counts      Counts

	// Alarms are those that hold; Sensors say how the measurements of each
	// sensor agree with what was expected of them.
	Alarms  []monitor.Alarm
	Sensors []monitor.Consistency

	// GapS is for how long, of the time since the posterior before, nothing
	// measured the motion. Revises says that this posterior takes the place
	// of an earlier one for the same time. The session sets both.
	GapS    float64
	Revises bool
}

// Cov is a covariance over east and north, m².
type Cov struct{ EE, EN, NN float64 }

// Axes returns the standard deviations along the major and the minor axis of
// the error ellipse, in metres:
//
//	d² = (EE+NN)/2 ± sqrt(((EE-NN)/2)² + EN²)
//
// K times the major one is the horizontal protection level of RTCA DO-229,
// appendix J. A minor variance that rounding made negative counts as 0.
func (c Cov) Axes() (majorM, minorM float64) {
	l1, l2 := c.eigen()
	return math.Sqrt(l1), math.Sqrt(l2)
}

func (c Cov) eigen() (l1, l2 float64) {
	half, diff := 0.5*(c.EE+c.NN), 0.5*(c.EE-c.NN)
	root := math.Sqrt(float64(diff*diff) + float64(c.EN*c.EN))
	return math.Max(half+root, 0), math.Max(half-root, 0)
}

// axis returns the unit vector of the major axis; east if there is none.
func (c Cov) axis() geo.Point {
	diff := 0.5 * (c.EE - c.NN)
	root := math.Sqrt(float64(diff*diff) + float64(c.EN*c.EN))
	v := geo.Point{E: root + diff, N: c.EN}
	if diff < 0 {
		v = geo.Point{E: c.EN, N: root - diff}
	}
	n := v.Norm()
	if n == 0 {
		return geo.Point{E: 1}
	}
	return geo.Point{E: v.E / n, N: v.N / n}
}

// Cell is the most probable cell: that of the greatest density, the first of
// several.
type Cell struct {
	Index    [2]int32 // chart and cell on roads, column and row on a plane
	Place    geo.Point
	Position geo.LonLat
	AlongM   float64 // from the chart's start, on roads
	Mass     float64
	Name     string // of the road
}

// Mode is one place where the vehicle may be: a peak of the belief and what
// belongs to it.
type Mode struct {
	Mass      float64
	MeanFrame geo.Point
	Mean      geo.LonLat
	Cov       Cov // spread around its mean
	// Charts are the directed edges that hold most of it, by falling
	// probability, up to ChartsPerMode; empty on a plane.
	Charts     [ChartsPerMode]Edge
	ChartCount int
}

// ChartsPerMode bounds the directed edges listed for a mode.
const ChartsPerMode = 4

// Edge is one direction of a road.
type Edge struct {
	Chart       int32
	Twin        int32 // the other direction, -1 if there is none
	Name        string
	Probability float64
}

// Direction is a heading with its circular standard deviation
// sqrt(-2 ln R), at most π/sqrt(3), that of no knowledge.
type Direction struct {
	Known    bool
	TrueRad  float64 // in [0, 2π)
	SigmaRad float64
}

// Speed is the vehicle's speed where a sensor gives it or it is estimated, then on a
// plane with the direction in which the vehicle goes, if that is known to 90°.
type Speed struct {
	Known         bool
	MPS, SigmaMPS float64
	Course        Direction
}

// Protection is the smallest circle around the mean that the vehicle is
// outside of with at most the integrity risk, given the belief.
type Protection struct {
	Risk    float64
	Bounded bool
	RadiusM float64 // +Inf if not Bounded
	Reason  string  // why it is not
}

// Nuisance is a quantity that is estimated along the way.
type Nuisance struct {
	Name        string
	Mean, Sigma float64 // in the unit that ends the name
}

// Evidence is ln p(measurement | all before) of one measurement.
type Evidence struct {
	Sensor      string
	Number      uint64
	Kind        string
	LogEvidence float64
	// Withheld says that the measurement was only tried: its sensor is isolated.
	Withheld bool
}

// Counts of a session so far: measurements accepted and refused, and
// fractions of the whole mass that the belief no longer holds.
type Counts struct {
	Accepted, Refused uint64
	Pruned            float64
	LeftMap           float64 // over a road's end, where that is not followed
	Restart           float64
}
