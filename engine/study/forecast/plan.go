package forecast

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// Plan is a vehicle with its sensors on a path.
type Plan struct {
	Path  *Path
	Space filter.Space
	Suite *sensor.Suite // defaults filled in
	Start float64       // standard deviation an axis of the known start, m

	dim     int
	qs      []filter.Quantity
	sensors []planned
	// altitudeM is that of a vehicle with a clearance.
	altitudeM float64
	// fixesS are times of single fixes beside the sensors', with their sigma.
	fixesS    []float64
	fixSigmaM float64
	// stop, if set, is asked at each step; an error of it ends what is done.
	stop func() error
	// untilS ends the plan before the path does; 0: with the path.
	untilS float64
}

// planned is a sensor and how often it speaks.
type planned struct {
	sensor.Sensor
	hz float64
	// beacons are those that a range or a bearing may be of.
	beacons []sensor.Place
}

// The rates of sensors whose rate is not given, Hz: nothing here depends on how
// finely a motion is cut (steps of 2 m and less), and one measurement a second
// is common; satellite fixes are what fails, and there are none unless asked for.
const (
	motionRoadsHz = 5.0
	motionPlaneHz = 1.0
	otherHz       = 1.0
	mostHz        = 100.0
)

// NewPlan puts a suite on a path. rates are of sensors by name; 0 switches one
// off. startSigmaM is how well the start is known.
func NewPlan(path *Path, suite *sensor.Suite, rates map[string]float64, startSigmaM float64) (*Plan, error) {
	p := &Plan{Path: path, Space: path.space, Start: startSigmaM, dim: 2}
	if path.legs != nil {
		p.dim = 1
	}
	if suite == nil || len(suite.Sensors) == 0 {
		return nil, fmt.Errorf("the suite declares no sensors: a forecast needs to know them, as a starter suite does")
	}
	if err := suite.Validate(); err != nil {
		return nil, err
	}
	if err := suite.CheckSpace(p.dim); err != nil {
		return nil, err
	}
	p.Suite = suite.For(p.dim)
	p.qs = p.Suite.Quantities(p.dim)
	if err := checkSpeed(suite, p.Suite, path.lengthM/path.durationS()); err != nil {
		return nil, err
	}
	if !(startSigmaM > 0 && startSigmaM <= 1e6) {
		return nil, fmt.Errorf("the start's sigma is %v m: it must be above 0 and at most 1e6", startSigmaM)
	}
	moves := false
	for name := range rates {
		if !slices.ContainsFunc(suite.Sensors, func(d sensor.Sensor) bool { return d.Name == name }) {
			return nil, fmt.Errorf("a rate is given for %q, which is no sensor of the suite: there are %s", name, strings.Join(names(suite), ", "))
		}
	}
	for _, d := range p.Suite.Sensors {
		hz, given := rates[d.Name]
		if !given {
			hz = defaultHz(d.Kind, p.dim)
		}
		if !(hz >= 0 && hz <= mostHz) {
			return nil, fmt.Errorf("the rate of %q is %v Hz: it must be from 0 to %v", d.Name, hz, mostHz)
		}
		if hz == 0 || !forecasted(d.Kind) || d.Kind == sensor.KindBarometer && p.dim == 2 {
			continue
		}
		s := planned{Sensor: d, hz: hz}
		if d.Kind == sensor.KindRange || d.Kind == sensor.KindBearing {
			s.beacons = p.Suite.Beacons
		}
		p.sensors = append(p.sensors, s)
		moves = moves || sensor.IsMotion(d.Kind) && d.Kind != sensor.KindTurn
	}
	if !moves {
		return nil, fmt.Errorf("no sensor of the suite measures distance, speed or displacement at a rate above 0: nothing can be forecast")
	}
	p.altitudeM = p.highest() + clearanceM
	// Each sensor must have its noise from the suite: the first events tell.
	w := p.world(nil)
	for w.more() && w.t <= math.Min(path.durationS(), 2) {
		if err := w.step(); err != nil {
			return nil, err
		}
	}
	return p, nil
}

// forecasted reports whether a kind is simulated: not what a driver says, and not
// what a post hears.
func forecasted(kind string) bool {
	return kind != sensor.KindSighting && kind != sensor.KindAcousticBearing && kind != sensor.KindStandstill
}

// LeftOut names the suite's sensors that a forecast takes no notice of, and why.
func (p *Plan) LeftOut() (out []string) {
	for _, d := range p.Suite.Sensors {
		if slices.ContainsFunc(p.sensors, func(s planned) bool { return s.Name == d.Name }) {
			continue
		}
		why := "rate 0"
		if !forecasted(d.Kind) {
			why = d.Kind + " is not forecast"
		}
		out = append(out, d.Name+" ("+why+")")
	}
	return out
}

// Rates says how often which sensor speaks, Hz.
func (p *Plan) Rates() map[string]float64 {
	out := map[string]float64{}
	for _, s := range p.sensors {
		out[s.Name] = s.hz
	}
	return out
}

func names(s *sensor.Suite) (out []string) {
	for _, d := range s.Sensors {
		out = append(out, d.Name)
	}
	return out
}

func defaultHz(kind string, dim int) float64 {
	switch {
	case kind == sensor.KindFix:
		return 0
	case sensor.IsMotion(kind) && dim == 1:
		return motionRoadsHz
	case sensor.IsMotion(kind):
		return motionPlaneHz
	}
	return otherHz
}

// clearanceM is how far above the highest ground of its path an aircraft flies
// (practice); it matters for a beam's width alone.
const clearanceM = 300.0

// highest is the greatest known height along the path, 0 if none is.
func (p *Plan) highest() float64 {
	most := math.Inf(-1)
	n := min(10_000, 2+int(p.Path.lengthM/20))
	for i := range n {
		q := p.Path.place(p.Path.lengthM * float64(i) / float64(n-1))
		if h := p.columns(q, filter.WantHeight).Height[0]; h > most {
			most = h
		}
	}
	if math.IsInf(most, -1) {
		return 0
	}
	return most
}

// columns is what the map says at a place.
func (p *Plan) columns(q place, wants filter.Wants) *filter.Columns {
	c := &filter.Columns{Wants: wants}
	if p.dim == 1 {
		p.Space.(filter.LineSpace).Sample(c, []int32{q.chart}, []float64{q.alongM}, 1)
		return c
	}
	c.Resize(wants, 2, 1)
	c.East[0], c.North[0] = q.at.E, q.at.N
	p.Space.(filter.PlaneSpace).Sample(c)
	return c
}

// beside is the point so far to the right of a place.
func beside(q place, rightM float64) geo.Point {
	d := geo.Direction(q.heading)
	return geo.Point{E: q.at.E + rightM*d.N, N: q.at.N - rightM*d.E}
}
