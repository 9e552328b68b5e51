package forecast

import (
	"fmt"
	"math"
	"runtime"
	"sync"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// Spot is a place of a whole map with what is told there to a vehicle that comes by.
type Spot struct {
	Chart int32 // on roads; -1 on a plane
	At    geo.LonLat
	// RMSM is the root of the mean squared error that the stretch alone leaves of the
	// place (on roads of the place along the road, at the stretch's end), nothing being
	// known before: that of the inverse of the Fisher information of its measurements,
	// on roads less what is lost since by how the way driven differs from that on the map
	// (sensor.Vehicle.MapVar). +Inf where they tell nothing.
	RMSM float64
	// Ambiguity is the part of the other spots, farther than the limit away, in the
	// mixture over all spots, as likely beforehand as one another, if along the
	// stretch is measured what is expected there.
	Ambiguity float64
	profile   []float64
	at        geo.Point
}

// WholeOptions say how a map is looked at.
type WholeOptions struct {
	SpeedMPS, StretchM, LimitM float64
	Rates                      map[string]float64
	// Stop, if set, is asked often: an error of it ends
	// the look.
	Stop func() error
}

func (o *WholeOptions) stopped() error {
	if o.Stop == nil {
		return nil
	}
	return o.Stop()
}

const (
	maxSpots      = 40_000
	profileSteps  = 24
	mostWholeSkip = 40.0 // nats: what is less alike counts for nothing
)

// bare is a plan without a path.
func bare(space filter.Space, suite *sensor.Suite, o *WholeOptions) (*Plan, float64, error) {
	p := &Plan{Space: space, dim: 2}
	if _, ok := space.(filter.LineSpace); ok {
		p.dim = 1
	}
	if err := suite.CheckSpace(p.dim); err != nil {
		return nil, 0, err
	}
	p.Suite = suite.For(p.dim)
	p.qs = p.Suite.Quantities(p.dim)
	if o.LimitM == 0 {
		o.LimitM = p.Suite.Vehicle.AlertLimitM
	}
	if o.StretchM == 0 {
		o.StretchM = p.stretchM()
	}
	if !(o.SpeedMPS > 0) {
		return nil, 0, fmt.Errorf("the speed is %v m/s: give one above 0", o.SpeedMPS)
	}
	if err := checkSpeed(suite, p.Suite, o.SpeedMPS); err != nil {
		return nil, 0, err
	}
	if !(o.StretchM > 0) || !(o.LimitM > 0) {
		return nil, 0, fmt.Errorf("the stretch is %v m and the limit %v m: both must be above 0", o.StretchM, o.LimitM)
	}
	return p, o.StretchM / profileSteps, nil
}

// Heights looks at a height map at points of its frame: a straight stretch through
// each point from west to east, and one from south to north, with the readings of
// the suite's clearance or sounding sensor. Points whose stretches are not wholly
// known are left out of the mixture, and have no figures (NaN).
func Heights(space filter.PlaneSpace, suite *sensor.Suite, points []geo.Point, o WholeOptions) ([]Spot, error) {
	p, stepM, err := bare(space, suite, &o)
	if err != nil {
		return nil, err
	}
	if len(points) > maxSpots {
		return nil, fmt.Errorf("%d places are to be looked at: at most %d are possible", len(points), maxSpots)
	}
	var sigmaM, hz float64
	offset := false
	for _, d := range p.Suite.Sensors {
		if d.Kind != sensor.KindClearance && d.Kind != sensor.KindSounding {
			continue
		}
		sigmaM, hz = d.Noise.SigmaM, otherHz
		if given, ok := o.Rates[d.Name]; ok {
			hz = given
		}
		for _, n := range d.Nuisances {
			offset = offset || n.Name == sensor.NuisanceAltimeterOffset || n.Name == sensor.NuisanceTide
		}
		break
	}
	if !(sigmaM > 0) || !(hz > 0) {
		return nil, fmt.Errorf("the suite has no clearance or sounding with a noise sigma_m and a rate above 0: nothing over a height map tells the place")
	}
	out := make([]Spot, len(points))
	readings := math.Max(1, o.StretchM/o.SpeedMPS*hz) / profileSteps // a step
	c := filter.Columns{}
	variance := 0.0
	for i, q := range points {
		if err := o.stopped(); err != nil {
			return nil, err
		}
		s := &out[i]
		s.Chart, s.at, s.At = -1, q, space.Frame().Inverse(q)
		c.Resize(filter.WantHeight, 2, 2*profileSteps)
		for k := range profileSteps {
			d := (float64(k) - float64(profileSteps-1)/2) * stepM
			c.East[k], c.North[k] = q.E+d, q.N
			c.East[profileSteps+k], c.North[profileSteps+k] = q.E, q.N+d
		}
		space.Sample(&c)
		var ee, en, nn float64
		known := true
		for k, h := range c.Height {
			known = known && h == h
			v := (sigmaM*sigmaM + c.HeightVar[k]) / readings
			variance = math.Max(variance, v)
			ee, en, nn = ee+c.SlopeE[k]*c.SlopeE[k]/v, en+c.SlopeE[k]*c.SlopeN[k]/v, nn+c.SlopeN[k]*c.SlopeN[k]/v
		}
		if !known {
			s.RMSM, s.Ambiguity = math.NaN(), math.NaN()
			continue
		}
		s.profile = append([]float64(nil), c.Height...)
		ee, en, nn = ee/2, en/2, nn/2 // one of the two is driven
		s.RMSM = math.Inf(1)
		if det := ee*nn - en*en; det > 1e-12*(ee+nn)*(ee+nn) {
			s.RMSM = math.Sqrt((ee + nn) / det)
		}
	}
	return out, mixture(out, 2*variance, &o, offset, false) // twice: one of the two is driven
}

// Roads looks at the directed edges of a road map, each with as many metres on from
// its beginning as the stretch has, straight on at junctions: what its bends and the
// turns at its end tell, once each 5 m (sensor.RoadAlignment). Its information J, of the
// place where the vehicle is, becomes 1/(1/J + v) where the way gains the variance v.
func Roads(space filter.LineSpace, suite *sensor.Suite, o WholeOptions) ([]Spot, error) {
	if o.SpeedMPS == 0 {
		o.SpeedMPS = 10 // the comparison with the road is by distance
		if most := suite.Vehicle.MaxSpeedMPS; most > 0 {
			o.SpeedMPS = math.Min(o.SpeedMPS, most)
		}
	}
	p, stepM, err := bare(space, suite, &o)
	if err != nil {
		return nil, err
	}
	topology := space.Lines(0)
	if n := len(topology.LengthM); n > maxSpots {
		return nil, fmt.Errorf("the map has %d directed edges: at most %d can be compared, cut it", n, maxSpots)
	}
	compass := false
	for _, d := range p.Suite.Sensors {
		compass = compass || d.Kind == sensor.KindHeading
	}
	heading := filter.Index(p.qs, filter.Heading)
	if heading < 0 {
		return nil, fmt.Errorf("the suite estimates no heading: without a gyro or compass a road map alone tells little")
	}
	align, _ := sensor.RoadAlignment(p.qs, alignmentM)
	out := make([]Spot, len(topology.LengthM))
	for i := range out {
		if err := o.stopped(); err != nil {
			return nil, err
		}
		s := &out[i]
		s.Chart = int32(i)
		chart, along := s.Chart, 0.0
		information, ended := 0.0, false
		for k := range profileSteps {
			q := p.on(chart, along)
			if k == 0 {
				s.at, s.At = q.at, space.Frame().Inverse(q.at)
			}
			unwrapped := q.heading
			if k > 0 {
				turned := geo.WrapPi(q.heading - s.profile[k-1])
				unwrapped = s.profile[k-1] + turned
				if !ended {
					information /= 1 + information*p.Suite.Vehicle.MapVar(stepM, math.Abs(turned))
				}
			}
			s.profile = append(s.profile, unwrapped)
			x := make([]float64, len(p.qs))
			x[heading] = q.heading
			if at, ok := p.linearize(align, q, x); ok {
				row := at.terms.Row[0]
				information += row * row * fisher(&at, 0) * stepM / alignmentM
			}
			for along += stepM; along > topology.LengthM[chart]; {
				along -= topology.LengthM[chart]
				next, jump, ok := p.straightOn(topology, chart)
				if !ok {
					along, ended = topology.LengthM[chart], true
					break
				}
				end := p.on(chart, topology.LengthM[chart])
				if at, ok := p.linearize(align, end, x); ok && math.Abs(jump) > leastJumpRad {
					c := divergence(&at, jump) / alignmentM
					information += c * c / 2
				}
				chart = next
			}
		}
		s.RMSM = math.Inf(1)
		if information > 0 {
			s.RMSM = math.Sqrt(1 / information)
		}
	}
	const tenDegrees = 10 * math.Pi / 180
	return out, mixture(out, tenDegrees*tenDegrees*alignmentM/stepM, &o, !compass, true)
}

// on is the place on a chart.
func (p *Plan) on(chart int32, alongM float64) place {
	c := p.columns(place{chart: chart, alongM: alongM}, filter.WantPosition|filter.WantHeading)
	return place{chart: chart, alongM: alongM, at: geo.Point{E: c.East[0], N: c.North[0]}, heading: c.Heading[0]}
}

// straightOn is the link with the least turn, and that.
func (p *Plan) straightOn(topology *filter.Lines, chart int32) (next int32, jump float64, ok bool) {
	to, _ := topology.Forward.Of(chart)
	end := p.on(chart, topology.LengthM[chart]).heading
	for _, c := range to {
		if j := geo.WrapPi(p.on(c, 0).heading - end); !ok || math.Abs(j) < math.Abs(jump) {
			next, jump, ok = c, j, true
		}
	}
	return next, jump, ok
}

// mixture fills the ambiguities: exp(-½ Σ d²/v) over the steps of two profiles,
// summed over the spots that are farther than the limit, over the same with the
// spot's own 1. With offset their mean difference is free, and taken off.
func mixture(spots []Spot, variance float64, o *WholeOptions, offset, angular bool) error {
	var wait sync.WaitGroup
	next := make(chan int)
	for range runtime.GOMAXPROCS(0) {
		wait.Go(func() {
			for i := range next {
				a := &spots[i]
				sum := 0.0
				for j := range spots {
					b := &spots[j]
					if b.profile == nil || b.at.Sub(a.at).Norm() <= o.LimitM {
						continue
					}
					sum += likeness(a.profile, b.profile, variance, offset, angular)
				}
				a.Ambiguity = sum / (1 + sum)
			}
		})
	}
	var stopped error
	for i := range spots {
		if stopped = o.stopped(); stopped != nil {
			break
		}
		if spots[i].profile != nil {
			next <- i
		}
	}
	close(next)
	wait.Wait()
	return stopped
}

func likeness(a, b []float64, variance float64, offset, angular bool) float64 {
	mean := 0.0
	if offset {
		for k := range a {
			mean += b[k] - a[k]
		}
		mean /= float64(len(a))
		if angular { // the first heading is free, and so are whole turns
			mean = b[0] - a[0]
		}
	}
	sum := 0.0
	for k := range a {
		d := b[k] - a[k] - mean
		if angular {
			d = geo.WrapPi(d)
		}
		if sum += d * d / (2 * variance); sum > mostWholeSkip {
			return 0
		}
	}
	return math.Exp(-sum)
}
