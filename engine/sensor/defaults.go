package sensor

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// outlierDefault is the probability of an outlier where a suite says nothing
// (practice): one in a hundred for instruments, more for satellite fixes in
// streets and for posts, which now and then hear something else.
func outlierDefault(kind string) float64 {
	switch kind {
	case KindFix:
		return 0.02
	case KindAcousticBearing:
		return 0.05
	case KindHeading, KindClearance, KindSounding, KindBarometer, KindRange, KindBearing:
		return 0.01
	}
	return 0
}

// correlationDefault is how long an error lasts, in seconds, where a suite
// says nothing (practice): a compass and a speed log carry their error
// through a second, and so do satellite fixes at least, barometers and the
// bearings of one post. Ranges, heights under the vehicle and bearings to
// beacons are taken as independent.
func correlationDefault(kind string) float64 {
	switch kind {
	case KindHeading, KindSpeed, KindFix, KindBarometer, KindAcousticBearing:
		return 1
	}
	return 0
}

// fixSpanM is the side of the square over which outlying fixes are flat.
const fixSpanM = 10000

func (d Sensor) outlier() float64 {
	if d.OutlierProbability != nil {
		return *d.OutlierProbability
	}
	return outlierDefault(d.Kind)
}

func (d Sensor) correlation() float64 {
	if d.CorrelationS != nil {
		return *d.CorrelationS
	}
	return correlationDefault(d.Kind)
}

func (d Sensor) maxRange() float64 {
	if d.MaxRangeM != 0 {
		return d.MaxRangeM
	}
	return 10000
}

func (d Sensor) sign() float64 {
	if d.Sign < 0 {
		return -1
	}
	return 1
}

// heightDensity is the density of an unknown height, 1/m.
func (s *Suite) heightDensity() float64 { return 1 / (s.Vehicle.HighestM - s.Vehicle.LowestM) }

// Quantities are what a belief is kept over, for the kinds that the suite
// declares (every kind, if it declares no sensor, on roads; none on a plane).
//
// On roads: the position in the cell; the heading, if something turns or
// measures it (prior 10° about the road's heading, the spread of a driven
// heading about a mapped one; drift 0.1°/√s, which over 100 s covers the 0.8°
// of a gyro off by 30 °/h); the odometer's scale, if there is one (prior 2 %,
// drift 1e-5/√s; wheel odometry is good to 0.5-2 % of distance). All three
// are practice.
//
// On a plane: nothing, unless a motion is in the vehicle's own axes; then
// east, north, heading (prior uniform: σ = π/√3) and the odometer's scale. An
// odometer's scale applies to travel and body_displacement, not to speed.
func (s *Suite) Quantities(dim int) []filter.Quantity {
	mustDim(dim)
	any := func(of func(Sensor) bool) bool {
		for _, d := range s.Sensors {
			if of(d) {
				return true
			}
		}
		return dim == 1 && len(s.Sensors) == 0
	}
	body := any(func(d Sensor) bool {
		return d.Kind == KindTravel || d.Kind == KindTurn || d.Kind == KindBodyDisplacement ||
			d.Kind == KindSpeed && !d.Course
	})
	heading := any(func(d Sensor) bool {
		return d.Kind == KindTurn || d.Kind == KindBodyDisplacement || d.Kind == KindHeading || d.has(NuisanceHeading)
	})
	odometer := any(func(d Sensor) bool {
		return d.Kind == KindTravel || d.Kind == KindBodyDisplacement || d.has(NuisanceOdometerScale)
	})
	var qs []filter.Quantity
	if dim == 1 {
		qs = append(qs, filter.Quantity{Name: filter.Along})
	} else {
		if !body && !s.declares(NuisanceHeading) {
			return nil
		}
		qs = append(qs, filter.Quantity{Name: filter.East}, filter.Quantity{Name: filter.North})
		heading = true
	}
	if heading {
		n := s.nuisance(NuisanceHeading, headingDefault(dim))
		qs = append(qs, filter.Quantity{
			Name: filter.Heading, Angular: true, PriorMean: geo.WrapPi(geo.Rad(n.Mean)),
			PriorVar: square(geo.Rad(n.Sigma)), DriftVar: square(geo.Rad(n.DriftPerSqrtS)),
		})
	}
	if odometer {
		n := s.nuisance(NuisanceOdometerScale, scaleDefault)
		qs = append(qs, filter.Quantity{
			Name: filter.OdometerScale, PriorMean: n.Mean, PriorVar: square(n.Sigma), DriftVar: square(n.DriftPerSqrtS),
		})
	}
	return qs
}

// headingDefault is the heading's nuisance where no sensor describes it.
func headingDefault(dim int) Nuisance {
	sigma := geo.Rad(10)
	if dim == 2 {
		sigma = math.Pi / math.Sqrt(3)
	}
	return Nuisance{Sigma: geo.Deg(sigma), DriftPerSqrtS: 0.1}
}

// scaleDefault is the odometer scale's.
var scaleDefault = Nuisance{Sigma: 0.02, DriftPerSqrtS: 1e-5}

func (d Sensor) has(nuisance string) bool {
	for _, n := range d.Nuisances {
		if n.Name == nuisance {
			return true
		}
	}
	return false
}

func (s *Suite) declares(nuisance string) bool {
	for _, d := range s.Sensors {
		if d.has(nuisance) {
			return true
		}
	}
	return false
}

// nuisance returns the first sensor's nuisance of a name, or the default.
func (s *Suite) nuisance(name string, or Nuisance) Nuisance {
	for _, d := range s.Sensors {
		for _, n := range d.Nuisances {
			if n.Name == name {
				return n
			}
		}
	}
	return or
}
